"""The two tests -> one circuit: the exact T, its six elements from either side, simpler circuits.

All in per unit on the unit's own base (rated power, rated volts of each side) unless said.
The T: leg `z_from`, shunt `y_m` at the inner node, leg `z_to`.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy import abs, sqrt  # noqa: A004 - a formula's abs is numpy's

from .standards import source

#: fixed-point rounds of the T with unequal legs; the error falls by |z·y|, under 1e-2, each round
ROUNDS = 12


@source("two-port theory", "symmetric T of given z_sc and y_oc", "derived here")
def exact_t_leg(z_sc: Any, y_oc: Any) -> Any:
    """One leg of the symmetric T that gives both test readings.

    From z_oc = z + z_m and z_sc = z + z z_m/(z + z_m). Written with `y_oc`, so that it holds for
    a unit without shunt (y_oc = 0).

    Parameters
    ----------
    z_sc, y_oc : complex or (n,) array
        Seen at the terminals with the far side shorted, and with it open.
    """
    return z_sc / (1 + sqrt(1 - z_sc * y_oc))


@source("definition", "z = two equal legs", "derived here")
def exact_t_series(z_leg: Any) -> Any:
    """Total series impedance of the symmetric T."""
    return 2 * z_leg


@source("two-port theory", "1/(1/y_oc - z_leg)", "derived here")
def exact_t_shunt(y_oc: Any, z_leg: Any) -> Any:
    """Shunt admittance at the T's inner node, `z_leg` being the energised side's leg."""
    return y_oc / (1 - z_leg * y_oc)


@source("definition", "a leg is its share of r and of x", "derived here")
def leg(z: Any, r_share: Any, x_share: Any) -> Any:
    """Leg of one side from the total series impedance and that side's shares."""
    return z * (r_share + x_share) / 2 + (z.real - 1j * z.imag) * (r_share - x_share) / 2


@source("two-port theory", "seen from leg a with leg b open", "derived here")
def open_circuit_admittance(z_a: Any, y_m: Any) -> Any:
    """Admittance seen from leg `z_a` of a T, far side open."""
    return y_m / (1 + z_a * y_m)


@source("two-port theory", "seen from leg a with leg b shorted", "derived here")
def short_circuit_impedance(z_a: Any, z_b: Any, y_m: Any) -> Any:
    """Impedance seen from leg `z_a` of a T, far side shorted."""
    return z_a + z_b / (1 + z_b * y_m)


def exact_t_unequal(
    z_sc: Any, y_oc: Any, r_share: Any, x_share: Any, oc_from: Any, sc_from: Any
) -> Any:
    """Total series impedance of the T with given leakage shares; solved by fixed point.

    The defining relations are `short_circuit_impedance` and `open_circuit_admittance`.

    Parameters
    ----------
    z_sc, y_oc : (n,) complex
        Test results [pu, own base].
    r_share, x_share : (n,) float
        Share of the from side, between 0 and 1.
    oc_from, sc_from : (n,) bool
        Whether the test was made from the from side.

    Returns
    -------
    (n,) complex
    """
    z = np.asarray(z_sc, dtype=complex)
    r_oc = np.where(oc_from, r_share, 1 - r_share)
    x_oc = np.where(oc_from, x_share, 1 - x_share)
    for _ in range(ROUNDS):
        z_s = leg(z, r_oc, x_oc)
        y_m = exact_t_shunt(y_oc, z_s)
        rest = z_sc - z_s
        same = z_s + rest / (1 - rest * y_m)
        z = np.where(np.equal(oc_from, sc_from), same, z_sc + z_s**2 * y_oc)
    return z


@source("two-port theory", "V1 = A V2 + B I2 of a T", "derived here")
def chain_a(z_from: Any, y_m: Any) -> Any:
    """No-load ratio V1/V2 of the T [pu]: its A."""
    return 1 + z_from * y_m


