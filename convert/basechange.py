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
_HEADINGS = ["busbar", "nominal_voltage", "was"]
#: a busbar's old and new nominal volts [V]; the old ones NaN where the file does not say
Volts = tuple[float, float]


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
            if name == "phases" and cell not in ("1", "3"):
                problems.append(Problem(str(path), line, name, repr(cell[:40]), "1 or 3"))
            elif not _good(cell, positive=name in _POSITIVE):
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


def read_busbars(path: Path) -> dict[str, float | Volts]:
    """Read new nominal volts, and the old ones where a column `was` gives them.

    The file is CSV with the headings busbar,nominal_voltage or busbar,nominal_voltage,was; the
    cells hold volts such as `11.5 kV`.
    """
    try:
        with path.open(encoding="utf-8-sig", newline="") as handle:
            reader = csv.DictReader(handle)
            rows = list(reader)
            head = list(reader.fieldnames or [])
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        reason = getattr(error, "strerror", None) or "no CSV text"
        raise BranchwrightError([Problem(str(path), None, "", reason, "a CSV file")]) from None
    if head not in (_HEADINGS[:2], _HEADINGS):
        found = ", ".join(head) or "nothing"
        wanted = f"the headings {','.join(_HEADINGS[:2])} or {','.join(_HEADINGS)}"
        raise BranchwrightError([Problem(str(path), 1, "", found, wanted)])
    volts: dict[str, float | Volts] = {}
    problems: list[Problem] = []
    for line, row in enumerate(rows, 2):
        cells = {name: row[name] or "" for name in head}
        found_volts = {"was": math.nan}
        for name in head[1:]:
            if name == "was" and not cells[name]:
                continue
            try:
                found_volts[name] = parse(cells[name], "voltage").value
                if found_volts[name] <= 0:
                    raise QuantityError(expectation("voltage"), "it is above zero")
            except QuantityError as error:
                read = repr(cells[name])
                problems.append(Problem(str(path), line, name, read, error.expected, error.mend))
        if cells["busbar"] in volts:
            problems.append(Problem(str(path), line, "busbar", cells["busbar"], "each once"))
        old, new = found_volts["was"], found_volts.get("nominal_voltage", math.nan)
        volts[cells["busbar"]] = new if math.isnan(old) else (old, new)
    if problems:
        raise BranchwrightError(problems)
    return volts


def rebase(
    branches: pd.DataFrame,
    base_power: float | None = None,
    busbars: Mapping[str, float | Volts] | None = None,
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
        New nominal volts [V] of the busbars named, or (old, new); the others keep theirs. The old
        ones are needed where only single-phase branches end, which may lie line to line or line
        to neutral: a three-phase branch on the busbar tells them too.
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
    moves = {
        name: volts if isinstance(volts, tuple) else (math.nan, volts)
        for name, volts in (busbars or {}).items()
    }
    known = set(branches["from_busbar"]) | set(branches["to_busbar"])
    unknown = [name for name in moves if name not in known]
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
        volts[end] = (old, _moved(branches, end, moves))
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


def _moved(branches: pd.DataFrame, end: str, moves: Mapping[str, Volts]) -> Any:
    """New base volts [V] of one end of every branch."""
    lines = _old_volts(branches, moves)
    new = branches[f"base_kv_{end}"].to_numpy(dtype=float) * 1e3
    problems = []
    for at, (name, busbar) in enumerate(
        zip(branches["name"], branches[f"{end}_busbar"], strict=True)
    ):
        if busbar not in moves:
            continue
        if branches["phases"].iloc[at] == 3:
            new[at] = moves[busbar][1]
            continue
        ratio = lines.get(busbar, math.nan) / new[at]
        across = [root for root in (1.0, math.sqrt(3.0)) if abs(ratio / root - 1) < 1e-6]
        if across:
            new[at] = moves[busbar][1] / across[0]
        else:
            problems.append(
                f"{name}: single-phase, {new[at] / 1e3:g} kV on {busbar}: read "
                f"{moves[busbar][1] / 1e3:g} kV; expected the busbar's old nominal volts too, to "
                "tell line to line from line to neutral: put them in a column `was`"
            )
    if problems:
        raise BranchwrightError(problems)
    return new


def _old_volts(branches: pd.DataFrame, moves: Mapping[str, Volts]) -> dict[str, float]:
    """Old nominal volts of the busbars, from the file or from a three-phase branch."""
    three = branches[branches["phases"] == 3]
    told = {
        busbar: kv * 1e3
        for end in ("from", "to")
        for busbar, kv in zip(three[f"{end}_busbar"], three[f"base_kv_{end}"], strict=True)
    }
    return told | {name: old for name, (old, _) in moves.items() if not math.isnan(old)}


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
