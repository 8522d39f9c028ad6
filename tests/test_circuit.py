"""The exact T and its formulas, against modified nodal analysis of the same legs and shunt."""

import forward
import numpy as np
import pytest
from forward import OPEN, SHORT, Circuit, amps, circuit_of, feed, seen, solve, volts
from hypothesis import given, settings
from strategies import stations, units

from convert import circuit

CLOSE = 1e-12
N = 400
SIDES = ["hv", "lv"]


def per_unit_units(seed):
    """z_sc, y_oc, and HV's shares of r and x of N invented units, up to 25 % and 8 %."""
    random = np.random.default_rng(seed)
    z = np.exp(random.uniform(np.log(0.01), np.log(0.25), N))
    y = np.exp(random.uniform(np.log(5e-4), np.log(0.08), N))
    z = z * np.exp(1j * random.uniform(0.05, np.pi / 2, N))
    y = y * np.exp(-1j * random.uniform(0.05, np.pi / 2, N))
    return z, y, *random.uniform(0.01, 0.99, (2, N))


def admittance(t, side):
    """Admittance seen from one side, the other open: one volt drives it."""
    return feed(t, side, volts(1.0), OPEN).amps[side]


@pytest.mark.parametrize("energised", SIDES)
@pytest.mark.parametrize("fed", SIDES)
def test_the_symmetric_t_shows_both_tests_from_either_side(fed, energised):
    z, y, *_ = per_unit_units(1)
    leg = circuit.exact_t_leg(z, y)
    t = Circuit(leg, circuit.exact_t_series(leg) - leg, circuit.exact_t_shunt(y, leg))
    np.testing.assert_allclose(seen(t, fed, SHORT), z, rtol=CLOSE)
    np.testing.assert_allclose(admittance(t, energised), y, rtol=CLOSE)


def unequal(z, y, r_share, x_share, fed, energised):
    """The T that the program solves for, as legs and shunt."""
    total = circuit.exact_t_unequal(
        z, y, r_share, x_share, np.full(N, energised == "hv"), np.full(N, fed == "hv")
    )
    legs = {
        "hv": circuit.leg(total, r_share, x_share),
        "lv": circuit.leg(total, 1 - r_share, 1 - x_share),
    }
    return Circuit(legs["hv"], legs["lv"], circuit.exact_t_shunt(y, legs[energised]))


@pytest.mark.parametrize("energised", SIDES)
@pytest.mark.parametrize("fed", SIDES)
def test_the_unequal_t_shows_both_tests_where_they_were_made(fed, energised):
    z, y, r_share, x_share = per_unit_units(2)
    t = unequal(z, y, r_share, x_share, fed, energised)
    np.testing.assert_allclose(t.z_hv.real / t.z.real, r_share, rtol=CLOSE)
    np.testing.assert_allclose(t.z_hv.imag / t.z.imag, x_share, rtol=CLOSE)
    np.testing.assert_allclose(seen(t, fed, SHORT), z, rtol=CLOSE)
    np.testing.assert_allclose(admittance(t, energised), y, rtol=CLOSE)


@pytest.mark.parametrize("energised", SIDES)
@pytest.mark.parametrize("fed", SIDES)
def test_the_unequal_t_is_the_one_that_the_forward_model_finds(fed, energised):
    z, y, r_share, x_share = per_unit_units(3)
    wanted = circuit_of(z, y, fed, energised, r_share, x_share)
    found = unequal(z, y, r_share, x_share, fed, energised)
    for name in ("z_hv", "z_lv", "y"):
        np.testing.assert_allclose(getattr(found, name), getattr(wanted, name), rtol=CLOSE)


@pytest.mark.parametrize("share", [0.0, 0.5, 1.0])
@pytest.mark.parametrize("energised", SIDES)
@pytest.mark.parametrize("fed", SIDES)
def test_at_the_ends_of_the_range_of_shares(fed, energised, share):
    z, y, *_ = per_unit_units(4)
    shares = np.full(N, share)
    t = unequal(z, y, shares, shares, fed, energised)
    np.testing.assert_allclose(seen(t, fed, SHORT), z, rtol=CLOSE)
    np.testing.assert_allclose(admittance(t, energised), y, rtol=CLOSE)


