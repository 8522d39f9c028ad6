"""Short-circuit readings -> z_sc at the test's own temperature, against the forward model."""

from decimal import Decimal, getcontext

import numpy as np
import pytest
from hypothesis import given, settings
from strategies import bays, reduced, stations

from convert.reduction import short_circuit

CLOSE = 1e-9
getcontext().prec = 40


def known(tests):
    """z_sc of each unit at its test's temperature, on its own base."""
    return np.array([test.unit.z(test.temperature) / test.unit.ohm_base for test in tests])


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations())
def test_readings_of_either_side_at_any_amps_give_the_known_impedance(tests):
    np.testing.assert_allclose(reduced(tests)["z_sc_tested"], known(tests), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations(angles=(0.995, 0.999999)))
def test_near_a_power_factor_of_one_resistance_and_magnitude_hold(tests):
    # x is the small root of z² - r²: half the digits of z are lost on the way to it
    found, wanted = reduced(tests)["z_sc_tested"], known(tests)
    np.testing.assert_allclose(found.real, wanted.real, rtol=CLOSE)
    np.testing.assert_allclose(np.abs(found), np.abs(wanted), rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations())
def test_loss_and_volts_at_rated_amps_are_those_of_a_test_at_rated_amps(tests):
    rated = [test.at(sc_amps=0.0).short_circuit() for test in tests]
    found = reduced(tests)
    np.testing.assert_allclose(found["pk_tested"], [watts for _, _, watts in rated], rtol=CLOSE)
    np.testing.assert_allclose(found["uk_volts"], [volts for volts, _, _ in rated], rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(bays())
def test_scaled_readings_leave_the_impedance_alone(test):
    tests = [test.at(name=f"T{n}", sc_amps=test.sc_amps * n) for n in (1, 0.5, 0.01)]
    found = reduced(tests)["z_sc_tested"]
    np.testing.assert_allclose(found, found[0], rtol=1e-12)


@pytest.mark.parametrize("short", ["1e-3", "1e-6", "1e-9", "1e-12"])
def test_reactance_keeps_its_digits_where_the_impedance_is_nearly_all_resistance(short):
    # against the same root in 40 digits, of the floats as they are
    z = 0.021
    r = z * (1 - float(short))
    exact = (Decimal(z) ** 2 - Decimal(r) ** 2).sqrt()
    assert short_circuit.series_reactance(z, r) == pytest.approx(float(exact), rel=1e-15, abs=0)
