"""Load flows on the written files, held against the hand regulation and the certificate.

The proof knows the network files, what branches.csv and units.csv say, and what was expected; it
turns the library's results into volts, amps and watts itself. pandapower is imported when a
network is solved, not before.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from . import entries
from .errors import Finding, Severity
from .filecheck import TOLERANCE, branch_table, plain_flows
from .flow import Flow, Rows, read_network, solve

if TYPE_CHECKING:
    from pandas import DataFrame

FILES = ("network.json", "single_phase.json")
#: an angle is compared in shares of a full turn
FULL_TURN = 360.0
_FED_PU, _SHORTED_PU = 0.05, 1e-15
KEYS = ["name", "state", "test", "quantity"]


def prove(
    folder: Path,
    branches: DataFrame,
    units: DataFrame,
    retest: DataFrame,
    regulation: DataFrame,
    progress: Callable[[str], None] = lambda _: None,
) -> tuple[DataFrame, DataFrame, list[Finding]]:
    """Run the proof on the network files of a folder.

    Parameters
    ----------
    folder : Path
        Holds network.json, single_phase.json or both, as written.
    branches, units : DataFrame
        Contents of branches.csv and units.csv (states `tested` and `study`).
    retest, regulation : DataFrame
        Their expected columns: see `expectation`.
    progress : callable
        Told what is being solved.

    Returns
    -------
    retest, regulation : DataFrame
        The same rows with what the load flow gave, the difference and the verdict.
    findings : list of Finding
        An error for each unit whose proof failed, naming the worst quantity.
    """
    networks = {name: read_network(folder / name) for name in FILES if (folder / name).exists()}
    study = _study_rows(networks, branches)
    tested = _tested_rows(branches, units)
    found: list[DataFrame] = []
    for state, rows in (("tested", tested), ("study", study)):
        progress(f"re-running the tests, {state} state")
        mine = retest[retest["state"] == state]
        found.append(_rerun_open_circuit(rows, mine))
        found.append(_rerun_short_circuit(rows, mine))
    progress("regulation and phase shift")
    found.append(_connection(study, retest))
    found.append(_angles(study))
    retested = _compare(retest, pd.concat(found, ignore_index=True), branches)
    table = branch_table(study, branches)
    retested = pd.concat([retested, table, plain_flows(networks)], ignore_index=True)
    regulated = _regulation(study, branches, regulation)
    findings = _failures(retested, regulated)
    return retested.drop(columns="why"), regulated, findings


def _study_rows(networks: dict[str, Any], branches: DataFrame) -> Rows:
    """Collect the rows of all files in the order of the branches; a missing one is all NaN."""
    parts = []
    for file, net in networks.items():
        trafo = net.trafo.copy()
        ends = [net.bus.reindex(trafo[f"{side}_bus"]) for side in ("hv", "lv")]
        trafo["_hv_name"], trafo["_lv_name"] = (end["name"].to_numpy() for end in ends)
        trafo["_hv_kv"], trafo["_lv_kv"] = (end["vn_kv"].to_numpy() for end in ends)
        trafo["_factor"] = np.sqrt(3.0) if file == FILES[1] else 1.0
        parts.append(trafo)
    everything = pd.concat(parts, ignore_index=True)
    once = everything[~everything["name"].duplicated(keep=False)]
    ordered = once.set_index("name", drop=False)
    ordered = ordered[ordered.index.isin(branches["name"])]
    order = pd.Index(branches["name"])
    ordered = ordered.loc[order[order.isin(ordered.index)]].reset_index(drop=True)
    return Rows(
        ordered.drop(columns=["_hv_name", "_lv_name", "_hv_kv", "_lv_kv", "_factor"]),
        ordered[["_hv_kv", "_lv_kv"]].to_numpy(dtype=float),
        ordered[["_hv_name", "_lv_name"]].to_numpy(dtype=object),
        ordered["_factor"].to_numpy(dtype=float),
    )


def _tested_rows(branches: DataFrame, units: DataFrame) -> Rows:
    """Build each unit's row at its test's own temperature, write it and read it back."""
    import pandapower as pp

    wide = branches.merge(units[units["state"] == "tested"], on=["name", "rated_mva"], how="left",
                          suffixes=("_branch", ""))  # fmt: skip
    wide = wide.drop_duplicates("name")
    n = len(wide)
    column = {name: wide[name].to_numpy() for name in wide.columns}
    own = {
        **column,
        "hv_bus": np.arange(n),
        "lv_bus": np.arange(n, 2 * n),
        "z": column["r_own_pu"] + 1j * column["x_own_pu"],
        "y": column["g_own_pu"] + 1j * column["b_own_pu"],
    }
    volts = np.concatenate([column["base_kv_from"], column["base_kv_to"]]) * 1e3
    network = entries.Network(
        "tested", "", 1.0, 50.0, entries.buses(np.repeat(column["name"], 2), volts),
        entries.trafo_rows(own), entries.sources(np.full(2 * n, np.nan), volts),
    )  # fmt: skip
    net = pp.from_json_string(entries.network_text(network))
    return Rows(
        net.trafo,
        np.stack([column["base_kv_from"], column["base_kv_to"]], axis=1),
        np.stack([column["from_busbar"], column["to_busbar"]], axis=1),
        np.where(column["phases"] == 1, np.sqrt(3.0), 1.0),
    )


def _wanted(rows: Rows, mine: DataFrame, test: str, drive: str) -> tuple[Any, Any]:
    """Return the driven side (0 HV, 1 LV) and the volts or amps that drive each row's test."""
    driven = mine[(mine["test"] == test) & mine["quantity"].str.endswith(drive)]
    value = dict(zip(driven["name"], driven["expected"], strict=True))
    side = dict(zip(driven["name"], driven["quantity"].str[:2], strict=True))
    names = rows.trafo["name"]
    return (
        np.array([0 if side.get(name) == "hv" else 1 for name in names], dtype=int),
        np.array([value.get(name, np.nan) for name in names], dtype=float),
    )


