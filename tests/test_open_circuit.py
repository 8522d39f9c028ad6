"""Open-circuit readings -> y_oc, against units of the forward model (invented)."""

from dataclasses import replace
from decimal import Decimal, getcontext

import numpy as np
import pytest
from forward import Test
from hypothesis import given, settings
from strategies import bays, reduced, stations, units

from convert.reduction import open_circuit

CLOSE = 1e-9
getcontext().prec = 40


def known(tests):
    """y_oc of each unit on its own base."""
    return np.array([test.unit.y * test.unit.ohm_base for test in tests])


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations())
def test_readings_of_either_side_at_any_volts_give_the_known_admittance(tests):
    np.testing.assert_allclose(reduced(tests)["y_oc"], known(tests), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations(angles=(0.995, 0.999999)))
def test_near_a_power_factor_of_one_conductance_and_magnitude_hold(tests):
    # b is the small root of i0² - g²: half the digits of i0 are lost on the way to it
    found, wanted = reduced(tests)["y_oc"], known(tests)
    np.testing.assert_allclose(found.real, wanted.real, rtol=CLOSE)
    np.testing.assert_allclose(np.abs(found), np.abs(wanted), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations())
def test_loss_and_amps_at_rated_volts_are_those_of_a_test_at_rated_volts(tests):
    rated = [test.at(oc_volts=0.0).open_circuit() for test in tests]
    found = reduced(tests)
    np.testing.assert_allclose(found["p0"], [watts for _, _, watts in rated], rtol=CLOSE)
    np.testing.assert_allclose(found["i0_amps"], [drive for _, drive, _ in rated], rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(bays())
def test_scaled_readings_leave_the_admittance_alone(test):
    tests = [test.at(name=f"T{n}", oc_volts=test.oc_volts * n) for n in (1, 0.5, 0.01)]
    found = reduced(tests)["y_oc"]
    np.testing.assert_allclose(found, found[0], rtol=1e-12)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(units())
def test_a_unit_that_draws_nothing_at_no_load_has_no_shunt(unit):
    bare = Test(replace(unit, g=0.0, b=0.0))
    table = reduced([bare])
    assert table["y_oc"] == table["y_m_study"] == 0
    # and then the legs are all there is
    z = unit.z(75.0) / unit.ohm_base
    np.testing.assert_allclose(table["z_t_study"], z, rtol=CLOSE)


@pytest.mark.parametrize("short", ["1e-3", "1e-6", "1e-9", "1e-12"])
def test_susceptance_keeps_its_digits_where_the_current_is_nearly_all_loss(short):
    # against the same root in 40 digits, of the floats as they are
    i_0 = 0.013
    g = i_0 * (1 - float(short))
    exact = (Decimal(i_0) ** 2 - Decimal(g) ** 2).sqrt()
    found = open_circuit.shunt_susceptance(i_0, g)
    assert found == pytest.approx(-float(exact), rel=1e-15, abs=0)


def test_rated_current_of_the_sheet_units():
    # 1 MVA at 11 kV: 52.4864 A a line of three phases, 90.9091 A of one winding (hand)
    assert open_circuit.rated_current(1e6, 11e3, 3) == pytest.approx(52.4864, abs=5e-5)
    assert open_circuit.rated_current(1e6, 11e3, 1) == pytest.approx(90.9091, abs=5e-5)
