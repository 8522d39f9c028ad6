"""Plant -> one wide table: what the reduction needs of each unit in one row.

The chosen test, stage and base of every unit; a result that the sheet gives or assumes stands in
for a test that is missing.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from .plant import Mask, Plant, Status, Table
from .reduction import metering, open_circuit, resistance
from .standards import STANDARDS, winding_constant

DEFAULT_TEMPERATURE = 75.0
_TEST = {"oc": "open_circuit", "sc": "short_circuit"}
#: factor from printed ohms to ohms per phase of the equivalent star
_BETWEEN_LINES, _DELTA_WINDING, _STAR_WINDING = 1 / 2, 1 / 3, 1.0


def gather(plant: Plant) -> Table:
    """Bring what the reduction needs of each unit into one row: the chosen test, stage and base."""
    source = plant.transformers
    units = Table(
        source.n, line=dict(source.line), text=dict(source.text), heading=dict(source.heading)
    )
    for out, column in (("phases", "phases"), ("clock", "clock"), ("hv_bus", "hv_bus"),
                        ("lv_bus", "lv_bus"), ("u_hv", "hv_rated_voltage"),
                        ("u_lv", "lv_rated_voltage"), ("plate_impedance", "plate_impedance"),
                        ("plate_base", "plate_impedance_base"),
                        ("results_load_loss", "results_load_loss"),
                        ("results_impedance_voltage", "results_impedance_voltage"),
                        ("results_no_load_loss", "results_no_load_loss"),
                        ("results_no_load_current", "results_no_load_current"),
                        ("results_temperature", "results_temperature")):  # fmt: skip
        units.set(out, source[column], source.status[column])
        units.half_digit[out] = source.half_digit.get(column, np.full(source.n, np.nan))
    _stage(plant, units)
    units.put("i_hv", open_circuit.rated_current, s="s", u="u_hv", phases="phases")
    units.put("i_lv", open_circuit.rated_current, s="s", u="u_lv", phases="phases")
    _temperatures(plant, units)
    _constants(units)
    _nominal(plant, units)
    _test(plant.open_circuit, units, "oc", "energised")
    _test(plant.short_circuit, units, "sc", "fed")
    _stated(plant, units)
    _resistances(plant, units)
    for test in ("oc", "sc"):
        _power_factor(units, test)
    return units


def _stage(plant: Plant, units: Table) -> None:
    """Rated power: the unit's one rating, or that of the stage the study uses."""
    units.set("s", plant.transformers["rated_power"])
    stages = plant.stages
    at = stages["unit"].astype(int)
    chosen = stages.text["name"] == units.text["study_stage"][at]
    power = units["s"].copy()
    power[at[chosen]] = stages["power"][chosen]
    units.set("s", power)
    for base in ("plate_base", "results_base", "assume_base"):
        column = "plate_impedance_base" if base == "plate_base" else base
        given = plant.transformers[column]
        units.set(base, np.where(np.isnan(given), units["s"], given))


def _temperatures(plant: Plant, units: Table) -> None:
    given = plant.transformers["reference_temperature"]
    missing = np.isnan(given)
    assumed = np.where(missing, Status.ASSUMED, Status.MEASURED)
    units.set("t_reference", np.where(missing, DEFAULT_TEMPERATURE, given), assumed)
    study = plant.system.study_temperature
    if np.isnan(study):
        units.set("t_study", units["t_reference"], units.status["t_reference"])
    else:
        units.set("t_study", study)
        # the certificate's own reference matters to nothing but its own row of units.csv
        units.set("t_reference", np.where(missing, study, given))


def _constants(units: Table) -> None:
    """K of each side and of the stray loss, by the certificate's standard and the metals."""
    named = units.word("certificate_standard")
    standard = np.where(named == "", STANDARDS[0], named)
    status = np.where(named == "", Status.ASSUMED, Status.MEASURED).astype(np.uint8)
    metals = {}
    for side in ("hv", "lv"):
        own, assumed = units.word(f"{side}_metal"), units.word("assume_metal")
        metals[side] = np.where(own == "", assumed, own)
        worse = np.where(own == "", np.uint8(Status.ASSUMED), status)
        units.set(f"k_{side}", _constant(standard, metals[side]), worse)
    mixed = np.where(metals["hv"] == metals["lv"], metals["hv"], "mixed")
    units.set("k_stray", _constant(standard, mixed), units.worst(("k_hv", "k_lv")))