def _rerun_open_circuit(rows: Rows, mine: DataFrame) -> DataFrame:
    side, volts = _wanted(rows, mine, "open circuit", "volts applied")
    n = np.arange(len(side))
    source = np.full((len(side), 2), np.nan)
    source[n, side] = volts / 1e3 / rows.kv[n, side]
    flow = solve(rows, source)
    state = str(mine["state"].iloc[0])
    out = _reading(rows, flow, state, "open circuit", side, "volts applied", "amps", "watts")
    return pd.concat([out, _reading(rows, flow, state, "open circuit", 1 - side, "volts")])


def _rerun_short_circuit(rows: Rows, mine: DataFrame) -> DataFrame:
    """Solve with both ends held, then scale the fed volts to the test's amps and solve again."""
    side, amps = _wanted(rows, mine, "short circuit", "amps applied")
    n = np.arange(len(side))
    source = np.full((len(side), 2), _SHORTED_PU)
    source[n, side] = _FED_PU
    flow = solve(rows, source, near_rated=False)
    source[n, side] *= amps / (flow.i[n, side] * 1e3 * rows.amp_factor)
    flow = solve(rows, source, near_rated=False)
    state = str(mine["state"].iloc[0])
    return _reading(rows, flow, state, "short circuit", side, "amps applied", "volts", "watts")


def _reading(rows: Rows, flow: Flow, state: str, test: str, side: Any, *words: str) -> DataFrame:
    """Volts [V], amps [A] and watts [W] of one side, as rows to compare."""
    n = np.arange(len(side))
    value = {
        "volts": flow.vm[n, side] * rows.kv[n, side] * 1e3,
        "amps": flow.i[n, side] * 1e3 * rows.amp_factor,
        "watts": flow.p[n, side] * 1e6,
    }
    name = np.where(side == 0, "hv", "lv")
    return pd.concat(
        [
            pd.DataFrame(
                {
                    "name": rows.trafo["name"].to_numpy(),
                    "state": state,
                    "test": test,
                    "quantity": [f"{s} {word}" for s in name],
                    "retest": value[word.split()[0]],
                    "why": flow.why,
                }
            )
            for word in words
        ]
    )


