"""Which units may be reduced: presence of the facts, and power factors of at most one.

A unit that fails a gate is left out of branches and networks and named by an error finding.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from .errors import Finding, Severity
from .plant import Mask, Plant, Status, Table
from .quantity import show
from .standards import COMMON_PRACTICE

Row = Callable[[int], Finding]
#: a reading that a stated result stands in for -> the key of that result
_STATED = {"oc_watts": "no_load_loss", "oc_amps": "no_load_current", "sc_watts": "load_loss",
           "sc_volts": "impedance_voltage"}  # fmt: skip
_BLOCK = {int(Status.GIVEN): "results", int(Status.ASSUMED): "assume"}


def place(units: Table, column: str, row: int) -> str:
    """Return `file:line key` of a reading, as far as the source tells."""
    line = int(units.line[column][row]) if column in units.line else 0
    line = line or int(units.line["row"][row])
    key = units.heading.get(column, column.replace("_", " "))
    block = _BLOCK.get(int(units.status[column][row])) if column in _STATED else None
    if block and units.text[f"{block}_{_STATED[column]}"][row]:
        key = f"{block}.{_STATED[column]}"
    return f"{units.text['file'][row]}:{line} {key}"


def at_unit(units: Table, key: str, row: int) -> str:
    """Return `file:line key` of a key that a unit lacks: the line is the unit's own."""
    line = int(units.line["row"][row])
    if key.startswith("tests.short_circuit."):  # a key of a test that is there
        line = int(units.line["sc_watts"][row]) or line
    return f"{units.text['file'][row]}:{line} {key}"


def each(units: Table, where: Mask, fill: Row) -> Iterator[Finding]:
    """Yield one finding a row of `where`, with the unit's name as its subject."""
    for row in np.flatnonzero(where):
        yield replace(fill(int(row)), subject=str(units.text["name"][row]))


def printed(units: Table, *columns: str, row: int) -> str:
    """Return readings as printed, those that are there, separated by commas."""
    texts = (str(units.word(column)[row]) for column in columns)
    return ", ".join(text for text in texts if text) or "nothing"


def check(plant: Plant, units: Table) -> tuple[Mask, list[Finding]]:
    """Return (n,) bool, which units may be reduced, and the findings of those that may not."""
    findings: list[Finding] = []
    failed = np.zeros(units.n, dtype=np.bool_)
    for where, fill in (*_missing(units), *_far_from_nominal(plant, units), *_power_factors(units)):
        findings.extend(each(units, where, fill))
        failed |= where
    return ~failed, findings


def _missing(units: Table) -> Iterator[tuple[Mask, Row]]:
    load, no_load = units.has("sc_watts"), units.has("oc_watts")
    gates = [
        (~no_load, "no-load-missing", "tests.open_circuit",
         "an open-circuit test, or no_load_loss and no_load_current under results",
         "no shunt branch", "add the test, or say it under assume"),
        (~load, "load-loss-missing", "tests.short_circuit",
         "a short-circuit test, or load_loss and impedance_voltage under results",
         "no series branch", "add the test, or say it under assume"),
        (load & ~units.has("sc_temperature"), "winding-temperature-missing",
         "tests.short_circuit.temperature", "the winding temperature of the short-circuit test",
         "resistance cannot be carried to the study's temperature",
         "read it from the certificate, or say winding_temperature under assume"),
        (load & (units.word("split") == "resistances") & ~separable(units),
         "split-without-resistances", "split",
         "winding resistances of both sides under tests.resistance", "the split cannot be made",
         "add them, or leave split out"),
    ]  # fmt: skip
    gates += [
        (needs_temperature(units) & ~units.has(f"k_{side}"), "metal-missing", f"{side}.metal",
         "copper or aluminium", "the load loss cannot be carried to another temperature",
         "state the metal, or say metal under assume")
        for side in ("hv", "lv")
    ]  # fmt: skip
    for where, rule, key, expected, effect, mend in gates:

        def fill(row: int, rule: str = rule, key: str = key, expected: str = expected,
                 effect: str = effect, mend: str = mend) -> Finding:  # fmt: skip
            return Finding(
                Severity.ERROR, "", rule, at_unit(units, key, row), "nothing", expected,
                f"{effect}: the unit is left out", mend,
            )  # fmt: skip

        yield where, fill


def _far_from_nominal(plant: Plant, units: Table) -> Iterator[tuple[Mask, Row]]:
    for side, base in (("hv", "base_from"), ("lv", "base_to")):
        ratio = units[f"u_{side}"] / units[base]

        def far(row: int, side: str = side) -> Finding:
            return Finding(
                Severity.ERROR, "", "rated-against-nominal",
                place(units, f"{side}_rated_voltage", row),
                against_nominal(plant, units, side, row), "within 0.5 to 1.5 of nominal",
                "no load flow can be trusted there: the unit is left out",
                "the wrong busbar, kV for V, or phase volts for line volts", COMMON_PRACTICE,
            )  # fmt: skip

        yield (ratio <= 0.5) | (ratio >= 1.5), far


def against_nominal(plant: Plant, units: Table, side: str, row: int) -> str:
    """Say rated volts and the busbar's, with the volts to neutral where the winding lies there."""
    rated = show(units[f"u_{side}"][row], "voltage")
    nominal = plant.busbars["nominal_voltage"][int(units[f"{side}_bus"][row])]
    text = f"rated {rated} on a busbar of {show(nominal, 'voltage')}"
    base = units["base_from" if side == "hv" else "base_to"][row]
    across = units.word(f"{side}_across")[row] == "line and neutral"
    return text + (f", {show(base, 'voltage', 4)} line to neutral" if across else "")


def _power_factors(units: Table) -> Iterator[tuple[Mask, Row]]:
    # at no load a power factor of one within the printed digits is a unit without b; a
    # short-circuit test with no reactance is none
    for test, name, over, limit in (
        ("oc", "open-circuit", units["oc_cosphi_low"] > 1, "cosφ of at most 1"),
        ("sc", "short-circuit", units["sc_cosphi"] >= 1, "cosφ below 1"),
    ):

        def fill(row: int, test: str = test, name: str = name, limit: str = limit) -> Finding:
            columns = (f"{test}_volts", f"{test}_amps", f"{test}_watts")
            return Finding(
                Severity.ERROR, "", f"{name}-power-factor", place(units, f"{test}_watts", row),
                f"cosφ = {units[f'{test}_cosphi'][row]:.4g} from "
                + printed(units, *columns, row=row),
                limit, "no circuit has these readings: the unit is left out",
                "phase volts or phase amps entered as line values (factor 1.73), three phases' "
                "watts on one phase's amps, or a factor of 1000",
                "P = sqrt(m) U I cosφ",
            )  # fmt: skip

        yield np.asarray(over, dtype=np.bool_), fill


def separable(units: Table) -> Mask:
    """Return (n,) bool: both winding resistances are there, so that stray loss can be told."""
    return units.has("ohms_hv") & units.has("ohms_lv")


def needs_temperature(units: Table) -> Mask:
    """Return (n,) bool: the load loss must be carried to a temperature that it was not read at."""
    t = units["sc_temperature"]
    moved = (t != units["t_reference"]) | (t != units["t_study"])
    wanted = units.word("split") == "resistances"
    return np.asarray((moved | wanted) & units.has("sc_temperature"), dtype=np.bool_)
