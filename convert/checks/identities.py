"""What must hold between the readings, the plate and the busbars of one unit."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from ..errors import Finding, Severity
from ..gates import against_nominal, at_unit, each, place, printed, separable
from ..plant import Plant, Status, Table
from ..quantity import show
from ..reduction import temperature
from ..standards import COMMON_PRACTICE, STANDARDS, impedance_tolerance

#: rated volts may differ from the busbar's nominal volts by this much before a word is said
NOMINAL_BAND = 0.10
#: stray loss above this share of the load loss is rare
STRAY_SHARE = 0.60
#: stray loss below minus this share is beyond what readings can be out by
IMPOSSIBLE_STRAY = 0.10
#: three readings of one balanced test may differ by this share of their mean
SPREAD = 0.02
#: where no standard is named, the plate is held to this
PLATE_BAND = 0.10
#: a factor is recognised within this share of it
NEAR = 0.03
_ROOT3 = math.sqrt(3.0)
#: factors that a slip leaves behind in an impedance from a short-circuit test, and the slip
_SLIPS = (
    (_ROOT3, "winding amps of a delta entered as line amps, or line volts said to be to neutral "
             "(√3)"),
    (1 / _ROOT3, "phase volts entered as line volts (√3)"),
    (3.0, "the rating of three units on one unit's readings (3)"),
    (1 / 3.0, "the rating of one unit on the readings of three (3)"),
    (1.2, "a test at 60 Hz against a plate at 50 Hz"),
    (1 / 1.2, "a test at 50 Hz against a plate at 60 Hz"),
    (10.0, "a decimal point moved"),
    (0.1, "a decimal point moved"),
)  # fmt: skip


def rules(plant: Plant, units: Table) -> Iterator[Finding]:
    """Yield the findings of every rule of this file."""
    yield from _stray(units)
    yield from _plate(plant, units)
    yield from _nominal(plant, units)
    yield from _stated(units)
    yield from _spread(units)
    yield from _clocks(plant, units)


def _stray(units: Table) -> Iterator[Finding]:
    share = units["p_stray_tested"] / units["pk_tested"]
    source = "IEC 60076-1:2011, Annex E: load loss is I²R and stray loss (from memory)"

    def fill(row: int) -> Finding:
        high = share[row] > 0
        worst = share[row] < -IMPOSSIBLE_STRAY
        loss = {c: show(units[c][row], "active_power", 4) for c in
                ("p_hv_tested", "p_lv_tested", "pk_tested")}  # fmt: skip
        return Finding(
            Severity.ERROR if worst else Severity.CAUTION, "", "stray-loss",
            "; ".join(place(units, c, row) for c in ("sc_watts", "ohms_hv", "ohms_lv")),
            f"stray loss {100 * share[row]:.1f} % of the load loss: I²R HV {loss['p_hv_tested']}, "
            f"LV {loss['p_lv_tested']}, load loss {loss['pk_tested']}",
            f"0 to {100 * STRAY_SHARE:g} %",
            "no transformer has these readings: the unit is left out" if worst
            else "the load loss is carried to the study's temperature with a wrong split",
            "resistance in mΩ entered as µΩ, or one side's reading a factor too small" if high
            else "ohms between line terminals entered as a winding's, per-phase watts as total, "
            "or Ω for mΩ",
            COMMON_PRACTICE if high else source,
        )  # fmt: skip

    slack = _relative_half(units, "sc", watts=1, amps=2) + 1e-12
    for side in ("hv", "lv"):
        part = units[f"p_{side}_tested"] / units["pk_tested"]
        slack = slack + np.nan_to_num(
            part * units.half_digit[f"ohms_{side}"] / units[f"ohms_{side}"]
        )
    bad = separable(units) & ((share < -slack) | (share > STRAY_SHARE))
    yield from each(units, bad, fill)


def _plate(plant: Plant, units: Table) -> Iterator[Finding]:
    plate = units["plate_impedance"]
    measured = np.abs(units["z_sc_reference"]) * units["plate_base"] / units["s"]
    named = units.word("certificate_standard")
    tolerance = np.full(units.n, PLATE_BAND)
    for name in STANDARDS:
        tolerance = np.where(named == name, impedance_tolerance(name, plate), tolerance)
    ratio = measured / plate
    stages = _stage_ratios(plant)

    def fill(row: int) -> Finding:
        return Finding(
            Severity.CAUTION, "", "plate-impedance",
            f"{place(units, 'sc_volts', row)}; {place(units, 'plate_impedance', row)}",
            f"{100 * measured[row]:.4g} % from "
            f"{printed(units, 'sc_volts', 'sc_amps', row=row)}, {100 * (ratio[row] - 1):+.1f} % "
            "off the plate",
            f"the plate's {printed(units, 'plate_impedance', row=row)} ± "
            f"{100 * tolerance[row]:g} %",
            f"drop {100 * (ratio[row] - 1):+.0f} %, fault level {100 * (1 / ratio[row] - 1):+.0f} %"
            " against the plate",
            likely_slip(float(ratio[row]), stages.get(str(units.text["name"][row]), ())),
            f"{named[row]}, tolerance on the short-circuit impedance (from memory)"
            if named[row] else COMMON_PRACTICE,
        )  # fmt: skip

    bad = units.has("plate_impedance") & (np.abs(ratio - 1) > tolerance)
    yield from each(units, bad, fill)

    def unnamed(row: int) -> Finding:
        return Finding(
            Severity.NOTE, "", "plate-by-common-practice",
            at_unit(units, "certificate.standard", row),
            "no standard named", "the standard whose tolerance the plate impedance must meet",
            f"the readings are held to {100 * PLATE_BAND:g} % of the plate instead", "",
            COMMON_PRACTICE,
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
    """Return the slips whose factor is near `ratio`, nearest first; empty if none."""
    known = [*_SLIPS, *((r, "another cooling stage's rating as base") for r in stage_ratios)]
    near = sorted((abs(math.log(ratio / factor)), text) for factor, text in known)
    return "; or ".join(dict.fromkeys(text for size, text in near if size < NEAR))


def _nominal(plant: Plant, units: Table) -> Iterator[Finding]:
    for side, base in (("hv", "base_from"), ("lv", "base_to")):
        ratio = units[f"u_{side}"] / units[base]

        def fill(row: int, side: str = side, ratio: Any = ratio) -> Finding:
            root = abs(abs(math.log(ratio[row])) - math.log(_ROOT3)) < NEAR
            cause = (
                "phase volts for line volts" if root else "the wrong busbar, or a figure mistyped"
            )
            return Finding(
                Severity.CAUTION, "", "rated-against-nominal",
                place(units, f"{side}_rated_voltage", row),
                f"{against_nominal(plant, units, side, row)}: {ratio[row]:.4g} of nominal",
                f"within {100 * NOMINAL_BAND:g} % of nominal",
                f"the impedance base is {ratio[row] ** 2:.3g} of the nominal one", cause,
                COMMON_PRACTICE,
            )  # fmt: skip

        yield from each(units, np.abs(ratio - 1) > NOMINAL_BAND, fill)


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
    share = units["results_base"] / units["s"]
    p_k, digits, bound = _carried(units)
    load = _relative_half(units, "sc", watts=1, amps=2) + digits
    z = np.hypot(p_k / units["s"], units["x"])
    r_part = (p_k / units["s"] / z) ** 2  # how much of a change in r is felt in z
    impedance = _relative_half(units, "sc", volts=1, amps=1) + r_part * load
    closed = np.zeros(units.n)
    for column, value, half, bounds, dimension, test in (
        ("load_loss", p_k * share**2, load, bound, "active_power", "sc"),
        ("impedance_voltage", z * share, impedance, r_part * bound, "ratio", "sc"),
        ("no_load_loss", units["p0"], _relative_half(units, "oc", watts=1, volts=2), closed,
         "active_power", "oc"),
        ("no_load_current", units["i0"] / share, _relative_half(units, "oc", amps=1, volts=1),
         closed, "ratio", "oc"),
    ):  # fmt: skip
        stated = units[f"results_{column}"]
        own = np.nan_to_num(units.half_digit[f"results_{column}"] / stated)
        off = value / stated - 1
        measured = units.status[f"{test}_watts"] == Status.MEASURED

        def fill(row: int, column: str = column, value: Any = value, off: Any = off,
                 dimension: str = dimension) -> Finding:  # fmt: skip
            return Finding(
                Severity.CAUTION, "", "stated-result", place(units, f"results_{column}", row),
                f"{printed(units, f'results_{column}', row=row)} stated",
                f"{show(value[row], dimension, 5)} from the readings ({100 * off[row]:+.2f} %)",
                "the branch follows the readings",
                "a reading mistyped, another temperature, or another base",
                "readings and results of one certificate agree within their printed digits",
            )  # fmt: skip

        slack = own + half
        beyond = (off < np.minimum(bounds, 0) - slack) | (off > np.maximum(bounds, 0) + slack)
        yield from each(units, measured & beyond, fill)


def _carried(units: Table) -> tuple[Any, Any, Any]:
    """Load loss [W] at the results' temperature, all I²R where it could not be split.

    Beside it how far its printed digits leave it open, and, where it could not be split, by how
    much it is above (or below) what it would be if all were stray; both relative.
    """
    t, tested = units["results_temperature"], units["t_tested"]
    total, stray = units["pk_tested"], units["p_stray_tested"]
    with np.errstate(all="ignore"):
        sides = {
            side: temperature.ohmic_loss_at_temperature(
                units[f"p_{side}_tested"], tested, t, units[f"k_{side}"]
            )
            for side in ("hv", "lv")
        }
        moved_stray = temperature.stray_loss_at_temperature(stray, tested, t, units["k_stray"])
        p_k = np.where(t == tested, total, sum(sides.values()) + moved_stray)
        factor = (units["k_stray"] + t) / (units["k_stray"] + tested)
        # a warmer test means less to carry: I²R by 1/(K + θ), stray the other way
        kelvin = np.nan_to_num(units.half_digit["sc_temperature"]) / (units["k_stray"] + tested)
        digits = np.abs(total - 2 * stray) / total * kelvin
        for side in ("hv", "lv"):
            part = units[f"p_{side}_tested"] / total
            ohms = units.half_digit[f"ohms_{side}"] / units[f"ohms_{side}"]
            cold = units.half_digit[f"t_{side}"] / (units[f"k_{side}"] + units[f"t_{side}"])
            digits = digits + np.abs(factor - 1 / factor) * part * np.nan_to_num(ohms + cold)
        bound = np.where(separable(units) | (t == tested), 0.0, factor**2 - 1)
    return p_k, np.nan_to_num(digits), np.nan_to_num(bound)


def _spread(units: Table) -> Iterator[Finding]:
    for column in ("oc_volts", "sc_volts", "sc_amps", "ohms_hv", "ohms_lv"):
        spread = units[f"{column}_spread"]

        def fill(row: int, column: str = column, spread: Any = spread) -> Finding:
            return Finding(
                Severity.CAUTION, "", "three-readings", place(units, column, row),
                f"{printed(units, column, row=row)}: {100 * spread[row]:.1f} % apart",
                f"within {100 * SPREAD:g} % of each other",
                "the mean is used", "one of the three mistyped, or an unbalanced supply",
                COMMON_PRACTICE,
            )  # fmt: skip

        yield from each(units, spread > SPREAD, fill)


def _clocks(plant: Plant, units: Table) -> Iterator[Finding]:
    """Units between the same two busbars whose low-voltage sides do not stand at one angle."""
    hours: dict[tuple[float, float], set[int]] = {}
    ends = list(zip(units["hv_bus"], units["lv_bus"], strict=True))
    for pair, clock, phases in zip(ends, units["clock"], units["phases"], strict=True):
        if phases == 3:
            hours.setdefault(pair, set()).add(int(clock))
    names = plant.busbars.text["name"]

    def fill(row: int) -> Finding:
        hv, lv = (names[int(bus)] for bus in ends[row])
        return Finding(
            Severity.CAUTION, "", "unlike-clocks", place(units, "vector_group", row),
            f"{printed(units, 'vector_group', row=row)} between {hv} and {lv}, where the clocks "
            f"are {', '.join(map(str, sorted(hours[ends[row]])))}", "one clock number",
            "in parallel they short-circuit each other: the network as a whole cannot be run",
            "the wrong busbar, or a vector group mistyped", COMMON_PRACTICE,
        )  # fmt: skip

    three = units["phases"] == 3
    unlike = np.array([len(hours.get(pair, ())) > 1 for pair in ends], dtype=np.bool_)
    yield from each(units, three & unlike, fill)