def test_equal_shares_solved_are_the_symmetric_t():
    z, y, *_ = per_unit_units(5)
    half = np.full(N, 0.5)
    for fed in SIDES:
        for energised in SIDES:
            solved = unequal(z, y, half, half, fed, energised)
            np.testing.assert_allclose(solved.z, 2 * circuit.exact_t_leg(z, y), rtol=CLOSE)


@pytest.mark.parametrize("energised", SIDES)
@pytest.mark.parametrize("fed", SIDES)
def test_without_shunt_the_series_impedance_is_the_test_itself(fed, energised):
    z, _, r_share, x_share = per_unit_units(6)
    t = unequal(z, np.zeros(N, dtype=complex), r_share, x_share, fed, energised)
    np.testing.assert_array_equal(t.y, 0)
    np.testing.assert_allclose(t.z, z, rtol=4e-16)
    np.testing.assert_allclose(2 * circuit.exact_t_leg(z, 0.0), z, rtol=4e-16)


def test_plate_values_typed_straight_in_do_not_show_the_tests():
    # the claim that the exact T is needed at all: by about half of |z y|
    z, y = 0.012 + 0.058j, 0.002 - 0.009j
    naive = Circuit(z / 2, z / 2, y)
    off = abs(seen(naive, "hv", SHORT) / z - 1)
    assert 0.2 * abs(z * y) < off < 0.5 * abs(z * y)
    assert abs(admittance(naive, "lv") / y - 1) > 0.4 * abs(z * y)


def test_chain_constants_are_those_of_the_network():
    z, y, r_share, x_share = per_unit_units(7)
    t = unequal(z, y, r_share, x_share, "hv", "lv")
    a, b = circuit.chain_a(t.z_hv, t.y), circuit.chain_b(t.z_hv, t.z_lv, t.y)
    c, d = t.y, circuit.chain_d(t.z_lv, t.y)
    empty, short = feed(t, "hv", volts(1.0), OPEN), feed(t, "hv", volts(1.0), SHORT)
    np.testing.assert_allclose(a, 1 / empty.volts["lv"], rtol=CLOSE)
    np.testing.assert_allclose(c, empty.amps["hv"] / empty.volts["lv"], rtol=CLOSE)
    np.testing.assert_allclose(b, 1 / -short.amps["lv"], rtol=CLOSE)
    np.testing.assert_allclose(d, short.amps["hv"] / -short.amps["lv"], rtol=CLOSE)
    np.testing.assert_allclose(a * d - b * c, 1, rtol=CLOSE)  # a T is reciprocal


def test_what_a_t_shows_by_formula_is_what_the_network_shows():
    _, y, r_share, x_share = per_unit_units(8)
    z, *_ = per_unit_units(9)
    t = Circuit(z.real * r_share + 1j * z.imag * x_share, z * 0.4, y)
    found = circuit.open_circuit_admittance(t.z_hv, t.y)
    np.testing.assert_allclose(found, admittance(t, "hv"), rtol=CLOSE)
    found = circuit.short_circuit_impedance(t.z_lv, t.z_hv, t.y)
    np.testing.assert_allclose(found, seen(t, "lv", SHORT), rtol=CLOSE)


def test_volts_and_loss_under_load_are_those_of_the_network():
    z, y, r_share, x_share = per_unit_units(10)
    t = unequal(z, y, r_share, x_share, "lv", "lv")
    load = 0.7 - 0.4j
    state = feed(t, "hv", volts(1.0), forward.burden(load))
    at_load = np.abs(state.volts["lv"])  # linear: scaled so that the load has one per unit
    a, b = circuit.chain_a(t.z_hv, t.y), circuit.chain_b(t.z_hv, t.z_lv, t.y)
    np.testing.assert_allclose(circuit.from_volts(a, b, load), 1 / at_load, rtol=CLOSE)
    lost = (state.power("hv") + state.power("lv")).real / at_load**2
    found = circuit.loss(a, b, t.y, circuit.chain_d(t.z_lv, t.y), load)
    # a difference of powers near one: compared on those
    np.testing.assert_allclose(found, lost, rtol=0, atol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations(most=3))
