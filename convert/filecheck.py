"""The written files as they stand: branches.csv against the network rows, and a plain load flow."""

from __future__ import annotations

import copy
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from .flow import Rows, quiet_runpp

if TYPE_CHECKING:
    from pandas import DataFrame

#: a re-run reading may differ from the expected one by this share of it
TOLERANCE = 1e-8
BRANCH_TABLE = "branch table"
#: a part of a complex value is as exact as the whole of it
_WHOLE = {"r_pu": ("r_pu", "x_pu"), "x_pu": ("r_pu", "x_pu"), "g_pu": ("g_pu", "b_pu")}


def branch_table(rows: Rows, branches: DataFrame) -> DataFrame:
    """Hold branches.csv against the rows of the files: per unit, ratio, shift and busbars."""
    order = pd.Index(branches["name"]).get_indexer(pd.Index(rows.trafo["name"]))
    column = {name: branches[name].to_numpy()[order] for name in branches.columns}
    column["y_pu"] = np.hypot(column["g_pu"].astype(float), column["b_pu"].astype(float))
    row = {
        name: pd.to_numeric(rows.trafo[name], errors="coerce").to_numpy(dtype=float)
        for name in ("sn_mva", "vn_hv_kv", "vn_lv_kv", "vk_percent", "vkr_percent", "pfe_kw",
                     "i0_percent", "shift_degree")
    }  # fmt: skip
    with np.errstate(all="ignore"):
        base = (row["vn_lv_kv"] / rows.kv[:, 1]) ** 2 * column["base_mva"] / row["sn_mva"] / 100
        g = row["pfe_kw"] / row["sn_mva"] / 10
        found = {
            "r_pu": row["vkr_percent"] * base,
            "x_pu": np.sqrt(row["vk_percent"] ** 2 - row["vkr_percent"] ** 2) * base,
            "g_pu": g / base / 1e4,
            "y_pu": row["i0_percent"] / base / 1e4,
            "ratio_pu": row["vn_hv_kv"] / row["vn_lv_kv"] * rows.kv[:, 1] / rows.kv[:, 0],
            "shift_deg": row["shift_degree"],
        }
    for at, end in enumerate(("from", "to")):
        busbar = column[f"{end}_busbar"]
        alone = [f"{name}: {bus}" for name, bus in zip(column["name"], busbar, strict=True)]
        named = np.where(column["phases"] == 1, np.array(alone, dtype=object), busbar)
        right = named.astype(str) == rows.names[:, at].astype(str)
        found[f"base_kv_{end}"] = np.where(right, rows.kv[:, at], np.nan)
    parts = []
    for quantity, value in found.items():
        part = pd.DataFrame({"name": column["name"], "state": "study", "test": BRANCH_TABLE})
        part["quantity"] = quantity
        part["unit"] = next(word for word in ("pu", "deg", "kv") if word in quantity)
        part["certificate"] = part["correction"] = part["why"] = ""
        wanted, whole = column[quantity].astype(float), np.abs(column[quantity].astype(float))
        if quantity in _WHOLE:
            whole = np.hypot(*(column[name].astype(float) for name in _WHOLE[quantity]))
        part["expected"], part["retest"] = wanted, value
        share = (value - wanted) / np.where(whole == 0, 1.0, whole)
        part["difference_percent"] = np.where(np.isnan(share), np.inf, 100 * share)
        part["verdict"] = np.where(np.abs(share) <= TOLERANCE, "pass", "fail")
        parts.append(part)
    return pd.concat(parts, ignore_index=True)


def plain_flows(networks: dict[str, Any]) -> DataFrame:
    """Run each file as a planner would: every busbar in service must get a voltage."""
    rows = []
    for file, net in networks.items():
        trial = copy.deepcopy(net)
        try:
            quiet_runpp(trial)
            empty = int(trial.res_bus["vm_pu"][trial.bus["in_service"]].isna().sum())
        except Exception:  # an edited file can make the library raise anything
            empty = max(1, len(trial.bus))
        rows.append(
            {
                "name": file,
                "state": "study",
                "test": "plain load flow",
                "quantity": "busbars without volts",
                "unit": "count",
                "certificate": "",
                "correction": "",
                "expected": 0.0,
                "retest": float(empty),
                "difference_percent": 100.0 * empty,
                "verdict": "fail" if empty else "pass",
            }
        )
    return pd.DataFrame(rows)
