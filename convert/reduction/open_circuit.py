"""Open-circuit test: volts, amps and watts of the energised side -> y_oc on the unit's own base."""

from __future__ import annotations

from typing import Any

from numpy import sqrt

from ..standards import source


@source("IEC 60076-1:2011", "rated current", "from memory")
def rated_current(s: Any, u: Any, phases: Any) -> Any:
    """Rated current of one side.

    Parameters
    ----------
    s : float or (n,) array
        Rated power [VA].
    u : float or (n,) array
        Rated volts of the side [V]: line to line (three-phase) or across the winding.
    phases : float or (n,) array
        3 or 1.

    Returns
    -------
    float or (n,) array
        Line current, or the winding's for a single-phase unit [A].
    """
    return s / (sqrt(phases) * u)


@source("power in an alternating-current circuit", "P = sqrt(m) U I cosφ", "from memory")
def power_factor(p: Any, u: Any, i: Any, phases: Any) -> Any:
    """Power factor of a test reading [1] from watts [W], volts [V] and amps [A]."""
    return p / (sqrt(phases) * u * i)


@source("IEC 60076-1:2011", "11.5 (linear branch: P ~ U²)", "from memory")
def no_load_loss_at_rated_volts(p: Any, u: Any, u_r: Any) -> Any:
    """No-load loss at rated volts [W] from watts `p` read at volts `u` on a side rated `u_r`."""
    return p * (u_r / u) ** 2


@source("IEC 60076-1:2011", "11.5 (linear branch: I ~ U)", "from memory")
def no_load_current_at_rated_volts(i: Any, u: Any, u_r: Any) -> Any:
    """No-load current at rated volts [A] from amps `i` read at volts `u` on a side rated `u_r`."""
    return i * (u_r / u)


@source("IEC 60076-1:2011", "no-load current in per unit of the rated current", "from memory")
def no_load_current_per_unit(i_0: Any, i_r: Any) -> Any:
    """No-load current at rated volts on the fed side's rated current [pu]."""
    return i_0 / i_r


@source("IEC 60076-8:1997", "shunt branch: g = P0/S", "from memory")
def shunt_conductance(p_0: Any, s: Any) -> Any:
    """Conductance seen in the open-circuit test [pu, own base] from P0 [W] and power [VA]."""
    return p_0 / s


@source("two-port theory", "no-load current without magnetising branch", "derived here")
def least_no_load_current(g: Any, x: Any) -> Any:
    """Least no-load current [pu] that goes with `g`: the core's loss behind half of `x`."""
    return g * sqrt(1 + (x * g / 2) ** 2)


@source("IEC 60076-8:1997", "shunt branch: b = -sqrt(i0² - g²)", "from memory")
def shunt_susceptance(i_0: Any, g: Any) -> Any:
    """Susceptance seen in the open-circuit test [pu, own base]; negative: it is inductive.

    Written as a product, which keeps its digits where `i_0` is close to `g`.
    """
    return -sqrt((i_0 - g) * (i_0 + g))


@source("definition", "Y = G + jB", "derived here")
def admittance(g: Any, b: Any) -> Any:
    """Complex admittance seen in the open-circuit test [pu, own base]."""
    return g + 1j * b
