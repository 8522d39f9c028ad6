"""From readings to the branch: the known circuit at the study's temperature, and what stays.

The units are invented by the forward model, which shares nothing with the program.
"""

import importlib
import inspect
import pkgutil
from dataclasses import replace

import numpy as np
import pytest
from forward import OPEN, SHORT, Circuit, Side, Test, Unit, feed, seen, sheet, volts
from hypothesis import given, settings
from hypothesis import strategies as st
from strategies import bays, plant_of, plant_of_text, reduced, stations

import convert
from convert import chain

CLOSE = 1e-9
STUDY = 68.0
STATES = ("tested", "reference", "study")
EPS = np.finfo(float).eps


def column(found):
    return np.array(list(found))


# --- the known circuit --------------------------------------------------------------------------


@settings(derandomize=True, deadline=None, max_examples=40)
@given(stations())
def test_readings_are_reduced_to_the_known_circuit_at_the_studys_temperature(tests):
    # any side, volts, amps, stage, metals, terminals, one or three readings, halves or by ohms
    table = reduced(tests, study=STUDY)
    known = [test.per_unit(STUDY) for test in tests]
    for name, wanted in (
        ("z_t_study", column(t.z for t in known)),
        ("z_from_study", column(t.z_hv for t in known)),
        ("z_to_study", column(t.z_lv for t in known)),
        ("y_m_study", column(t.y for t in known)),
    ):
        np.testing.assert_allclose(table[name], wanted, rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=15)
@given(stations(angles=(0.995, 0.999999)))
def test_near_a_power_factor_of_one_resistance_and_magnitudes_are_the_known(tests):
    # x and b are the small roots there: half their digits are lost in any reduction
    table = reduced(tests, study=STUDY)
    z = column(test.unit.z(STUDY) / test.unit.ohm_base for test in tests)
    y = column(test.unit.y * test.unit.ohm_base for test in tests)
    np.testing.assert_allclose(table["z_sc_study"].real, z.real, rtol=CLOSE)
    np.testing.assert_allclose(np.abs(table["z_sc_study"]), np.abs(z), rtol=CLOSE)
    np.testing.assert_allclose(np.abs(table["y_oc"]), np.abs(y), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=15)
@given(stations(split="resistances"))
def test_split_by_resistances_gives_the_known_unlike_legs(tests):
    table = reduced(tests, study=STUDY)
    for at, test in enumerate(tests):
        known = test.per_unit(STUDY)
        assert known.z_hv.real / known.z.real == pytest.approx(
            test.unit.r_share(20.0), rel=1e-12, abs=0
        )
        np.testing.assert_allclose(table["z_from_study"][at], known.z_hv, rtol=CLOSE)
        np.testing.assert_allclose(table["z_to_study"][at], known.z_lv, rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=15)
@given(stations(most=3))
def test_the_circuit_of_every_state_shows_both_tests_where_they_were_made(tests):
    table = reduced(tests, study=STUDY)
    for at, test in enumerate(tests):
        for state in STATES:
            t = Circuit(*(table[f"{n}_{state}"][at] for n in ("z_from", "z_to", "y_m")))
            z, y = table[f"z_sc_{state}"][at], table["y_oc"][at]
            np.testing.assert_allclose(seen(t, test.fed, SHORT), z, rtol=1e-12)
            drive = feed(t, test.energised, volts(1.0), OPEN).amps[test.energised]
            np.testing.assert_allclose(drive, y, rtol=1e-12)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(stations(most=3))
def test_the_simplified_circuit_is_both_tests_as_they_stand(tests):
    table = reduced(tests, model="cantilever", study=STUDY)
    z = column(test.unit.z(STUDY) / test.unit.ohm_base for test in tests)
    y = column(test.unit.y * test.unit.ohm_base for test in tests)
    np.testing.assert_allclose(table["z_to_study"], z, rtol=CLOSE)
    np.testing.assert_allclose(table["y_m_study"], y, rtol=CLOSE)
    np.testing.assert_array_equal(table["z_from_study"], 0)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays())
def test_chain_constants_are_those_of_the_studys_circuit(test):
    table, t = reduced([test], study=STUDY), test.per_unit(STUDY)
    empty, short = feed(t, "hv", volts(1.0), OPEN), feed(t, "hv", volts(1.0), SHORT)
    np.testing.assert_allclose(table["chain_a"], 1 / empty.volts["lv"], rtol=1e-12)
    np.testing.assert_allclose(table["chain_b"], 1 / -short.amps["lv"], rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays())