def _constant(standard: np.ndarray, metal: np.ndarray) -> np.ndarray:
    constants = np.full(len(standard), np.nan)
    for name in STANDARDS:
        for word in ("copper", "aluminium", "mixed"):
            constants[(standard == name) & (metal == word)] = winding_constant(name, word)
    return constants


def _nominal(plant: Plant, units: Table) -> None:
    """Nominal volts across the terminals used, and base power, of each branch."""
    for side, out in (("hv", "base_from"), ("lv", "base_to")):
        volts = plant.busbars["nominal_voltage"][units[f"{side}_bus"].astype(int)]
        neutral = units.word(f"{side}_across") == "line and neutral"
        units.set(out, np.where(neutral, volts / np.sqrt(3.0), volts))
    power = plant.system.base_power
    units.set("s_system", np.where(units["phases"] == 1, power / 3.0, power))


def _test(tests: Table, units: Table, test: str, side: str) -> None:
    """Spread the rows of a test table over the units: `oc_volts`, `oc_from` (made from HV), ..."""
    rows = tests["unit"].astype(int)
    has = np.zeros(units.n, dtype=np.bool_)
    has[rows] = True
    spread = np.full(units.n, -1)
    spread[rows] = np.arange(tests.n)
    for column in ("volts", "amps", "watts", "temperature"):
        if column not in tests.values:
            continue
        out = f"{test}_{column}"
        units.heading[out] = f"tests.{_TEST[test]}.{column}"
        value, half = np.full(units.n, np.nan), np.full(units.n, np.nan)
        value[rows], half[rows] = tests[column], tests.half_digit[column]
        units.set(out, value)
        units.half_digit[out] = half
        units.text[out] = np.where(has, _spread(tests.text[column], spread), "")
        units.line[out] = np.where(has, _spread(tests.line[column], spread), 0).astype(np.int32)
        if f"{column}_spread" in tests.values:
            percent = np.full(units.n, np.nan)
            percent[rows] = tests[f"{column}_spread"]
            units.set(f"{out}_spread", percent)
    units.text[f"{test}_tap"] = np.where(has, _spread(tests.word("tap"), spread), "")
    words = {key: np.where(has, _spread(tests.word(key), spread), "") for key in
             (side, "between", "watts_are")}  # fmt: skip
    units.set(f"{test}_from", np.where(has, words[side] == "hv", np.nan))
    phase_volts = words["between"] == "line and neutral"
    units.put(f"{test}_volts", metering.line_volts, where=phase_volts, u=f"{test}_volts")
    units.half_digit[f"{test}_volts"][phase_volts] *= np.sqrt(3.0)
    one_phase = words["watts_are"] == "per phase"
    units.put(f"{test}_watts", metering.total_watts, where=one_phase, p=f"{test}_watts")
    units.half_digit[f"{test}_watts"][one_phase] *= 3.0


