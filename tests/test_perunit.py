"""Branches on the system base, turned back into volts and amps, against the units in ohm."""

import numpy as np
import pytest
from forward import OPEN, SHORT, Circuit, Test, feed, seen, volts
from hypothesis import given, settings
from strategies import bays, log_uniform, reduced, units

from convert import perunit

CLOSE = 1e-9


def branch(table, test, base):
    """The branch of a one-row table as a T in ohm seen from HV, and its turns ratio.

    By the contract: an ideal transformer `ratio` at the from terminals, the rest on its to side in
    per unit of the base power and the to busbar's nominal volts across the terminals used.
    """
    nominal = {}
    for name in ("hv", "lv"):
        side = test.unit.side(name)
        phase = test.unit.phases == 3 or side.across == "line and neutral"
        nominal[name] = side.nominal / np.sqrt(3) if phase else side.nominal
    power = base / 3  # of one phase, and of a single-phase unit
    ohm_to = nominal["lv"] ** 2 / power
    turns = table["ratio"][0] * nominal["hv"] / nominal["lv"]
    z = table["z_system"][0] * ohm_to * turns**2
    r, x = table["r_share_from"][0], table["x_share_from"][0]
    leg = z.real * r + 1j * z.imag * x
    return Circuit(leg, z - leg, table["y_system"][0] / ohm_to / turns**2, turns)


@settings(derandomize=True, deadline=None, max_examples=20)
@given(bays(), log_uniform(1e5, 1e9))
def test_a_branch_on_any_base_is_the_unit_in_volts_and_amps(test, base):
    found = branch(reduced([test], study=75.0, base=base), test, base)
    known = test.circuit(75.0)
    for side in ("hv", "lv"):
        for far in (OPEN, SHORT):
            wanted, got = (feed(t, side, volts(100.0), far) for t in (known, found))
            for terminal in ("hv", "lv"):
                np.testing.assert_allclose(
                    got.volts[terminal], wanted.volts[terminal], rtol=CLOSE, atol=1e-12
                )
                np.testing.assert_allclose(
                    got.amps[terminal], wanted.amps[terminal], rtol=CLOSE, atol=1e-15
                )


@settings(derandomize=True, deadline=None, max_examples=10)
@given(bays(), log_uniform(0.01, 100.0))
def test_base_power_scales_series_and_shunt_and_leaves_the_ratio(test, factor):
    one, other = (reduced([test], base=power)
                  for power in (100e6, 100e6 * factor))  # fmt: skip
    np.testing.assert_allclose(other["z_system"], one["z_system"] * factor, rtol=1e-14)
    np.testing.assert_allclose(other["y_system"], one["y_system"] / factor, rtol=1e-14)
    np.testing.assert_array_equal(other["ratio"], one["ratio"])


@settings(derandomize=True, deadline=None, max_examples=10)
@given(units(phases=3))
def test_shift_is_thirty_degrees_an_hour(unit):
    assert reduced([Test(unit)])["shift_deg"] == 30 * unit.clock


numbers = log_uniform(1e-3, 1e3)


@settings(derandomize=True, deadline=None, max_examples=100)
@given(numbers, numbers, numbers, numbers, numbers)
def test_there_and_back(value, s, s_new, u, u_new):
    for carry in (perunit.series_to_base, perunit.shunt_to_base):
        there = carry(value, s, s_new, u, u_new)
        assert carry(there, s_new, s, u_new, u) == pytest.approx(value, rel=4e-15, abs=0)
    there = perunit.ratio_to_base(value, s, s_new, u, u_new)
    assert perunit.ratio_to_base(there, s_new, s, u_new, u) == pytest.approx(
        value, rel=4e-15, abs=0
    )


@settings(derandomize=True, deadline=None, max_examples=100)
@given(numbers, numbers, numbers, numbers, numbers, numbers)
def test_a_ratio_carried_is_the_ratio_made_there(u_1, u_2, old_1, old_2, new_1, new_2):
    there = perunit.ratio_to_base(
        perunit.off_nominal_ratio(u_1, u_2, old_1, old_2), old_1, new_1, old_2, new_2
    )
    made = perunit.off_nominal_ratio(u_1, u_2, new_1, new_2)
    assert there == pytest.approx(made, rel=4e-15, abs=0)


@settings(derandomize=True, deadline=None, max_examples=50)
@given(units(), numbers, numbers)
def test_series_and_shunt_of_one_unit_keep_their_product(unit, s_new, u_new):
    # z y has no unit, and so no base
    z, y = unit.z(20.0) / unit.ohm_base, unit.y * unit.ohm_base
    carried = (unit.power, s_new, unit.lv.volts, u_new)
    product = perunit.series_to_base(z, *carried) * perunit.shunt_to_base(y, *carried)
    np.testing.assert_allclose(product, z * y, rtol=4e-15)


def test_off_nominal_ratio_of_a_rated_pair_of_busbars_is_one():
    assert perunit.off_nominal_ratio(66e3, 11e3, 66e3, 11e3) == 1
    # 66/11.55 kV between 66 and 11 kV busbars: the LV is 5 % high, the ratio 1/1.05 (hand)
    assert perunit.off_nominal_ratio(66e3, 11.55e3, 66e3, 11e3) == pytest.approx(1 / 1.05)


@settings(derandomize=True, deadline=None, max_examples=20)
@given(units(phases=1))
def test_a_single_phase_branch_lies_between_the_terminals_used(unit):
    test = Test(unit)
    t = branch(reduced([test]), test, 100e6)
    wanted = seen(test.circuit(75.0), "hv", SHORT)
    np.testing.assert_allclose(seen(t, "hv", SHORT), wanted, rtol=CLOSE)
