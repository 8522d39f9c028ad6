"""Worked examples of books and standards: each printed figure against the formulas of convert.

tests/published/<kind>.csv holds the printed figures, <kind>_given.csv what the examples start
from. A figure must be met to half its last printed digit, unless its row states another tolerance
and the reason. The test composes convert's formulas and has none of its own, but for Ohm's law on
the feeders and the correction factors of IEC 60909-0, which the tool leaves to the planner.
"""

import cmath
import csv
import math
from decimal import Decimal
from pathlib import Path
from typing import Any, NamedTuple

import pytest

from convert.circuit import base_impedance, core_resistance, leg, magnetising_reactance, ohms
from convert.perunit import off_nominal_ratio, series_to_base
from convert.reduction import open_circuit, short_circuit, temperature
from convert.reduction.resistance import ohmic_loss, star_resistance
from convert.regulation import cross_component, drop_iec, efficiency, loss, regulation_ieee

PUBLISHED = Path(__file__).parent / "published"
KINDS = sorted(path.stem for path in PUBLISHED.glob("*.csv") if "_given" not in path.stem)
UNITS = dict.fromkeys(("1", "pu", "ohm", "S", "V", "A", "W", "degC", "deg"), 1.0)
UNITS |= dict.fromkeys(("kVA", "kV", "kA", "kW", "kvar", "kohm"), 1e3)
UNITS |= {"MVA": 1e6, "mohm": 1e-3, "%": 1e-2}
#: the books' first-order form is the slope of the quadratic form where there is no load
NO_LOAD = 1e-9

Given = dict[str, Any]


class Figure(NamedTuple):
    """One printed figure and the load it holds for: a row of tests/published/<kind>.csv."""

    record: str
    quantity: str
    side: str
    k: float
    c: float
    s: float
    published: str
    unit: str
    tolerance: str
    reason: str


# --- reading the files --------------------------------------------------------------------------


def rows(name: str) -> list[dict[str, str]]:
    with (PUBLISHED / f"{name}.csv").open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(line for line in handle if not line.startswith("#")))


def angle(text: str) -> tuple[float, float]:
    """cosφ and sinφ of `0.8 lag`, `0.8 lead` or `1`; sinφ is positive when the load lags."""
    number, _, sense = (text or "1").partition(" ")
    c = float(number)
    return c, math.sqrt(1 - c * c) * (-1 if sense == "lead" else 1)


def figures(kind: str) -> list[Any]:
    params = []
    for row in rows(kind):
        parts = [row[key] for key in ("record", "quantity", "side") if row[key]]
        parts += [f"k={row['load_fraction']}"] if row["load_fraction"] else []
        parts += [row["power_factor"].replace(" ", "-")] if row["power_factor"] else []
        figure = Figure(
            *(row[key] for key in ("record", "quantity", "side")),
            float(row["load_fraction"] or 1),
            *angle(row["power_factor"]),
            *(row[key] for key in ("published", "unit", "tolerance", "tolerance_reason")),
        )
        params.append(pytest.param(figure, id="-".join(parts)))
    return params


def givens(kind: str) -> dict[str, Given]:
    """What each example starts from: numbers in SI or per unit, words (no unit) as words."""
    found: dict[str, Given] = {}
    for row in rows(f"{kind}_given"):
        unit = row["unit"]
        value = float(row["value"]) * UNITS[unit] if unit else row["value"]
        found.setdefault(row["record"], {})[row["key"]] = value
    return found


GIVEN = {record: given for kind in KINDS for record, given in givens(kind).items()}


# --- rated values -------------------------------------------------------------------------------


def rated_amps(g: Given, side: str) -> float:
    return open_circuit.rated_current(g["s_r"], g[f"u_{side}"], g["phases"])


def base(g: Given, side: str) -> float:
    return base_impedance(g[f"u_{side}"], g["s_r"])


def winding_volts(g: Given, side: str) -> float:
    """Volts across one winding, of a star from the printed line volts."""
    return g[f"u_{side}"] / (math.sqrt(3) if g[f"connection_{side}"] == "star" else 1)


def winding_amps(g: Given, side: str) -> float:
    """Amps of one winding: those of a single-phase unit of its share of the power."""
    return open_circuit.rated_current(g["s_r"] / g["phases"], winding_volts(g, side), 1)


def winding_base(g: Given, side: str) -> float:
    """Ohms of one per unit in one winding, from its own volts and its share of the power."""
    return base_impedance(winding_volts(g, side), g["s_r"] / g["phases"])


def line_ratio(g: Given) -> float:
    return off_nominal_ratio(g["u_hv"], g["u_lv"], 1, 1)


