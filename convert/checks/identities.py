"""What must hold between the readings, the plate and the busbars of one unit."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from ..errors import Finding, Severity
from ..gates import each, place, printed, separable
from ..plant import Plant, Table
from ..quantity import show
from ..reduction import temperature
from ..standards import COMMON_PRACTICE, STANDARDS, impedance_tolerance

#: rated volts may differ from the busbar's nominal volts by this much before a word is said
NOMINAL_BAND = 0.10
#: stray loss above this share of the load loss is rare
STRAY_SHARE = 0.60
#: three readings of one balanced test may differ by this share of their mean
SPREAD = 0.02
_ROOT3 = math.sqrt(3.0)
#: factors that a slip leaves behind in an impedance, and the slip
_SLIPS = (
    (_ROOT3, "winding amps of a delta entered as line amps, or line volts entered twice (√3)"),
    (1 / _ROOT3, "phase volts entered as line volts (√3)"),
    (3.0, "ohms of a delta winding taken as star ohms, or a factor of 3"),
    (1 / 3.0, "star ohms taken as a delta winding's, or a factor of 3"),
    (1.2, "reactance at 60 Hz taken for 50 Hz"),
    (1 / 1.2, "reactance at 50 Hz taken for 60 Hz"),
    (10.0, "a decimal point moved"),
    (0.1, "a decimal point moved"),
)


def rules(plant: Plant, units: Table) -> Iterator[Finding]:
    """Yield the findings of every rule of this file."""
    yield from _stray(units)
    yield from _plate(plant, units)
    yield from _nominal(units)
    yield from _stated(units)
    yield from _spread(units)


def _stray(units: Table) -> Iterator[Finding]:
    share = units["p_stray_tested"] / units["pk_tested"]
    source = "IEC 60076-1:2011, Annex E: load loss is I²R and stray loss (from memory)"

    def fill(row: int) -> Finding:
        high = share[row] > 0
        ohmic = show(units["p_hv_tested"][row] + units["p_lv_tested"][row], "active_power", 4)
        total = show(units["pk_tested"][row], "active_power", 4)
        return Finding(
            Severity.CAUTION, "", "stray-loss", place(units, "ohms_hv", row),
            f"stray loss {100 * share[row]:.1f} % of the load loss: I²R {ohmic} of {total}",
            f"0 to {100 * STRAY_SHARE:g} %",
            "the load loss is carried to the study's temperature with a wrong split",
            "resistance in mΩ entered as µΩ, or one side's reading a factor too small" if high
            else "ohms between line terminals entered as a winding's, per-phase watts as total, "
            "or Ω for mΩ",
            COMMON_PRACTICE if high else source,
        )  # fmt: skip

    bad = separable(units) & ((share < 0) | (share > STRAY_SHARE))
    yield from each(units, bad, Finding(Severity.CAUTION, "", ""), fill)


def _plate(plant: Plant, units: Table) -> Iterator[Finding]:
    plate = units["plate_impedance"]
    measured = np.abs(units["z_sc_reference"]) * units["plate_base"] / units["s"]
    named = units.word("certificate_standard")
    tolerance = np.full(units.n, np.nan)
    for name in STANDARDS:
        tolerance = np.where(named == name, impedance_tolerance(name, plate), tolerance)
    ratio = measured / plate
    stages = _stage_ratios(plant)

    def fill(row: int) -> Finding:
        return Finding(
            Severity.CAUTION, "", "plate-impedance", place(units, "sc_volts", row),
            f"{100 * measured[row]:.4g} % from {printed(units, 'sc_volts', row)} at "
            f"{printed(units, 'sc_amps', row)}, {100 * (ratio[row] - 1):+.1f} % off the plate",
            f"the plate's {printed(units, 'plate_impedance', row)} ± {100 * tolerance[row]:g} %",
            f"drop and fault level change by about {100 * (ratio[row] - 1):+.0f} %",
            likely_slip(float(ratio[row]), stages.get(str(units.text["name"][row]), ())),
            f"{named[row]}, tolerance on the short-circuit impedance (from memory)",
        )  # fmt: skip

    bad = units.has("plate_impedance") & (np.abs(ratio - 1) > tolerance)
    yield from each(units, bad, Finding(Severity.CAUTION, "", ""), fill)
    unnamed = Finding(
        Severity.NOTE, "", "plate-not-compared", "certificate.standard", "no standard named",
        "the standard whose tolerance the plate impedance must meet", "one comparison is left out",
    )  # fmt: skip
    yield from each(units, units.has("plate_impedance") & (named == ""), unnamed)


def _stage_ratios(plant: Plant) -> dict[str, tuple[float, ...]]:
    """Ratios of the cooling stages of each unit, both ways."""
    names = plant.transformers.text["name"]
    powers: dict[str, list[float]] = {}
    for unit, power in zip(plant.stages["unit"].astype(int), plant.stages["power"], strict=True):
        powers.setdefault(str(names[unit]), []).append(float(power))
    return {
        name: tuple(a / b for a in listed for b in listed if a != b)
        for name, listed in powers.items()
    }


def likely_slip(ratio: float, stage_ratios: tuple[float, ...] = ()) -> str:
    """Return the slips whose factor is within 3 % of `ratio`, nearest first; empty if none."""
    known = [*_SLIPS, *((r, "another cooling stage's rating as base") for r in stage_ratios)]
    near = sorted((abs(math.log(ratio / factor)), text) for factor, text in known)
    return "; or ".join(dict.fromkeys(text for size, text in near if size < 0.03))


def _nominal(units: Table) -> Iterator[Finding]:
    for side, base in (("hv", "base_from"), ("lv", "base_to")):
        ratio = units[f"u_{side}"] / units[base]

        def fill(row: int, side: str = side, base: str = base, ratio: Any = ratio) -> Finding:
            return Finding(
                Severity.CAUTION, "", "rated-against-nominal",
                place(units, f"{side}_rated_voltage", row),
                f"rated {show(units[f'u_{side}'][row], 'voltage')} on a busbar of "
                f"{show(units[base][row], 'voltage')}: {ratio[row]:.4g} of nominal",
                f"within {100 * NOMINAL_BAND:g} % of nominal",
                f"the impedance base moves by {ratio[row] ** 2:.3g}",
                "phase volts for line volts, or the wrong busbar", COMMON_PRACTICE,
            )  # fmt: skip

        bad = np.abs(ratio - 1) > NOMINAL_BAND
        yield from each(units, bad, Finding(Severity.CAUTION, "", ""), fill)


def _relative_half(units: Table, test: str, **powers: float) -> Any:
    """Relative size of half the last printed digits of a test's readings."""
    total = np.zeros(units.n)
    for key, power in powers.items():
        column = f"{test}_{key}"
        with np.errstate(all="ignore"):
            total += power * np.nan_to_num(units.half_digit[column] / units[column])
    return total