def _connection(rows: Rows, retest: DataFrame) -> DataFrame:
    """Nominal volts of the busbar that each side stands on; NaN if it is another busbar."""
    parts = []
    for at, side in enumerate(("hv", "lv")):
        quantity = f"{side} nominal volts"
        named = retest[retest["quantity"] == quantity].set_index("name")["certificate"]
        names = rows.trafo["name"].to_numpy()
        right = named.reindex(names).to_numpy() == rows.names[:, at]
        parts.append(
            pd.DataFrame(
                {
                    "name": names,
                    "state": "study",
                    "test": "connection",
                    "quantity": quantity,
                    "retest": np.where(right, rows.kv[:, at] * 1e3, np.nan),
                }
            )
        )
    return pd.concat(parts)


def _angles(rows: Rows) -> DataFrame:
    """LV angle at no load against the HV busbar [deg]."""
    source = np.full((len(rows.trafo), 2), np.nan)
    source[:, 0] = 1.0
    flow = solve(rows, source, angles=True)
    return pd.DataFrame(
        {
            "name": rows.trafo["name"].to_numpy(),
            "state": "study",
            "test": "phase shift",
            "quantity": "lv angle",
            "retest": flow.va[:, 1],
            "why": flow.why,
        }
    )


def _compare(retest: DataFrame, found: DataFrame, branches: DataFrame) -> DataFrame:
    """Join what was expected with what was found; the difference is always a number."""
    joined = retest.merge(found, on=KEYS, how="left")
    expected, got = joined["expected"].to_numpy(), joined["retest"].to_numpy()
    scale = np.abs(expected)
    turn = (joined["unit"] == "deg").to_numpy()
    zero = scale == 0
    if zero.any():
        scale = np.where(zero, _rated(joined, branches), scale)
    difference = got - expected
    difference = np.where(turn, (difference + 180) % FULL_TURN - 180, difference)
    share = difference / np.where(turn, FULL_TURN, scale)
    joined["difference_percent"] = np.where(np.isnan(share), np.inf, 100 * share)
    joined["verdict"] = np.where(np.abs(share) <= TOLERANCE, "pass", "fail")
    return joined


def _rated(joined: DataFrame, branches: DataFrame) -> Any:
    """Rated volts, amps or watts of the side: the scale where nothing is expected."""
    unit = branches.set_index("name").loc[joined["name"]]
    hv = joined["quantity"].str.startswith("hv").to_numpy()
    volts = 1e3 * np.where(hv, unit["rated_kv_from"], unit["rated_kv_to"])
    watts = 1e6 * unit["rated_mva"].to_numpy()
    amps = watts / volts / np.sqrt(unit["phases"].to_numpy())
    return np.select([joined["unit"] == "W", joined["unit"] == "A"], [watts, amps], volts)