def test_readings_by_formula_are_those_of_the_test_bay(tests):
    for test in tests:
        unit, known = test.unit, test.per_unit(test.temperature)
        u, i, p = test.short_circuit()
        rated = {"i_r": unit.rated_amps(test.fed), "i": i}
        z = unit.z(test.temperature) / unit.ohm_base
        u_r = unit.side(test.fed).volts
        assert circuit.test_volts(z, u_r=u_r, **rated) == pytest.approx(u, rel=CLOSE, abs=0)
        assert circuit.test_watts(z, s=unit.power, **rated) == pytest.approx(p, rel=1e-9, abs=0)
        u, i, p = test.open_circuit()
        u_r, y = unit.side(test.energised).volts, unit.y * unit.ohm_base
        drive = circuit.test_amps(y, u, u_r, unit.rated_amps(test.energised))
        assert drive == pytest.approx(i, rel=CLOSE, abs=0)
        assert circuit.no_load_watts(y, u, u_r, unit.power) == pytest.approx(p, rel=CLOSE, abs=0)
        far = forward.OTHER[test.energised]
        state = feed(test.circuit(test.temperature), test.energised, volts(u / unit.line), OPEN)
        leg = known.z_hv if test.energised == "hv" else known.z_lv
        found = circuit.open_volts(u, u_r, unit.side(far).volts, leg, known.y)
        assert found == pytest.approx(abs(state.volts[far]) * unit.line, rel=CLOSE, abs=0)


@settings(derandomize=True, deadline=None, max_examples=30)
@given(units())
def test_ohms_refer_to_hv_and_back(unit):
    bases = [circuit.base_impedance(unit.side(side).volts, unit.power) for side in SIDES]
    z = unit.z(75.0) / unit.ohm_base
    from_hv, from_lv = (circuit.ohms(z, base) for base in bases)
    np.testing.assert_allclose(from_hv, unit.z(75.0), rtol=CLOSE)
    np.testing.assert_allclose(from_hv, from_lv * unit.ratio**2, rtol=CLOSE)
    np.testing.assert_allclose(from_lv / bases[1], from_hv / bases[0], rtol=4e-16)


@settings(derandomize=True, deadline=None, max_examples=30)
@given(units())
def test_core_resistance_and_reactance_take_the_power_of_the_shunt(unit):
    # the two in parallel across the phase volts of the inner node
    base = circuit.base_impedance(unit.hv.volts, unit.power)
    y = unit.y * unit.ohm_base
    u = unit.phase_volts("hv")
    loss = u**2 / circuit.core_resistance(y, base)
    lag = u**2 / circuit.magnetising_reactance(y, base)
    state = solve(Circuit(0.0, 1.0, unit.y, unit.ratio), volts(u), OPEN)
    np.testing.assert_allclose(loss + 1j * lag, state.power("hv"), rtol=CLOSE)


def test_legs_make_up_the_series_impedance():
    z, _, r_share, x_share = per_unit_units(11)
    hv, lv = circuit.leg(z, r_share, x_share), circuit.leg(z, 1 - r_share, 1 - x_share)
    np.testing.assert_allclose(hv + lv, z, rtol=1e-15)
    np.testing.assert_allclose(hv, r_share * z.real + 1j * x_share * z.imag, rtol=1e-14)


def test_error_of_a_simpler_value():
    assert circuit.error(99.0, 100.0) == pytest.approx(-0.01)


def test_the_model_of_these_tests_keeps_the_digits_of_a_small_shunt():
    # no claim on the program: the oracle itself, where the shunt is 1e-7 of a leg's admittance
    t = Circuit(1e-3 + 1e-2j, 1e-3 + 1e-2j, 3e-6 - 1e-5j, 7.3)
    drive = solve(t, volts(1.0), OPEN).amps["hv"]
    assert drive == pytest.approx(t.y * (1 - t.z_hv * t.y), rel=1e-12, abs=0)
    back = solve(t, amps(drive), OPEN)
    assert back.volts["hv"] == pytest.approx(1.0, rel=1e-14, abs=0)
    assert back.volts["lv"] * t.ratio == pytest.approx(1 - t.z_hv * drive, rel=1e-14, abs=0)