def _stated(units: Table) -> Iterator[Finding]:
    """Compare results that the certificate states with what its readings give."""
    t = units["results_temperature"]
    with np.errstate(all="ignore"):
        parts = [
            temperature.ohmic_loss_at_temperature(
                units[f"p_{side}_tested"], units["t_tested"], t, units[f"k_{side}"]
            )
            for side in ("hv", "lv")
        ]
        stray = temperature.stray_loss_at_temperature(
            units["p_stray_tested"], units["t_tested"], t, units["k_stray"]
        )
    p_k = np.where(t == units["t_tested"], units["pk_tested"], sum(parts) + stray)
    share = units["results_base"] / units["s"]
    z = np.hypot(p_k / units["s"], units["x"])
    load = _relative_half(units, "sc", watts=1, amps=2)
    for column, value, half, dimension, test in (
        ("load_loss", p_k * share**2, load, "active_power", "sc"),
        ("impedance_voltage", z * share, _relative_half(units, "sc", volts=1, amps=1), "ratio",
         "sc"),
        ("no_load_loss", units["p0"], _relative_half(units, "oc", watts=1, volts=2),
         "active_power", "oc"),
        ("no_load_current", units["i0"] / share, _relative_half(units, "oc", amps=1, volts=1),
         "ratio", "oc"),
    ):  # fmt: skip
        stated = units[f"results_{column}"]
        own = np.nan_to_num(units.half_digit[f"results_{column}"] / stated)
        off = value / stated - 1
        measured = ~np.isnan(units.half_digit[f"{test}_watts"])

        def fill(row: int, column: str = column, value: Any = value, off: Any = off,
                 dimension: str = dimension) -> Finding:  # fmt: skip
            return Finding(
                Severity.CAUTION, "", "stated-result", place(units, f"results_{column}", row),
                f"{printed(units, f'results_{column}', row)} stated",
                f"{show(value[row], dimension, 5)} from the readings ({100 * off[row]:+.2f} %)",
                "the branch follows the readings",
                "a reading mistyped, another temperature, or another base",
                "readings and results of one certificate agree within their printed digits",
            )  # fmt: skip

        bad = measured & (np.abs(off) > own + half)
        yield from each(units, bad, Finding(Severity.CAUTION, "", ""), fill)


def _spread(units: Table) -> Iterator[Finding]:
    for column in ("oc_volts", "sc_volts", "sc_amps"):
        spread = units[f"{column}_spread"]

        def fill(row: int, column: str = column, spread: Any = spread) -> Finding:
            return Finding(
                Severity.CAUTION, "", "three-readings", place(units, column, row),
                f"{printed(units, column, row)}: {100 * spread[row]:.1f} % apart",
                f"within {100 * SPREAD:g} % of each other",
                "the mean is used", "one of the three mistyped, or an unbalanced supply",
                COMMON_PRACTICE,
            )  # fmt: skip

        yield from each(units, spread > SPREAD, Finding(Severity.CAUTION, "", ""), fill)