def test_a_certificate_of_results_gives_the_circuit_of_the_readings(test):
    stages = (("first", test.unit.power), ("second", 0.8 * test.unit.power))
    plain = test.at(fed="hv", energised="lv", stages=stages, stage="first")
    stated = plain.at(results=True, results_power=0.8 * test.unit.power)
    one, other = reduced([plain], study=STUDY), reduced([stated], study=STUDY)
    for name in ("z_t_study", "y_m_study", "z_sc_tested"):
        np.testing.assert_allclose(other[name], one[name], rtol=CLOSE)


# --- what must not move -------------------------------------------------------------------------


def results(table):
    """Every column of numbers of a table, by unit."""
    order = {name: at for at, name in enumerate(table.text["name"])}
    skipped = ("hv_bus", "lv_bus")  # positions in the sheet
    return order, {name: table[name] for name in table.values if name not in skipped}


@settings(derandomize=True, deadline=None, max_examples=12)
@given(stations(), st.randoms(use_true_random=False))
def test_the_order_of_the_units_does_not_matter(tests, random):
    mixed = list(tests)
    random.shuffle(mixed)
    (first, one), (second, other) = results(reduced(tests)), results(reduced(mixed))
    assert one.keys() == other.keys()
    for test in tests:
        for name in one:
            np.testing.assert_array_equal(
                other[name][second[test.name]], one[name][first[test.name]], err_msg=name
            )


@settings(derandomize=True, deadline=None, max_examples=12)
@given(stations())
def test_a_unit_alone_is_the_unit_among_others(tests):
    # to rounding: numpy may take a power or a root of many numbers by another route
    at, together = results(reduced(tests))
    for test in tests:
        _, alone = results(reduced([test]))
        for name, found in alone.items():
            wanted = together[name][at[test.name]]
            np.testing.assert_allclose(found[0], wanted, rtol=1e-13, err_msg=name)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays(), st.floats(0.05, 1.0), st.floats(0.05, 1.0))
def test_scaled_readings_leave_the_circuit_alone(test, of_volts, of_amps):
    other = test.at(oc_volts=test.oc_volts * of_volts, sc_amps=test.sc_amps * of_amps)
    one, two = reduced([test]), reduced([other])
    for name in ("z_t_study", "y_m_study", "z_system", "y_system", "ratio"):
        np.testing.assert_allclose(two[name], one[name], rtol=1e-12)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays(), st.floats(0.5, 2.0))
def test_the_stage_of_the_study_leaves_the_branch_and_its_ohms_alone(test, factor):
    stages = (("first", test.unit.power), ("second", test.unit.power * factor))
    one = reduced([test.at(stages=stages, stage="first")])
    two = reduced([test.at(stages=stages, stage="second")])
    assert two["s"] == pytest.approx(one["s"] * factor)
    for name in ("z_system", "y_system", "ratio"):
        np.testing.assert_allclose(two[name], one[name], rtol=1e-12)
    base = test.unit.hv.volts**2
    for state in STATES:
        z = [table[f"z_t_{state}"] * base / table["s"] for table in (one, two)]
        np.testing.assert_allclose(z[1], z[0], rtol=1e-12)


HV, LV = Side(33e3, "D", 5.1, nominal=34.5e3), Side(11e3, "YN", 0.19, nominal=11e3)
UNIT = Unit(HV, LV, 10e6, 0.4, 9.8, 2.1e-6, 9.4e-6, clock=11)


def test_the_temperature_of_the_study_is_the_reference_where_the_sheet_has_none():
    found = reduced([Test(UNIT, temperature=17.0, reference=85.0)], study=None)
    known = Test(UNIT, temperature=17.0).per_unit(85.0)
    np.testing.assert_allclose(found["z_t_study"], known.z, rtol=CLOSE)


def test_the_temperature_of_the_study_is_75_degrees_where_nothing_says_it():
    found = reduced([Test(UNIT, temperature=17.0)], study=None)
    known = Test(UNIT, temperature=17.0).per_unit(75.0)
    np.testing.assert_allclose(found["z_t_study"], known.z, rtol=CLOSE)


def test_the_frequency_of_the_study_moves_nothing():
    one, two = (reduced([Test(UNIT)], frequency=f) for f in (50.0, 60.0))
    np.testing.assert_array_equal(one["z_t_study"], two["z_t_study"])


