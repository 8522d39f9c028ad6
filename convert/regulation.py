"""Hand formulas for voltage drop, regulation, loss and efficiency.

r, x: the certificate's own impedance [pu, own base]; k: load fraction (1 = rated current);
c = cosφ; s = sinφ, positive when the load lags.
"""

from __future__ import annotations

from typing import Any

from numpy import abs, hypot, sqrt  # noqa: A004 - a formula's abs is numpy's

from .standards import source


@source("IEC 60076-8:1997", "voltage drop, quadratic form", "from memory")
def drop_iec(r: Any, x: Any, k: Any, c: Any, s: Any) -> Any:
    """Drop from no load to load over the no-load volts [pu], rated volts on the fed side."""
    a = r * c + x * s
    q = x * c - r * s
    return k * a + (k * q) ** 2 / 2


@source("IEEE C57.12.90", "regulation, exact form", "from memory")
def regulation_ieee(r: Any, x: Any, k: Any, c: Any, s: Any) -> Any:
    """Rise from load to no load over the load volts [pu], rated volts at the load."""
    return hypot(k * r + c, k * x + s) - 1


@source("two-port theory", "V1 = A V2 + B I2, V2 = 1", "derived here")
def regulation_phasor(a: Any, b: Any, k: Any, c: Any, s: Any) -> Any:
    """Rise from load to no load over the load volts [pu] by the circuit's own A and B."""
    return abs(1 + b / a * k * (c - 1j * s)) - 1


@source("two-port theory", "z_t = B/A", "derived here")
def thevenin(a: Any, b: Any) -> Any:
    """Impedance seen from the load, fed side held [pu]."""
    return b / a


@source("bound of regulation_ieee against the circuit", "|z - z_t| k", "derived here")
def bound_ieee(z: Any, z_t: Any, k: Any) -> Any:
    """Largest difference that the certificate's z in place of the circuit's can make [pu]."""
    return k * abs(z - z_t) + 1e-9


@source("half-chord of the circuit's own impedance", "q = x c - r s", "derived here")
def cross_component(z: Any, c: Any, s: Any) -> Any:
    """Component of the drop at right angles to the load volts, at rated current [pu]."""
    return z.imag * c - z.real * s


@source(
    "bound of drop_iec against the circuit",
    "impedance, no-load ratio, quadratic form",
    "derived here",
)
def bound_iec(z: Any, z_t: Any, a: Any, q: Any, k: Any, k_max: Any) -> Any:
    """Largest difference between the quadratic form and the circuit [pu].

    `q` is the larger cross component of z and z_t, `k_max` = k max(1, |A|).
    """
    moved = 1.001 * (k * abs(z) * abs(abs(a) - 1) + k_max * abs(z - z_t))
    form = abs(1 - sqrt(1 - (k * q) ** 2) - (k * q) ** 2 / 2)
    return moved / sqrt(1 - (k_max * q) ** 2) + form + 1e-9


@source("IEC 60076-1:2011", "P = P0 + k² Pk", "from memory")
def loss(p_0: Any, p_k: Any, k: Any) -> Any:
    """Loss at load fraction `k` [W] from P0 and Pk [W]."""
    return p_0 + k**2 * p_k


@source("definition", "η = k S c/(k S c + P)", "derived here")
def efficiency(s_r: Any, p: Any, k: Any, c: Any) -> Any:
    """Efficiency [1] from rated power [VA], loss `p` [W], load fraction and cosφ."""
    return k * s_r * c / (k * s_r * c + p)
