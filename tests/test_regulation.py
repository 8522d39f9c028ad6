"""Hand formulas for drop, regulation, loss and efficiency, against the network of the same legs.

The network is solved by modified nodal analysis. A load of given amps is found by moving a burden's
admittance until it draws them.
"""

import numpy as np
import pytest
from forward import (
    OPEN,
    SHORT,
    Circuit,
    drop_at_rated_amps,
    feed,
    random_circuits,
    rise_at_rated_load_volts,
    seen,
    volts,
)

from convert import regulation

CLOSE = 1e-12
LOADS = [0.1, 0.5, 1.0, 1.4]
ANGLES = np.radians([-80, -40, -26, 0, 26, 37, 60, 85])


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("k", LOADS)
def test_phasor_regulation_is_the_networks(k, angle):
    t = random_circuits(1, 200)
    a = 1 / feed(t, "hv", volts(1.0), OPEN).volts["lv"]
    b = 1 / -feed(t, "hv", volts(1.0), SHORT).amps["lv"]
    found = regulation.regulation_phasor(a, b, k, np.cos(angle), np.sin(angle))
    wanted = rise_at_rated_load_volts(t, k, angle)
    np.testing.assert_allclose(found, wanted, rtol=0, atol=CLOSE)


def test_thevenin_impedance_is_what_the_load_sees():
    t = random_circuits(2, 200)
    a = 1 / feed(t, "hv", volts(1.0), OPEN).volts["lv"]
    b = 1 / -feed(t, "hv", volts(1.0), SHORT).amps["lv"]
    np.testing.assert_allclose(regulation.thevenin(a, b), seen(t, "lv", SHORT), rtol=CLOSE)


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("k", LOADS)
def test_ieee_regulation_is_exact_without_shunt(k, angle):
    z = random_circuits(3, 200).z
    t = Circuit(z / 2, z / 2, 0.0)
    found = regulation.regulation_ieee(z.real, z.imag, k, np.cos(angle), np.sin(angle))
    wanted = rise_at_rated_load_volts(t, k, angle)
    np.testing.assert_allclose(found, wanted, rtol=0, atol=CLOSE)


@pytest.mark.parametrize("angle", ANGLES)
@pytest.mark.parametrize("k", LOADS)
def test_iec_drop_without_shunt_is_off_by_its_neglected_fourth_power(k, angle):
    # k a + (k q)²/2 in place of k a + 1 - sqrt(1 - (k q)²): (k q)⁴/8 and higher powers of it
    z = random_circuits(4, 200).z
    t = Circuit(z / 2, z / 2, 0.0)
    found = regulation.drop_iec(z.real, z.imag, k, np.cos(angle), np.sin(angle))
    wanted = drop_at_rated_amps(t, k, angle)
    q = k * (z.imag * np.cos(angle) - z.real * np.sin(angle))
    assert np.all(wanted - found >= q**4 / 8 - CLOSE)
    assert np.all(wanted - found <= q**4 / 8 * (1 + q**2) + CLOSE)


def test_the_three_methods_differ_as_the_forms_say():
    # r 0.4266 %, z 7.94 %, cosφ 0.8: quadratic drop 5.2836, rise over the loaded volts 5.2745 %
    r = 0.004266
    x = np.sqrt(0.0794**2 - r**2)
    assert 100 * regulation.drop_iec(r, x, 1, 0.8, 0.6) == pytest.approx(5.2836, abs=5e-5)
    assert 100 * regulation.regulation_ieee(r, x, 1, 0.8, 0.6) == pytest.approx(5.2745, abs=5e-5)


def test_leading_load_raises_the_volts():
    r, x = 0.005, 0.08
    assert regulation.drop_iec(r, x, 1, 0.8, -0.6) < 0
    assert regulation.regulation_ieee(r, x, 1, 0.8, -0.6) < 0


def test_nothing_drops_without_load():
    assert regulation.drop_iec(0.01, 0.1, 0, 0.8, 0.6) == 0
    assert regulation.regulation_ieee(0.01, 0.1, 0, 0.8, 0.6) == pytest.approx(0, abs=4e-16)


def points(z, z_t, a, k, angle):
    c, s = np.cos(angle), np.sin(angle)
    q = np.maximum(
        np.abs(regulation.cross_component(z, c, s)), np.abs(regulation.cross_component(z_t, c, s))
    )
    return regulation.bound_iec(z, z_t, a, q, k, k * np.maximum(1, np.abs(a)))


@pytest.mark.parametrize("fed", ["hv", "lv"])
def test_both_bounds_hold_and_are_used_on_a_grid_of_loads(fed):
    # unequal legs, so that the test's z is not what the load sees
    t = random_circuits(5, 300)
    z, z_t = seen(t, fed, SHORT), seen(t, "lv", SHORT)
    a = 1 / feed(t, "hv", volts(1.0), OPEN).volts["lv"]
    used = {"ieee": 0.0, "iec": 0.0}
    for k in LOADS:
        for angle in ANGLES:
            c, s = np.cos(angle), np.sin(angle)
            ieee = regulation.regulation_ieee(z.real, z.imag, k, c, s)
            iec = regulation.drop_iec(z.real, z.imag, k, c, s)
            off = np.abs(ieee - rise_at_rated_load_volts(t, k, angle))
            used["ieee"] = max(used["ieee"], np.max(off / regulation.bound_ieee(z, z_t, k)))
            off = np.abs(iec - drop_at_rated_amps(t, k, angle))
            used["iec"] = max(used["iec"], np.max(off / points(z, z_t, a, k, angle)))
    assert 0.5 < used["iec"] < 1
    # a test fed from LV reads the very impedance that the load sees: nothing but rounding is left
    assert used["ieee"] < 1e-4 if fed == "lv" else 0.5 < used["ieee"] < 1


def test_loss_and_efficiency():
    # 100 kVA, 320 W and 1.75 kW (invented): at half load 320 + 437.5 W of 40 kW out (hand)
    lost = regulation.loss(320.0, 1750.0, 0.5)
    assert lost == pytest.approx(757.5)
    assert regulation.efficiency(100e3, lost, 0.5, 0.8) == pytest.approx(
        40e3 / 40757.5, rel=1e-15, abs=0
    )


def test_efficiency_is_best_where_load_loss_equals_no_load_loss():
    p_0, p_k = 320.0, 1750.0
    k = np.linspace(0.05, 1.2, 2001)
    best = k[np.argmax(regulation.efficiency(100e3, regulation.loss(p_0, p_k, k), k, 0.9))]
    assert best == pytest.approx(np.sqrt(p_0 / p_k), abs=1e-3)