def winding_ratio(g: Given) -> float:
    return off_nominal_ratio(winding_volts(g, "hv"), winding_volts(g, "lv"), 1, 1)


# --- from what is given to one circuit on the unit's own base -----------------------------------


def winding_loss(g: Given, side: str) -> float:
    """I²R loss of one side from the ohms of one of its windings."""
    share = 1 / 3 if g[f"connection_{side}"] == "delta" else 1
    r = star_resistance(g[f"winding_ohms_{side}"], share)
    return ohmic_loss(rated_amps(g, side), r, g["phases"])


def load_loss(g: Given) -> float:
    if "p_k" in g:
        return g["p_k"]
    if "winding_ohms_hv" in g:
        return temperature.load_loss(winding_loss(g, "hv"), winding_loss(g, "lv"), 0)
    i_r = rated_amps(g, g["sc_side"])
    return short_circuit.load_loss_at_rated_current(g["sc_p"], g["sc_i"], i_r)


def impedance_voltage(g: Given) -> float:
    if "z" in g:
        return g["z"]
    side = g["sc_side"]
    i_r = rated_amps(g, side)
    u_k = short_circuit.impedance_volts_at_rated_current(g["sc_u"], g["sc_i"], i_r)
    return short_circuit.impedance_voltage(u_k, g[f"u_{side}"])


def series(g: Given) -> complex:
    """r + jx, given in per unit or in ohms of the two windings, or from the short-circuit test."""
    sides = [side for side in ("hv", "lv") if f"x_{side}" in g]
    if sides:
        return sum(complex(g[f"r_{side}"], g[f"x_{side}"]) / base(g, side) for side in sides)
    r = g["r"] if "r" in g else short_circuit.series_resistance(load_loss(g), g["s_r"])
    x = g["x"] if "x" in g else short_circuit.series_reactance(impedance_voltage(g), r)
    return short_circuit.impedance(r, x)


def no_load_loss(g: Given) -> float:
    if "p_0" in g:
        return g["p_0"]
    return open_circuit.no_load_loss_at_rated_volts(g["oc_p"], g["oc_u"], g[f"u_{g['oc_side']}"])


def no_load_amps(g: Given) -> float:
    u_r = g[f"u_{g['oc_side']}"]
    if "oc_power_factor" in g:  # amps of the apparent power
        return open_circuit.rated_current(g["p_0"] / g["oc_power_factor"], u_r, g["phases"])
    return open_circuit.no_load_current_at_rated_volts(g["oc_i"], g["oc_u"], u_r)


def shunt(g: Given) -> complex:
    i_0 = open_circuit.no_load_current_per_unit(no_load_amps(g), rated_amps(g, g["oc_side"]))
    conductance = open_circuit.shunt_conductance(no_load_loss(g), g["s_r"])
    susceptance = open_circuit.shunt_susceptance(i_0, conductance)
    return open_circuit.admittance(conductance, susceptance)


def rebased(g: Given) -> complex:
    return series_to_base(series(g), g["s_r"], g["s_new"], g["u_lv"], g["u_new_lv"])


# --- under load ---------------------------------------------------------------------------------


def regulation(g: Given, f: Figure) -> float:
    z = series(g)
    return regulation_ieee(z.real, z.imag, f.k, f.c, f.s)


def first_order_drop(g: Given, f: Figure) -> float:
    z = series(g)
    return f.k * drop_iec(z.real, z.imag, NO_LOAD, f.c, f.s) / NO_LOAD


def largest_drop(g: Given) -> float:
    """First-order drop where the load has the unit's own angle, that of its short-circuit test."""
    z = series(g)
    c = open_circuit.power_factor(z.real, 1, abs(z), 1)
    return drop_iec(z.real, z.imag, NO_LOAD, c, math.sqrt(1 - c * c)) / NO_LOAD


def volts_behind_the_load(g: Given, f: Figure) -> float:
    """High-voltage volts that hold a load of `s_new` at `u_new_lv` volts."""
    z = rebased(g)
    return line_ratio(g) * g["u_new_lv"] * (1 + regulation_ieee(z.real, z.imag, f.k, f.c, f.s))


def volts_after_the_drop(g: Given, f: Figure) -> float:
    """Of a purely reactive load and unit, whose drop lies along the volts [pu, new base]."""
    z = rebased(g)
    return g["supply"] - drop_iec(z.real, z.imag, f.k, f.c, f.s)


def efficiency_at(g: Given, f: Figure) -> float:
    return efficiency(g["s_r"], loss(no_load_loss(g), load_loss(g), f.k), f.k, f.c)


