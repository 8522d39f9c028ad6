"""A whole branch table carried to another system base and other busbar voltages."""

from __future__ import annotations

import csv
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from . import circuit, folder, perunit
from .errors import BranchwrightError, Problem
from .quantity import QuantityError, expectation, parse

NUMBERS = ("base_mva", "base_kv_from", "base_kv_to", "rated_kv_from", "rated_kv_to", "rated_mva",
           "r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu", "phases")  # fmt: skip
_POSITIVE = (*NUMBERS[:6], "ratio_pu")
EXTRAS = ("own", "ohm", "percent")
#: a single-phase branch lies line to line or line to neutral: its base against the busbar's volts
#: tells which, as long as the busbar moves by less than this share
_MOST_MOVED = 0.25


def read_branches(path: Path) -> pd.DataFrame:
    """Read a branches.csv, naming line and column of every cell that is no number."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as handle:
            rows = list(csv.reader(handle))
    except OSError as error:
        reason = (error.strerror or type(error).__name__).lower()
        raise BranchwrightError([Problem(str(path), None, "", reason, "a branches.csv")]) from None
    except (UnicodeDecodeError, csv.Error):
        raise BranchwrightError(
            [Problem(str(path), None, "", "no CSV text", "a branches.csv")]
        ) from None
    head = rows[0] if rows else []
    lacking = [name for name in ("name", "from_busbar", "to_busbar", *NUMBERS) if name not in head]
    if lacking:
        problem = Problem(str(path), 1, ", ".join(lacking), "no such column",
                          "the columns of a branches.csv that build has written")  # fmt: skip
        raise BranchwrightError([problem])
    problems: list[Problem] = []
    for line, row in enumerate(rows[1:], 2):
        if len(row) != len(head):
            problems.append(Problem(str(path), line, "", f"{len(row)} cells", f"{len(head)} cells"))
            continue
        for name in NUMBERS:
            cell = row[head.index(name)]
            if not _good(cell, positive=name in _POSITIVE):
                wanted = "a number above zero" if name in _POSITIVE else "a number"
                problems.append(Problem(str(path), line, name, repr(cell[:40]), wanted))
    if problems:
        raise BranchwrightError(problems)
    if len(rows) < 2:
        raise BranchwrightError([Problem(str(path), 1, "", "no branch", "a row a branch")])
    return folder.read_csv(path)


def _good(cell: str, positive: bool) -> bool:
    try:
        value = float(cell)
    except ValueError:
        return False
    return math.isfinite(value) and (value > 0 or not positive)


def read_busbars(path: Path) -> dict[str, float]:
    """Read new nominal volts: CSV with the columns busbar and nominal_voltage (`11.5 kV`)."""
    try:
        with path.open(encoding="utf-8-sig", newline="") as handle:
            reader = csv.DictReader(handle)
            rows = list(reader)
            head = list(reader.fieldnames or [])
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        reason = getattr(error, "strerror", None) or "no CSV text"
        raise BranchwrightError([Problem(str(path), None, "", reason, "a CSV file")]) from None
    if head[:2] != ["busbar", "nominal_voltage"]:
        found = ", ".join(head) or "nothing"
        raise BranchwrightError(
            [Problem(str(path), 1, "", found, "the headings busbar,nominal_voltage")]
        )
    volts: dict[str, float] = {}
    problems: list[Problem] = []
    for line, row in enumerate(rows, 2):
        text = row["nominal_voltage"] or ""
        try:
            value = parse(text, "voltage").value
            if value <= 0:
                raise QuantityError(expectation("voltage"), "it is above zero")
            if row["busbar"] in volts:
                problems.append(Problem(str(path), line, "busbar", row["busbar"], "each once"))
            volts[row["busbar"]] = value
        except QuantityError as error:
            problems.append(
                Problem(str(path), line, "nominal_voltage", repr(text), error.expected, error.mend)
            )
    if problems:
        raise BranchwrightError(problems)
    return volts


def rebase(
    branches: pd.DataFrame,
    base_power: float | None = None,
    busbars: Mapping[str, float] | None = None,
    extras: tuple[str, ...] = (),
) -> pd.DataFrame:
    """Carry a branch table to another system base and other nominal volts.

    Parameters
    ----------
    branches : DataFrame
        As in branches.csv.
    base_power : float, optional
        New three-phase base power [VA]; the table's own where left out.
    busbars : mapping, optional
        New nominal volts [V] of the busbars named; the others keep theirs.
    extras : tuple of str
        Columns to add: `own` (own base), `ohm` (from both sides), `percent`.

    Returns
    -------
    DataFrame
        There and back gives the same floats within 4e-15 relative.

    Raises
    ------
    BranchwrightError
        A busbar that no branch has, or volts that a single-phase branch cannot lie across.
    """
    busbars = dict(busbars or {})
    known = set(branches["from_busbar"]) | set(branches["to_busbar"])
    unknown = [name for name in busbars if name not in known]
    if unknown:
        listed = ", ".join(sorted(known)[:8])
        raise BranchwrightError([f"busbar {name!r}: no branch ends on it; there are {listed}"
                                 for name in unknown])  # fmt: skip
    new = branches.copy()
    single = (branches["phases"] == 1).to_numpy()
    old_s = branches["base_mva"].to_numpy(dtype=float) * 1e6
    s = old_s if base_power is None else np.where(single, base_power / 3.0, base_power)
    volts = {}
    for end in ("from", "to"):
        old = branches[f"base_kv_{end}"].to_numpy(dtype=float) * 1e3
        volts[end] = (old, _moved(branches, end, old, single, busbars))
        new[f"base_kv_{end}"] = volts[end][1] / 1e3
    new["base_mva"] = s / 1e6
    base = {"s": old_s, "s_new": s, "u": volts["to"][0], "u_new": volts["to"][1]}
    for column in ("r_pu", "x_pu"):
        new[column] = perunit.series_to_base(branches[column].to_numpy(), **base)
    for column in ("g_pu", "b_pu"):
        new[column] = perunit.shunt_to_base(branches[column].to_numpy(), **base)
    new["ratio_pu"] = perunit.ratio_to_base(
        branches["ratio_pu"].to_numpy(), *volts["from"], *volts["to"]
    )
    return pd.concat([new, _extra_columns(new, extras)], axis=1)


def _moved(
    branches: pd.DataFrame, end: str, old: Any, single: Any, busbars: Mapping[str, float]
) -> Any:
    """New base volts of one end of every branch."""
    names = branches[f"{end}_busbar"].to_numpy()
    line = np.array([busbars.get(name, np.nan) for name in names], dtype=float)
    neutral = line / math.sqrt(3.0)
    new = np.where(np.isnan(line), old, line)
    across_neutral = single & (np.abs(neutral / old - 1) <= _MOST_MOVED)
    across_lines = ~single | (np.abs(line / old - 1) <= _MOST_MOVED)
    new = np.where(across_neutral, neutral, new)
    unclear = ~np.isnan(line) & ~(across_lines | across_neutral)
    if unclear.any():
        raise BranchwrightError(
            [
                f"{branches['name'].iloc[at]}: single-phase, {old[at] / 1e3:g} kV on {names[at]}: "
                f"read {line[at] / 1e3:g} kV; expected nominal volts within "
                f"{100 * _MOST_MOVED:g} % of its base, or of √3 times its base"
                for at in np.flatnonzero(unclear)
            ]
        )
    return new


def _extra_columns(table: pd.DataFrame, extras: tuple[str, ...]) -> pd.DataFrame:
    """Own-base, ohm and percent columns of a branch table."""
    columns = {name: table[name].to_numpy(dtype=float) for name in NUMBERS}
    s, s_own = columns["base_mva"] * 1e6, columns["rated_mva"] * 1e6
    base_to, own_to = columns["base_kv_to"] * 1e3, columns["rated_kv_to"] * 1e3
    own_from = columns["rated_kv_from"] * 1e3
    own = {}
    for part in ("r", "x", "g", "b"):
        carry = perunit.series_to_base if part in "rx" else perunit.shunt_to_base
        own[part] = carry(columns[f"{part}_pu"], s, s_own, base_to, own_to)
    added: dict[str, Any] = {}
    if "own" in extras:
        added |= {f"{part}_own_pu": value for part, value in own.items()}
    if "ohm" in extras:
        for side, volts in (("from", own_from), ("to", own_to)):
            z_base = circuit.base_impedance(volts, s_own)
            for part in ("r", "x"):
                added[f"{part}_{side}_ohm"] = circuit.ohms(own[part], z_base)
            for part in ("g", "b"):
                added[f"{part}_{side}_siemens"] = own[part] / z_base
    if "percent" in extras:
        added["z_percent"] = 100 * np.hypot(own["r"], own["x"])
        added["r_percent"] = 100 * own["r"]
        added["y_percent"] = 100 * np.hypot(own["g"], own["b"])
        added["g_percent"] = 100 * own["g"]
    return pd.DataFrame(added, index=table.index)