def _spread(column: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Pick rows of a column; a row of -1 gives what `where` will not use."""
    return column[rows] if len(column) else np.full(len(rows), "", dtype=object)


def _stated(plant: Plant, units: Table) -> None:
    """Where a test is missing, the result that the sheet gives or assumes stands in as a reading.

    The reading is the one that would give the result: no load at rated volts of the LV side, load
    loss at rated current of the stated base, fed from the HV side.
    """
    source = plant.transformers
    for block in ("results", "assume"):
        for column in ("load_loss", "impedance_voltage", "temperature", "no_load_loss",
                       "no_load_current"):  # fmt: skip
            name = f"{block}_{column}"
            units.set(name, source[name], source.status[name])
            units.half_digit[name] = source.half_digit[name]
        base = f"{block}_base"
        no_load = ~units.has("oc_watts") & units.has(f"{block}_no_load_loss")
        load = ~units.has("sc_watts") & units.has(f"{block}_load_loss")
        for side in ("hv", "lv"):
            units.put(f"{block}_i_{side}", open_circuit.rated_current, where=no_load | load,
                      s=base, u=f"u_{side}", phases="phases")  # fmt: skip
        units.put("oc_amps", metering.amps_of_share, where=no_load,
                  share=f"{block}_no_load_current", i_r=f"{block}_i_lv")  # fmt: skip
        units.overwrite("oc_volts", "u_lv", no_load)
        units.overwrite("oc_watts", f"{block}_no_load_loss", no_load)
        units.fill("oc_from", no_load, 0.0, Status.MEASURED)
        units.put("sc_volts", metering.volts_of_share, where=load,
                  share=f"{block}_impedance_voltage", u_r="u_hv")  # fmt: skip
        units.overwrite("sc_amps", f"{block}_i_hv", load)
        units.overwrite("sc_watts", f"{block}_load_loss", load)
        units.overwrite("sc_temperature", f"{block}_temperature", load)
        units.fill("sc_from", load, 1.0, Status.MEASURED)
        for out, stated, rows in (("oc_amps", "no_load_current", no_load),
                                  ("oc_watts", "no_load_loss", no_load),
                                  ("sc_volts", "impedance_voltage", load),
                                  ("sc_watts", "load_loss", load)):  # fmt: skip
            _cite(units, out, f"{block}_{stated}", rows)
    cold = units.has("sc_watts") & ~units.has("sc_temperature")
    given = source["assume_winding_temperature"]
    cold &= ~np.isnan(given)
    units.fill("sc_temperature", cold, given, Status.ASSUMED)


def _cite(units: Table, out: str, column: str, where: Mask) -> None:
    """Carry text, line and printed digits of a stated result to the reading it stands in for."""
    units.text[out] = np.where(where, units.text[column], units.word(out))
    units.line[out] = np.where(where, units.line[column], units.line[out]).astype(np.int32)
    with np.errstate(all="ignore"):
        half = units.half_digit[column] * (units[out] / units[column])
    units.half_digit[out] = np.where(where, half, units.half_digit[out])


def _resistances(plant: Plant, units: Table) -> None:
    """Direct-current ohms of each side, per phase of the equivalent star."""
    tests = plant.resistance
    at = tests["unit"].astype(int)
    for side in ("hv", "lv"):
        mine = tests.word("side") == side
        rows = at[mine]
        for column, out in (("ohms", f"ohms_{side}"), ("temperature", f"t_{side}")):
            value, half = np.full(units.n, np.nan), np.full(units.n, np.nan)
            value[rows], half[rows] = tests[column][mine], tests.half_digit[column][mine]
            units.set(out, value)
            units.half_digit[out] = half
        spread = np.full(units.n, np.nan)
        spread[rows] = tests["ohms_spread"][mine]
        units.set(f"ohms_{side}_spread", spread)
        units.text[f"ohms_{side}"] = np.full(units.n, "", dtype=object)
        units.text[f"ohms_{side}"][rows] = tests.text["ohms"][mine]
        units.heading[f"ohms_{side}"] = f"tests.resistance.{side}"
        line = np.zeros(units.n, dtype=np.int32)
        line[rows] = tests.line["ohms"][mine]
        units.line[f"ohms_{side}"] = line
        across = np.full(units.n, "winding", dtype=object)
        across[rows] = tests.word("between")[mine]
        delta = np.char.upper(units.word(f"{side}_connection").astype(str)) == "D"
        winding = np.where(delta, _DELTA_WINDING, _STAR_WINDING)
        units.set(f"share_{side}", np.where(across == "line and line", _BETWEEN_LINES, winding))
        units.put(
            f"r_star_{side}",
            resistance.star_resistance,
            ohms=f"ohms_{side}",
            share=f"share_{side}",
        )


def _power_factor(units: Table, test: str) -> None:
    """Power factor of a reading, and the lowest that its printed digits allow."""
    columns: dict[str, Any] = {"p": f"{test}_watts", "u": f"{test}_volts", "i": f"{test}_amps"}
    units.put(f"{test}_cosphi", open_circuit.power_factor, phases="phases", **columns)
    half = {key: np.nan_to_num(units.half_digit[column]) for key, column in columns.items()}
    with np.errstate(all="ignore"):
        low = open_circuit.power_factor(
            units[columns["p"]] - half["p"],
            units[columns["u"]] + half["u"],
            units[columns["i"]] + half["i"],
            units["phases"],
        )
    units.set(f"{test}_cosphi_low", low)
