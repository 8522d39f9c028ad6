"""What was assumed, taken over or simplified, each with the size of its effect."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from .. import circuit
from ..errors import Finding, Severity
from ..gates import at_unit, each, needs_temperature, place, printed, separable
from ..plant import Plant, Status, Table
from ..quantity import show
from ..standards import COMMON_PRACTICE, STANDARDS, winding_constant

#: no-load volts further from rated than this are seldom meant
NO_LOAD_BAND = 0.10


def rules(plant: Plant, units: Table, model: str) -> Iterator[Finding]:
    """Yield the findings of every rule of this file."""
    yield from _temperature(plant, units)
    yield from _constants(units)
    yield from _not_separated(units)
    yield from _facts(units)
    yield from _no_load_volts(units)
    yield from _mixed(units)
    yield from _frequency(plant, units)
    if model == "T":
        yield from _exact_row(units)
    else:
        yield from _cantilever(units)


def _is(units: Table, column: str, status: Status) -> Any:
    return units.status[column] == status


def _watts(value: float) -> str:
    return show(float(value), "active_power", 5)


def _temperature(plant: Plant, units: Table) -> Iterator[Finding]:
    def fill(row: int) -> Finding:
        return Finding(
            Severity.CAUTION, "", "study-temperature-assumed",
            at_unit(units, "reference_temperature", row),
            "no study or reference temperature", "the temperature that the study wants",
            f"75 °C assumed: load loss {_watts(units['pk_study'][row])}, "
            f"{_watts(units['pk_tested'][row])} as tested at {units['t_tested'][row]:g} °C",
            "", "IEC 60076-1:2011, 11.1: 75 °C for liquid-immersed units (from memory)",
        )  # fmt: skip

    yield from each(units, _is(units, "t_study", Status.ASSUMED), fill)
    cold = _is(units, "t_tested", Status.ASSUMED)

    def cold_fill(row: int) -> Finding:
        r, t, k = units["r_study"][row], units["t_tested"][row], units["k_hv"][row]
        effect = 100 * 10 / (k + t) if k == k else 100 * 10 / (235 + t)
        return Finding(
            Severity.CAUTION, "", "winding-temperature-assumed",
            place(units, "assume_winding_temperature", row), f"assumed {t:g} °C",
            "the winding temperature of the short-circuit test",
            f"10 K more changes r ({100 * r:.4g} %) by about -{effect:.1f} %", "",
            "assumed by the sheet",
        )  # fmt: skip

    own = units.word("assume_winding_temperature") != ""
    yield from each(units, cold & own, cold_fill)


def _constants(units: Table) -> Iterator[Finding]:
    moved = needs_temperature(units)
    t, t0 = units["t_study"], units["t_tested"]
    iec, ieee, aluminium = (
        winding_constant(*key)
        for key in ((STANDARDS[0], "copper"), (STANDARDS[1], "copper"), (STANDARDS[0], "aluminium"))
    )
    by_ieee = (ieee + t) / (ieee + t0) / ((iec + t) / (iec + t0)) - 1
    copper = (units["k_hv"] == iec) | (units["k_lv"] == iec)

    def fill(row: int) -> Finding:
        return Finding(
            Severity.NOTE, "", "standard-assumed", at_unit(units, "certificate.standard", row),
            "no standard named", " or ".join(STANDARDS),
            "winding constants of IEC practice: the other's copper constant changes I²R by "
            f"{100 * by_ieee[row]:+.2g} %", "", "IEC 60076-1:2011, 11.1 (from memory)",
        )  # fmt: skip

    unnamed = (units.word("certificate_standard") == "") & moved & copper
    yield from each(units, unnamed & (by_ieee != 0), fill)
    absent = {side: units.word(f"{side}_metal") == "" for side in ("hv", "lv")}
    by_aluminium = (aluminium + t) / (aluminium + t0) / ((iec + t) / (iec + t0)) - 1

    def metal(row: int) -> Finding:
        word = printed(units, "assume_metal", row=row)
        sides = [side for side in absent if absent[side][row]]
        change = by_aluminium[row] if word == "copper" else 1 / (1 + by_aluminium[row]) - 1
        return Finding(
            Severity.CAUTION, "", "metal-assumed", place(units, "assume_metal", row),
            f"assumed {word}", f"the metal of the {' and the '.join(sides)} winding",
            f"the other metal changes I²R by {100 * change:+.2g} %", "", "assumed by the sheet",
        )  # fmt: skip

    yield from each(units, moved & (absent["hv"] | absent["lv"]), metal)


def _not_separated(units: Table) -> Iterator[Finding]:
    def fill(row: int) -> Finding:
        upper, tested = units["pk_study"][row], units["pk_tested"][row]
        lower = tested * tested / upper
        has = [side for side in ("hv", "lv") if units.has(f"ohms_{side}")[row]]
        found = f"ohms of {has[0]} only" if has else "no winding resistances"
        return Finding(
            Severity.CAUTION, "", "loss-not-separated",
            at_unit(units, "tests.resistance", row), found,
            "winding resistances of both sides",
            f"the whole load loss is carried as I²R: {_watts(upper)}; if all were stray it would "
            f"be {_watts(lower)}", "", "upper bound; IEC 60076-1:2011, Annex E (from memory)",
        )  # fmt: skip

    bad = ~separable(units) & (units["t_study"] != units["t_tested"])
    yield from each(units, bad, fill)


def _facts(units: Table) -> Iterator[Finding]:
    for test, name, effect in (
        ("oc", "no_load_loss", "the shunt branch rests on it"),
        ("sc", "load_loss", "the series branch rests on it"),
    ):
        second = "no_load_current" if test == "oc" else "impedance_voltage"
        for status, block, severity in (
            (Status.GIVEN, "results", Severity.NOTE),
            (Status.ASSUMED, "assume", Severity.CAUTION),
        ):

            def fill(row: int, block: str = block, name: str = name, second: str = second,
                     severity: Severity = severity, effect: str = effect) -> Finding:  # fmt: skip
                first = printed(units, f"{block}_{name}", row=row)
                verb = "assumed" if block == "assume" else "given"
                return Finding(
                    severity, "", f"{name.replace('_', '-')}-{verb}",
                    place(units, f"{block}_{name}", row),
                    f"{first}, {printed(units, f'{block}_{second}', row=row)} {verb}",
                    "readings of the test", effect, "",
                    "assumed by the sheet" if block == "assume" else "results of the certificate",
                )  # fmt: skip

            yield from each(units, _is(units, f"{test}_watts", status), fill)

    def unity(row: int) -> Finding:
        return Finding(
            Severity.CAUTION, "", "no-load-power-factor-one", place(units, "oc_watts", row),
            f"cosφ = {units['oc_cosphi'][row]:.5g}: i0 not above P0/S within the printed digits",
            "i0 above P0/S",
            "i0 is assumed to be the least that goes with P0: no magnetising branch",
            "i0 or P0 rounded, or i0 filled in from P0", COMMON_PRACTICE,
        )  # fmt: skip

    yield from each(units, units["no_magnetising"] == 1, unity)


def _no_load_volts(units: Table) -> Iterator[Finding]:
    ratio = units["oc_rated_volts"] / units["oc_volts"]
    digit = np.nan_to_num(units.half_digit["oc_volts"]) / units["oc_volts"]
    turns = units["u_hv"] / units["u_lv"]

    def fill(row: int) -> Finding:
        far = abs(ratio[row] - 1) > NO_LOAD_BAND
        slips = (
            (math.sqrt(3.0), "phase volts entered as line volts (√3)"),
            (turns[row], "the wrong side said to be energised"),
            (1 / turns[row], "the wrong side said to be energised"),
        )
        cause = "; or ".join(t for f, t in slips if far and abs(math.log(ratio[row] / f)) < 0.03)
        return Finding(
            Severity.CAUTION if far else Severity.NOTE, "", "no-load-not-at-rated-volts",
            place(units, "oc_volts", row),
            f"{printed(units, 'oc_volts', row=row)}, {100 / ratio[row]:.4g} % of rated",
            "readings at rated volts",
            f"linear branch: loss ×{ratio[row] ** 2:.4f}, current ×{ratio[row]:.4f}; a core that "
            "saturates draws more above rated volts", cause,
            "linear shunt branch, common practice, no source",
        )  # fmt: skip

    yield from each(units, np.abs(ratio - 1) > digit + 1e-12, fill)


def _mixed(units: Table) -> Iterator[Finding]:
    temperatures = sorted(set(units["t_study"].tolist()))
    if len(temperatures) > 1:
        listed = ", ".join(f"{t:g}" for t in temperatures)
        yield Finding(
            Severity.CAUTION, "the study", "mixed-temperatures", "system.study_temperature",
            f"branches at {listed} °C", "one winding temperature for the whole study",
            "losses and drops of the units are not comparable", "",
            COMMON_PRACTICE, units.n,
        )  # fmt: skip


def _frequency(plant: Plant, units: Table) -> Iterator[Finding]:
    """Say that an option's frequency is not the sheets'."""
    used = plant.system.frequency
    for written in (f for f in plant.system.written_frequencies if f != used):
        yield Finding(
            Severity.CAUTION, "the study", "frequency-by-option", "system.frequency",
            f"{used:g} Hz by option, {written:g} Hz in the sheet", "one frequency",
            f"the tests are taken as made at {used:g} Hz: reactances are not carried from "
            f"{written:g} Hz", "", COMMON_PRACTICE, units.n,
        )  # fmt: skip


def _exact_row(units: Table) -> Iterator[Finding]:
    off = np.abs(units["z_t_study"]) / np.abs(units["z_sc_study"]) - 1
    if not units.n or not np.abs(off).max():
        return
    row = int(np.abs(off).argmax())
    yield Finding(
        Severity.NOTE, "the study", "exact-circuit", "vk_percent, i0_percent of the network files",
        f"{units.text['name'][row]}: vk_percent {100 * abs(units['z_t_study'][row]):.6f}",
        f"the certificate's {100 * abs(units['z_sc_study'][row]):.6f}",
        f"meant: the T circuit with this value gives the certificate's reading; typed in as it "
        f"stands it would be off by up to {100 * np.abs(off).max():.2g} % (trafo_model pi gives "
        "another answer)", "", "exact T, two-port theory", units.n,
    )  # fmt: skip


def _cantilever(units: Table) -> Iterator[Finding]:
    z, y = units["z_sc_study"], units["y_oc"]
    seen_y = np.where(units["oc_from"] == 1, y, circuit.open_circuit_admittance(z, y))
    seen_z = np.where(units["sc_from"] == 1, circuit.short_circuit_impedance(0, z, y), z)
    off_y, off_z = np.abs(seen_y) / np.abs(y) - 1, np.abs(seen_z) / np.abs(z) - 1

    def fill(row: int) -> Finding:
        return Finding(
            Severity.NOTE, "", "simplified-circuit", "option model",
            f"re-run amps {100 * off_y[row]:+.2g} %, volts {100 * off_z[row]:+.2g} % off the "
            "certificate", "the exact T gives both readings",
            "the simplified circuit is proven against its own reading", "",
            "shunt at the from terminals, two-port theory",
        )  # fmt: skip

    yield from each(units, np.ones(units.n, dtype=np.bool_), fill)