def test_a_unit_that_fails_is_left_out_and_the_others_stay_as_they_are():
    good, bad = Test(UNIT, name="good"), Test(UNIT, name="bad", spread=0.0)
    text = sheet([bad, good])
    watts = repr(bad.short_circuit()[2])
    # the first unit's watts a hundredfold: no circuit has them
    text = text.replace(f"watts: {watts} W", f"watts: {100 * float(watts)!r} W", 1)
    units, findings = chain.run(plant_of_text(text))
    assert [finding.subject for finding in findings] == ["bad"]
    assert list(units.text["name"]) == ["good"]
    np.testing.assert_array_equal(units["z_t_study"], reduced([good])["z_t_study"])


@pytest.mark.parametrize("split", ["", "resistances"])
def test_two_metals_and_a_split_by_ohms_still_show_both_tests(split):
    # the shares are those of the ohms at the test's own temperature
    mixed = replace(UNIT, lv=replace(LV, metal="aluminium"))
    test = Test(mixed, temperature=17.0, split=split, fed="lv")
    known = test.per_unit(STUDY)
    table = reduced([test], study=STUDY)
    np.testing.assert_allclose(table["z_from_study"], known.z_hv, rtol=CLOSE)
    np.testing.assert_allclose(table["z_to_study"], known.z_lv, rtol=CLOSE)


# --- a formula is one text for a number and for a column ----------------------------------------


def formulas():
    """Every function of the package that names its source, once."""
    found = {}
    for module in pkgutil.walk_packages(convert.__path__, "convert."):
        for function in vars(importlib.import_module(module.name)).values():
            if inspect.isfunction(function) and hasattr(function, "source"):
                found[f"{function.__module__}.{function.__name__}"] = function
    return found


FORMULAS = formulas()
COMPLEX = {"z", "y", "z_sc", "y_oc", "z_leg", "z_a", "z_b", "y_m", "z_from", "z_to", "z_t"}
#: of the two-port formulas, where these letters are no angle and no temperature
CHAIN = {"a", "b", "c", "d", "load", "i", "u"}
#: names of what is a column of positive numbers of its own range; the others lie in 0.1 to 0.9
RANGES = {"i_0": (1.0, 2.0), "s_r": (1.0, 2.0), "t": (0.0, 40.0), "t_new": (60.0, 90.0),
          "phases": (3.0, 3.0)}  # fmt: skip
REAL = {
    "convert.reduction.short_circuit.series_reactance": {"z": (1.0, 2.0)},
    "convert.regulation.bound_iec": {"q": (0.0, 0.2), "k": (0.1, 1.0), "k_max": (0.1, 1.1)},
}
TWO_PORT = {
    "convert.circuit.from_volts": CHAIN,
    "convert.circuit.loss": CHAIN,
    "convert.regulation.regulation_phasor": {"a", "b"},
    "convert.regulation.thevenin": {"a", "b"},
    "convert.regulation.bound_iec": {"a"},
}


#: differences of two numbers near one, whose rounding is that of one
NEAR_ONE = {"convert.circuit.loss", "convert.regulation.regulation_phasor"}


def arguments(name, function, n, seed):
    """Columns for a formula by the names of its arguments."""
    random = np.random.default_rng(seed)
    real = REAL.get(name, {})
    columns = {}
    for argument in inspect.signature(function).parameters:
        low, high = real.get(argument, RANGES.get(argument, (0.1, 0.9)))
        values = random.uniform(low, high, n)
        if argument not in real and argument in COMPLEX | TWO_PORT.get(name, set()):
            values = 0.3 * values * np.exp(1j * random.uniform(0.1, 1.4, n))
            values += 1.0 if argument in ("a", "d") else 0.0
        columns[argument] = values
    return columns


def test_the_formulas_are_found():
    assert len(FORMULAS) > 50
    assert "convert.circuit.exact_t_leg" in FORMULAS


@pytest.mark.parametrize("name", list(FORMULAS))
def test_a_number_and_a_column_give_the_same(name):
    function = FORMULAS[name]
    columns = arguments(name, function, 200, 7)
    found = np.broadcast_to(function(**columns), 200)
    assert np.isfinite(found).all()
    for at in range(200):
        one = function(**{key: values[at].item() for key, values in columns.items()})
        assert abs(one - found[at]) <= 4 * EPS * (1.0 if name in NEAR_ONE else abs(one))


def test_a_plant_without_units_is_an_empty_table():
    plant = plant_of([Test(UNIT)])
    table = chain.gather(plant).take(np.array([], dtype=int))
    assert table.n == 0