def best_efficiency(g: Given, f: Figure) -> float:
    """Efficiency at the load fraction at which the load loss equals the no-load loss."""
    return efficiency(g["s_r"], loss(no_load_loss(g), no_load_loss(g), 1), f.k, f.c)


# --- at another temperature: the examples print the I²R loss of both sides together ---------------


def stray_loss(g: Given) -> float:
    return temperature.stray_loss(g["p_k"], g["p_ohmic"], 0)


def ohmic_loss_new(g: Given) -> float:
    steps = (g["t"], g["t_new"], g["constant"])
    return temperature.ohmic_loss_at_temperature(g["p_ohmic"], *steps)


def load_loss_new(g: Given) -> float:
    steps = (g["t"], g["t_new"], g["constant"])
    stray = temperature.stray_loss_at_temperature(stray_loss(g), *steps)
    return temperature.load_loss(ohmic_loss_new(g), 0, stray)


# --- feeders: Ohm's law, one phase of a star-star unit as a branch of its own ---------------------


def phasor(g: Given, name: str) -> complex:
    return cmath.rect(g[name], math.radians(g[f"{name}_deg"]))


def load_side_volts(g: Given, phase: str) -> complex:
    """Volts to neutral behind the branch, from the feed's volts and its amps or the load."""
    ratio = line_ratio(g)
    z = ohms(series(g), base(g, "lv"))
    no_load = phasor(g, f"feed_volts_{phase}") / ratio
    if f"feed_amps_{phase}" in g:
        return no_load - z * ratio * phasor(g, f"feed_amps_{phase}")
    power = complex(g[f"load_w_{phase}"], g[f"load_var_{phase}"])
    if f"load_volts_{phase}" in g:  # the load hangs on a line behind the unit
        return no_load - z * (power / phasor(g, f"load_volts_{phase}")).conjugate()
    volts = no_load
    for _ in range(20):
        volts = no_load - z * (power / volts).conjugate()
    return volts


# --- IEC 60909-0: correction factors, arithmetic of the standard and not of the tool --------------


def correction(g: Given) -> float:
    """K_T of a network transformer, K_S or K_SO of a power station unit."""
    x = series(g).imag
    if "generator_x" not in g:
        return 0.95 * g["c_max"] / (1 + 0.6 * x)
    s = math.sqrt(1 - g["generator_power_factor"] ** 2)
    ratio = g["network_u"] / g["generator_u"] / line_ratio(g)
    if "generator_p" in g:  # off-load taps: the generator's volts may stand above rated
        return ratio / (1 + g["generator_p"]) * g["c_max"] / (1 + g["generator_x"] * s)
    return ratio**2 * g["c_max"] / (1 + abs(g["generator_x"] - x) * s)


def corrected(g: Given, side: str) -> complex:
    z = ohms(series(g), base(g, side))
    if "generator_x" in g:
        x = ohms(g["generator_x"], base_impedance(g["generator_u"], g["generator_s"]))
        z += line_ratio(g) ** 2 * complex(g["generator_r"], x)
    return correction(g) * z


# --- the quantities of the files ----------------------------------------------------------------

