"""The table of each unit at each cooling stage and in each state, against units in ohm."""

from dataclasses import replace

import forward
import numpy as np
import pytest
from forward import DELTA, OPEN, SHORT, STAR, Circuit, burden, feed, ohms_between, volts
from hypothesis import given, settings
from strategies import bays, plant_of, reduced, stations

from convert import chain, unitsheet

CLOSE = 1e-9
STUDY = 68.0
LOAD = 0.8 - 0.6j  # amps of a load of one per unit at 0.8 lagging and one per unit of volts


def rows(tests, **system):
    """Rows of the table as dicts by unit, stage and state."""
    plant = plant_of(tests, study=STUDY, **system)
    units, findings = chain.run(plant)
    assert not findings
    columns = unitsheet.table(plant, units)
    listed = [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]
    return {(row["name"], row["stage"], row["state"]): row for row in listed}


def temperature(test, state):
    reference = STUDY if test.reference is None else test.reference
    return {"tested": test.temperature, "reference": reference, "study": STUDY}[state]


def powers(test):
    return dict(test.stages or (("", test.unit.power),))


@settings(derandomize=True, deadline=None, max_examples=15)
@given(stations(most=3))
def test_a_row_for_every_stage_and_state_in_order(tests):
    wanted = [
        (test.name, stage, state)
        for test in tests
        for stage in powers(test)
        for state in ("tested", "reference", "study")
    ]
    found = rows(tests)
    assert list(found) == wanted
    for test in tests:
        for stage, power in powers(test).items():
            for state in ("tested", "reference", "study"):
                row = found[test.name, stage, state]
                assert row["rated_mva"] == pytest.approx(power / 1e6, rel=1e-15, abs=0)
                assert row["winding_temp_degc"] == temperature(test, state)


@settings(derandomize=True, deadline=None, max_examples=15)
@given(bays())
def test_results_are_those_of_a_test_at_the_rated_amps_and_volts_of_the_stage(test):
    for (_, stage, state), row in rows([test]).items():
        power, t = powers(test)[stage], temperature(test, state)
        rated = {side: test.unit.rated_amps(side, power) for side in ("hv", "lv")}
        u, _, p = test.at(sc_amps=rated[test.fed]).short_circuit(t)
        ur = p / power
        uk = u / test.unit.side(test.fed).volts
        _, drive, no_load = test.at(oc_volts=0.0).open_circuit()
        wanted = {
            "rated_amps_hv": rated["hv"],
            "rated_amps_lv": rated["lv"],
            "pk_w": p,
            "p0_w": no_load,
            "uk_percent": 100 * uk,
            "ur_percent": 100 * ur,
            "ux_percent": 100 * np.sqrt((uk - ur) * (uk + ur)),
            "i0_percent": 100 * drive / rated[test.energised],
            "x_over_r": np.sqrt((uk / ur - 1) * (uk / ur + 1)),
        }
        found = [row[name] for name in wanted]
        np.testing.assert_allclose(found, list(wanted.values()), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=15)
@given(bays())
def test_six_elements_in_ohm_from_both_sides_are_the_units_own(test):
    for (_, _, state), row in rows([test]).items():
        known = test.circuit(temperature(test, state))
        for side, square in (("hv", 1.0), ("lv", test.unit.ratio**2)):
            wanted = {
                "r1": known.z_hv.real / square,
                "x1": known.z_hv.imag / square,
                "r2": known.z_lv.real / square,
                "x2": known.z_lv.imag / square,
                "rc": 1 / known.y.real / square,
                "xm": -1 / known.y.imag / square,
            }
            found = [row[f"{name}_{side}_ohm"] for name in wanted]
            np.testing.assert_allclose(found, list(wanted.values()), rtol=CLOSE)
            winding = [row[f"{name}_{side}_delta_ohm"] for name in wanted]
            if test.unit.side(side).connection != "D":
                assert np.isnan(winding).all()
                continue
            # three windings in delta are, between lines, the star that is shown
            for delta, star in zip(winding, found, strict=True):
                lines = ohms_between(DELTA, delta), ohms_between(STAR, star)
                assert lines[0] == pytest.approx(lines[1], rel=1e-12, abs=0)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays())
def test_per_unit_circuit_is_the_ohms_on_the_stages_own_base(test):
    for (_, stage, state), row in rows([test]).items():
        known = test.circuit(temperature(test, state))
        base = replace(test.unit, power=powers(test)[stage]).ohm_base
        found = (
            row["r_own_pu"] + 1j * row["x_own_pu"],
            row["g_own_pu"] + 1j * row["b_own_pu"],
        )
        np.testing.assert_allclose(found, (known.z / base, known.y * base), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=12)
