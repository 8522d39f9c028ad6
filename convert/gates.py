"""Which units may be reduced: presence of the facts, and power factors of at most one.

A unit that fails a gate is left out of branches and networks and named by an error finding.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from .errors import Finding, Severity
from .plant import Mask, Table
from .quantity import show
from .standards import COMMON_PRACTICE

Row = Callable[[int], Finding]
#: prefix of a gathered column -> what the sheet calls the test
_TESTS = {"oc_": "open_circuit_", "sc_": "short_circuit_", "ohms_": "resistance_"}


def place(units: Table, column: str, row: int) -> str:
    """Return `file:line key` of a reading, as far as the source tells."""
    line = int(units.line[column][row]) if column in units.line else 0
    line = line or int(units.line["row"][row])
    for short, full in _TESTS.items():
        column = column.replace(short, full, 1) if column.startswith(short) else column
    return f"{units.text['file'][row]}:{line} {column.replace('_', ' ')}"


def each(units: Table, where: Mask, finding: Finding, fill: Row | None = None) -> Iterator[Finding]:
    """Yield one finding a row of `where`: `finding` with its subject, and what `fill` adds."""
    for row in np.flatnonzero(where):
        base = fill(int(row)) if fill else finding
        yield replace(base, subject=str(units.text["name"][row]))


def printed(units: Table, column: str, row: int) -> str:
    """Return a reading as printed, or `nothing`."""
    return str(units.word(column)[row]) or "nothing"


def check(units: Table) -> tuple[Mask, list[Finding]]:
    """Return (n,) bool, which units may be reduced, and the findings of those that may not."""
    findings: list[Finding] = []
    passed = np.ones(units.n, dtype=np.bool_)
    for where, finding, fill in _rules(units):
        bad = where & passed
        findings.extend(each(units, bad, finding, fill))
        passed &= ~where
    return passed, findings


def _rules(units: Table) -> Iterator[tuple[Mask, Finding, Row | None]]:
    error = Severity.ERROR
    yield (
        ~units.has("oc_watts"),
        Finding(
            error, "", "no-load-missing", "tests.open_circuit", "nothing",
            "an open-circuit test, or no_load_loss and no_load_current under results",
            "no shunt branch: the unit is left out", "add the test, or say it under assume",
        ),
        None,
    )  # fmt: skip
    yield (
        ~units.has("sc_watts"),
        Finding(
            error, "", "load-loss-missing", "tests.short_circuit", "nothing",
            "a short-circuit test, or load_loss and impedance_voltage under results",
            "no series branch: the unit is left out", "add the test, or say it under assume",
        ),
        None,
    )  # fmt: skip
    yield (
        ~units.has("sc_temperature"),
        Finding(
            error, "", "winding-temperature-missing", "tests.short_circuit.temperature", "nothing",
            "the winding temperature of the short-circuit test",
            "resistance cannot be carried to the study's temperature: the unit is left out",
            "read it from the certificate, or say winding_temperature under assume",
        ),
        None,
    )  # fmt: skip
    for side in ("hv", "lv"):
        yield (
            needs_temperature(units) & ~units.has(f"k_{side}"),
            Finding(
                error, "", "metal-missing", f"{side}.metal", "nothing", "copper or aluminium",
                "the load loss cannot be carried to another temperature: the unit is left out",
                "state the metal, or say metal under assume",
            ),
            None,
        )  # fmt: skip
    yield (
        (units.word("split") == "resistances") & ~separable(units),
        Finding(
            error, "", "split-without-resistances", "split", "resistances",
            "winding resistances of both sides under tests.resistance",
            "the split cannot be made: the unit is left out", "add them, or leave split out",
        ),
        None,
    )  # fmt: skip
    for side, base in (("hv", "base_from"), ("lv", "base_to")):
        ratio = units[f"u_{side}"] / units[base]

        def far(row: int, side: str = side, base: str = base) -> Finding:
            rated, nominal = (show(units[c][row], "voltage") for c in (f"u_{side}", base))
            return Finding(
                error, "", "rated-against-nominal", place(units, f"{side}_rated_voltage", row),
                f"rated {rated} on a busbar of {nominal}", "within 0.5 to 1.5 of nominal",
                "no load flow can be trusted there: the unit is left out",
                "the wrong busbar, kV for V, or phase volts for line volts", COMMON_PRACTICE,
            )  # fmt: skip

        yield (ratio <= 0.5) | (ratio >= 1.5), Finding(error, "", ""), far
    for test, name in (("oc", "open-circuit"), ("sc", "short-circuit")):
        # at no load a power factor of one within the printed digits is a unit without b; a
        # short-circuit test with no reactance is none
        over = units["oc_cosphi_low"] > 1 if test == "oc" else units["sc_cosphi"] >= 1

        def fill(row: int, test: str = test, name: str = name) -> Finding:
            u, i, p = (printed(units, f"{test}_{key}", row) for key in ("volts", "amps", "watts"))
            return Finding(
                error, "", f"{name}-power-factor", place(units, f"{test}_watts", row),
                f"cosφ = {units[f'{test}_cosphi'][row]:.4g} from {u}, {i}, {p}",
                "cosφ of at most 1",
                "no circuit has these readings: the unit is left out",
                "phase volts or phase amps entered as line values (factor 1.73), "
                "three phases' watts on one phase's amps, or a factor of 1000",
                "P = sqrt(m) U I cosφ",
            )  # fmt: skip

        yield over, Finding(error, "", ""), fill


def separable(units: Table) -> Mask:
    """Return (n,) bool: both winding resistances are there, so that stray loss can be told."""
    return units.has("ohms_hv") & units.has("ohms_lv")


def needs_temperature(units: Table) -> Mask:
    """Return (n,) bool: the load loss must be carried to a temperature that it was not read at."""
    t = units["sc_temperature"]
    moved = (t != units["t_reference"]) | (t != units["t_study"])
    wanted = units.word("split") == "resistances"
    return np.asarray((moved | wanted) & units.has("sc_temperature"), dtype=np.bool_)


def at_limit(units: Table) -> Mask:
    """Return (n,) bool: no-load cosφ above one, by no more than the printed digits allow."""
    over = (units["oc_cosphi"] > 1) & (units["oc_cosphi_low"] <= 1)
    return np.asarray(over, dtype=np.bool_)