def _regulation(rows: Rows, branches: DataFrame, regulation: DataFrame) -> DataFrame:
    """Regulation and drop by load flow at every point of the table [percent]."""
    points = regulation[["load_fraction", "power_factor", "sense"]].drop_duplicates()
    n, m = len(rows.trafo), len(points)
    known = branches.set_index("name").loc[rows.trafo["name"]]
    rated_hv = known["rated_kv_from"].to_numpy() / rows.kv[:, 0]
    source = np.stack([rated_hv, np.full(n, np.nan)], axis=1)
    empty = solve(rows, source).vm[:, 1]
    c = points["power_factor"].to_numpy()
    s = np.where(points["sense"] == "lagging", 1.0, -1.0) * np.sqrt((1 - c) * (1 + c))
    load = points["load_fraction"].to_numpy() * (c + 1j * s)
    many = rows.take(np.repeat(np.arange(n), m))
    sources = np.repeat(source, m, axis=0)
    rating = known["rated_mva"].to_numpy()
    nominal = rows.kv[:, 1] / known["rated_kv_to"].to_numpy()
    shunt = (rating[:, None] * load).reshape(-1)
    current = ((rating * nominal)[:, None] * load).reshape(-1)
    loaded = {
        "ieee": solve(many, sources, shunt=shunt).vm[:, 1].reshape(n, m),
        "iec": solve(many, sources, current=current).vm[:, 1].reshape(n, m),
    }
    rise = 100 * (empty[:, None] - loaded["ieee"]) / loaded["ieee"]
    drop = 100 * (empty[:, None] - loaded["iec"]) / empty[:, None]
    keys = ["name", "load_fraction", "power_factor", "sense", "method"]
    parts = []
    for method, value in (("phasor", rise), ("ieee_c57_12_90", rise), ("iec_60076_8", drop)):
        part = points.iloc[np.tile(np.arange(m), n)].reset_index(drop=True)
        part["name"] = np.repeat(rows.trafo["name"].to_numpy(), m)
        part["method"], part["flow_percent"] = method, value.reshape(-1)
        parts.append(part)
    joined = regulation.merge(pd.concat(parts), on=keys, how="left")
    difference = (joined["flow_percent"] - joined["hand_percent"]).to_numpy()
    joined["difference_points"] = np.where(np.isnan(difference), np.inf, difference)
    within = np.abs(difference) <= joined["bound_points"].to_numpy()
    joined["verdict"] = np.where(within, "pass", "fail")
    columns = [*keys, "hand_percent", "flow_percent", "difference_points", "bound_points"]
    return joined[[*columns, "verdict"]]


def _failures(retest: DataFrame, regulation: DataFrame) -> list[Finding]:
    """One error a unit whose proof failed, naming its worst quantity."""
    findings: list[Finding] = []
    bad = retest[retest["verdict"] == "fail"]
    for name, rows in bad.groupby("name", sort=False):
        size = rows["difference_percent"].abs()
        worst = rows.loc[size.idxmax()]
        findings.append(
            Finding(
                Severity.ERROR, str(name), "proof-retest",
                f"{worst['state']} state, {worst['test']}: {worst['quantity']}",
                f"{worst['retest']:.10g} {worst['unit']}",
                f"{worst['expected']:.10g} {worst['unit']}",
                f"{len(rows)} readings of the re-run differ: " + ", ".join(
                    sorted({f"{r.test} {r.quantity}" for r in rows.itertuples()})),
                _cause(worst), "re-run of the tests on the written network",
            )
        )  # fmt: skip
    bad = regulation[regulation["verdict"] == "fail"]
    for name, rows in bad.groupby("name", sort=False):
        worst = rows.loc[rows["difference_points"].abs().idxmax()]
        findings.append(
            Finding(
                Severity.ERROR, str(name), "proof-regulation",
                f"{worst['method']} at {100 * worst['load_fraction']:g} %, cosφ "
                f"{worst['power_factor']:g} {worst['sense']}",
                f"{worst['flow_percent']:.8g} %",
                f"{worst['hand_percent']:.8g} ± {worst['bound_points']:.2g} %",
                f"{len(rows)} points differ",
                "the written row is not the tested transformer",
                "regulation by hand against the load flow",
            )
        )  # fmt: skip
    return findings


def _cause(worst: Any) -> str:
    """Say why a reading differs: no result of the load flow, or another transformer's."""
    why = worst["why"]
    if isinstance(why, str) and why:
        return f"the load flow gave no result: {why}"
    return "the written row is not the tested transformer"


def summary(retest: DataFrame, regulation: DataFrame) -> dict[str, float]:
    """Return the worst residuals: percent for the re-run, share of the bound for regulation."""
    sized = retest[retest["unit"] != "count"]["difference_percent"].abs()
    share = (regulation["difference_points"].abs() / regulation["bound_points"]).groupby(
        regulation["method"]
    )
    return {
        "retest_worst_percent": float(sized.max()),
        **{f"bound_use_{method}": float(value) for method, value in share.max().items()},
    }


def verdicts(*tables: DataFrame) -> Sequence[int]:
    """Return how many rows passed and how many there are."""
    passed = sum(int((table["verdict"] == "pass").sum()) for table in tables)
    return passed, sum(len(table) for table in tables)