QUANTITIES = {
    "rated_current": lambda g, f: rated_amps(g, f.side),
    "winding_current": lambda g, f: winding_amps(g, f.side),
    "line_ratio": lambda g, f: line_ratio(g),
    "winding_ratio": lambda g, f: winding_ratio(g),
    "base_impedance": lambda g, f: base(g, f.side),
    "new_base_impedance": lambda g, f: base_impedance(g[f"u_new_{f.side}"], g["s_new"]),
    # series branch
    "load_loss_pu": lambda g, f: load_loss(g) / g["s_r"],
    "sc_power_factor": lambda g, f: open_circuit.power_factor(
        g["sc_p"], g["sc_u"], g["sc_i"], g["phases"]
    ),
    "resistance_pu": lambda g, f: series(g).real,
    "reactance_pu": lambda g, f: series(g).imag,
    "impedance_pu": lambda g, f: abs(series(g)),
    "x_over_r": lambda g, f: series(g).imag / series(g).real,
    "resistance": lambda g, f: ohms(series(g), base(g, f.side)).real,
    "reactance": lambda g, f: ohms(series(g), base(g, f.side)).imag,
    "impedance": lambda g, f: abs(ohms(series(g), base(g, f.side))),
    "half_resistance": lambda g, f: ohms(leg(series(g), 0.5, 0.5), base(g, f.side)).real,
    "half_reactance": lambda g, f: ohms(leg(series(g), 0.5, 0.5), base(g, f.side)).imag,
    "winding_resistance": lambda g, f: ohms(series(g), winding_base(g, f.side)).real,
    "winding_reactance": lambda g, f: ohms(series(g), winding_base(g, f.side)).imag,
    "winding_impedance": lambda g, f: abs(ohms(series(g), winding_base(g, f.side))),
    "resistance_new_pu": lambda g, f: rebased(g).real,
    "reactance_new_pu": lambda g, f: rebased(g).imag,
    # shunt branch
    "oc_power_factor": lambda g, f: open_circuit.power_factor(
        g["oc_p"], g["oc_u"], g["oc_i"], g["phases"]
    ),
    "no_load_current_pu": lambda g, f: abs(shunt(g)),
    "no_load_current": lambda g, f: abs(shunt(g)) * rated_amps(g, f.side),
    "core_current": lambda g, f: shunt(g).real * rated_amps(g, f.side),
    "magnetising_current": lambda g, f: -shunt(g).imag * rated_amps(g, f.side),
    "core_resistance": lambda g, f: core_resistance(shunt(g), base(g, f.side)),
    "magnetising_reactance": lambda g, f: magnetising_reactance(shunt(g), base(g, f.side)),
    "winding_core_resistance": lambda g, f: core_resistance(shunt(g), winding_base(g, f.side)),
    "winding_magnetising_reactance": lambda g, f: magnetising_reactance(
        shunt(g), winding_base(g, f.side)
    ),
    "core_conductance": lambda g, f: 1 / core_resistance(shunt(g), base(g, f.side)),
    "magnetising_susceptance": lambda g, f: 1 / magnetising_reactance(shunt(g), base(g, f.side)),
    "shunt_admittance": lambda g, f: 1 / abs(ohms(1 / shunt(g), base(g, f.side))),
    # under load
    "regulation": regulation,
    "regulation_first_order": first_order_drop,
    "regulation_largest": lambda g, f: largest_drop(g),
    "supply_pu": lambda g, f: 1 + regulation(g, f),
    "supply_volts": lambda g, f: g[f"u_{f.side}"] * (1 + regulation(g, f)),
    "supply_pu_in_phase": lambda g, f: 1 + first_order_drop(g, f),
    "supply_pu_across": lambda g, f: f.k * cross_component(series(g), f.c, f.s),
    "drop_first_order": lambda g, f: g[f"u_{f.side}"] * first_order_drop(g, f),
    "load_volts_first_order": lambda g, f: g[f"u_{f.side}"] * (1 - first_order_drop(g, f)),
    "supply_volts_of_load": volts_behind_the_load,
    "load_pu": volts_after_the_drop,
    "efficiency": efficiency_at,
    "efficiency_best": best_efficiency,
    # temperature
    "stray_loss": lambda g, f: stray_loss(g),
    "ohmic_loss_new": lambda g, f: ohmic_loss_new(g),
    "load_loss_new": lambda g, f: load_loss_new(g),
    # feeders: `side` is the phase
    "load_side_volts": lambda g, f: abs(load_side_volts(g, f.side)),
    "load_side_angle": lambda g, f: math.degrees(cmath.phase(load_side_volts(g, f.side))),
    # IEC 60909-4
    "correction_factor": lambda g, f: correction(g),
    "corrected_resistance": lambda g, f: corrected(g, f.side).real,
    "corrected_reactance": lambda g, f: corrected(g, f.side).imag,
}


def half_digit(text: str) -> float:
    """Half of the last printed digit."""
    return float(Decimal(5).scaleb(Decimal(text).as_tuple().exponent - 1))


FIGURES = [figure for kind in KINDS for figure in figures(kind)]


@pytest.mark.parametrize("figure", FIGURES)
def test_published(figure: Figure) -> None:
    value = QUANTITIES[figure.quantity](GIVEN[figure.record], figure) / UNITS[figure.unit]
    atol = float(figure.tolerance) if figure.tolerance else half_digit(figure.published)
    assert value == pytest.approx(float(figure.published), rel=0, abs=atol)


def test_a_loose_tolerance_has_a_reason_and_is_needed() -> None:
    for param in FIGURES:
        (figure,) = param.values
        assert bool(figure.tolerance) == bool(figure.reason), param.id
        if figure.tolerance and float(figure.tolerance) > half_digit(figure.published):
            value = QUANTITIES[figure.quantity](GIVEN[figure.record], figure) / UNITS[figure.unit]
            off = abs(value - float(figure.published))
            assert half_digit(figure.published) < off, param.id
            assert float(figure.tolerance) <= 1.1 * off, param.id


def test_every_row_says_where_it_comes_from() -> None:
    for kind in KINDS:
        for row in rows(kind):
            assert row["status"], row
            assert row["source"], row
            assert row["where_read"], row
        assert all(row["status"] for row in rows(f"{kind}_given")), kind