@source("two-port theory", "V1 = A V2 + B I2 of a T", "derived here")
def chain_b(z_from: Any, z_to: Any, y_m: Any) -> Any:
    """Transfer impedance of the T [pu]: its B."""
    return z_from + z_to + z_from * z_to * y_m


@source("definition", "z_base = U²/S", "derived here")
def base_impedance(u: Any, s: Any) -> Any:
    """Ohms of one per unit, per phase of the equivalent star, from volts [V] and power [VA]."""
    return u**2 / s


@source("definition", "ohm = per unit times base", "derived here")
def ohms(z: Any, z_base: Any) -> Any:
    """Ohms seen from the side whose base impedance is `z_base` [ohm]."""
    return z * z_base


@source("definition", "parallel resistance of the shunt, 1/g", "derived here")
def core_resistance(y_m: Any, z_base: Any) -> Any:
    """Rc [ohm per phase of the equivalent star]."""
    return z_base / y_m.real


@source("definition", "parallel reactance of the shunt, 1/|b|", "derived here")
def magnetising_reactance(y_m: Any, z_base: Any) -> Any:
    """Xm [ohm per phase of the equivalent star]."""
    return z_base / abs(y_m.imag)


@source("two-port theory", "I1 = C V2 + D I2 of a T", "derived here")
def chain_d(z_to: Any, y_m: Any) -> Any:
    """Current ratio I1/I2 of the T with its far side shorted [pu]: its D (its C is `y_m`)."""
    return 1 + z_to * y_m


@source("two-port theory", "|V1| for V2 = 1 and a load current", "derived here")
def from_volts(a: Any, b: Any, load: Any) -> Any:
    """From-side volts [pu] that give 1 pu at the load, which draws the current `load` [pu]."""
    return abs(a + b * load)


@source("two-port theory", "P1 - P2 for V2 = 1 and a load current", "derived here")
def loss(a: Any, b: Any, c: Any, d: Any, load: Any) -> Any:
    """Loss [pu] of a two-port with 1 pu at the load, which draws the current `load` [pu]."""
    v = a + b * load
    i = c + d * load
    return v.real * i.real + v.imag * i.imag - load.real


@source("definition", "simple/exact - 1", "derived here")
def error(simple: Any, exact: Any) -> Any:
    """Relative error of a simpler circuit's value."""
    return simple / exact - 1


@source("two-port theory", "no-load volts of the far side", "derived here")
def open_volts(u: Any, u_fed: Any, u_open: Any, z_fed: Any, y_m: Any) -> Any:
    """Volts of the open side [V] when volts `u` feed the side whose leg is `z_fed`.

    `u_fed`, `u_open`: rated volts of the two sides.
    """
    return u * (u_open / u_fed) / abs(1 + z_fed * y_m)


@source("Ohm's law", "U = |z| I on the fed side's base", "derived here")
def test_volts(z: Any, i: Any, i_r: Any, u_r: Any) -> Any:
    """Volts [V] that drive amps `i` through the impedance `z` [pu], far side shorted."""
    return abs(z) * (i / i_r) * u_r


@source("Joule's law", "P = r I² on the unit's base", "derived here")
def test_watts(z: Any, i: Any, i_r: Any, s: Any) -> Any:
    """Watts [W] that amps `i` lose in the impedance `z` [pu], far side shorted."""
    return z.real * (i / i_r) ** 2 * s


@source("Ohm's law", "I = |y| U on the fed side's base", "derived here")
def test_amps(y: Any, u: Any, u_r: Any, i_r: Any) -> Any:
    """Amps [A] that volts `u` drive through the admittance `y` [pu], far side open."""
    return abs(y) * (u / u_r) * i_r


@source("Joule's law", "P = g U² on the unit's base", "derived here")
def no_load_watts(y: Any, u: Any, u_r: Any, s: Any) -> Any:
    """Watts [W] that volts `u` lose in the admittance `y` [pu], far side open."""
    return y.real * (u / u_r) ** 2 * s