@given(bays(), bays())
def test_the_stage_of_the_study_leaves_the_ohms_and_every_row_alone(test, other):
    power = other.unit.power if 0.2 < other.unit.power / test.unit.power < 5 else test.unit.power
    stages = (("first", test.unit.power), ("second", power))
    one = rows([test.at(stages=stages, stage="first")])
    two = rows([test.at(stages=stages, stage="second", sc_amps=test.sc_amps)])
    assert list(one) == list(two)
    for key, row in one.items():
        numbers = [name for name, value in row.items() if isinstance(value, float)]
        found = [two[key][name] for name in numbers]
        # the errors of simpler circuits are differences of numbers near one: two decades more
        # and a stray loss of nothing is the difference of kilowatts
        np.testing.assert_allclose(found, [row[n] for n in numbers], rtol=1e-11, atol=1e-9)


def volts_and_loss(t, load):
    """HV volts and loss of a circuit with one per unit at its load, all per unit."""
    state = feed(t, "hv", volts(1.0), burden(load))
    scale = np.abs(state.volts["lv"])
    return 1 / scale, (state.power("hv") + state.power("lv")).real / scale**2


@settings(derandomize=True, deadline=None, max_examples=15)
@given(bays())
def test_errors_of_simpler_circuits_are_those_of_their_networks(test):
    for (_, stage, state), row in rows([test]).items():
        t = temperature(test, state)
        base = replace(test.unit, power=powers(test)[stage]).ohm_base
        known = test.circuit(t)
        z, y = test.unit.z(t) / base, test.unit.y * base
        exact = volts_and_loss(Circuit(known.z_hv / base, known.z_lv / base, known.y * base), LOAD)
        for name, simple in (
            ("cantilever", Circuit(0.0, z, y)),
            ("series_only", Circuit(0.0, z, 0.0)),
        ):
            found = [row[f"{name}_{what}_error_percent"] for what in ("volts", "loss")]
            off = np.array(volts_and_loss(simple, LOAD)) / exact - 1
            # a loss of a thousandth is a difference of powers of one: three digits fewer
            np.testing.assert_allclose(found, 100 * off, rtol=0, atol=1e-9)


def test_a_simpler_circuit_without_shunt_loses_the_core_loss():
    # invented 1 MVA unit of 1.2 % no-load loss and 0.8 % load loss: the sign and size by hand
    hv, lv = forward.Side(11e3, "D", 1.1), forward.Side(400.0, "YN", 0.49e-3)
    unit = forward.Unit(hv, lv, 1e6, 0.15, 7.0, 0.012 / 121, 0.03 / 121, clock=11)
    row = rows([forward.Test(unit)])["T1", "", "study"]
    core = row["p0_w"] / (row["p0_w"] + row["pk_w"])
    assert row["series_only_loss_error_percent"] == pytest.approx(-100 * core, rel=0.1, abs=0)
    # a shunt at the fed terminals takes nothing from the volts: both simpler circuits drop alike
    volts_off = [row[f"{name}_volts_error_percent"] for name in ("cantilever", "series_only")]
    assert volts_off[0] == volts_off[1] != 0


def test_the_six_elements_together_show_both_tests():
    # the columns alone, from LV, without a word of per unit: watts and amps of both tests
    hv, lv = forward.Side(33e3, "D", 9.0), forward.Side(11e3, "YN", 0.21)
    unit = forward.Unit(hv, lv, 10e6, 0.5, 9.8, 2e-6, 9e-6, clock=1)
    test = forward.Test(unit, energised="lv", fed="lv", sc_amps=400.0, temperature=STUDY)
    row = rows([test])["T1", "", "study"]
    r1, x1, r2, x2, rc, xm = (row[f"{n}_lv_ohm"] for n in ("r1", "x1", "r2", "x2", "rc", "xm"))
    t = Circuit(r1 + 1j * x1, r2 + 1j * x2, 1 / rc - 1j / xm)
    u, i, p = test.open_circuit()
    state = feed(t, "lv", volts(u / np.sqrt(3)), OPEN)
    np.testing.assert_allclose(np.abs(state.amps["lv"]), i, rtol=CLOSE)
    np.testing.assert_allclose(3 * state.power("lv").real, p, rtol=CLOSE)
    u, i, p = test.short_circuit()
    state = feed(t, "lv", forward.amps(i), SHORT)
    np.testing.assert_allclose(np.abs(state.volts["lv"]) * np.sqrt(3), u, rtol=CLOSE)
    np.testing.assert_allclose(3 * state.power("lv").real, p, rtol=CLOSE)


def test_no_unit_gives_an_empty_table():
    hv, lv = forward.Side(33e3, "D", 9.0), forward.Side(11e3, "YN", 0.21)
    unit = forward.Unit(hv, lv, 10e6, 0.5, 9.8, 2e-6, 9e-6, clock=1)
    plant = plant_of([forward.Test(unit)])
    columns = unitsheet.table(plant, reduced([forward.Test(unit)]).take(np.array([], dtype=int)))
    assert {len(column) for column in columns.values()} == {0}
