"""Own base -> system base and back, off-nominal ratio.

A branch's r, x, g, b lie on its to side: the ideal transformer stands at the from terminals.
"""

from __future__ import annotations

from typing import Any

from .standards import source


@source("definition", "z_new = z (S_new/S)(V/V_new)²", "derived here")
def series_to_base(z: Any, s: Any, s_new: Any, u: Any, u_new: Any) -> Any:
    """Series impedance [pu] carried from base (`s`, `u`) to (`s_new`, `u_new`) [VA, V]."""
    return z * (s_new / s) * (u / u_new) ** 2


@source("definition", "y_new = y (S/S_new)(V_new/V)²", "derived here")
def shunt_to_base(y: Any, s: Any, s_new: Any, u: Any, u_new: Any) -> Any:
    """Shunt admittance [pu] carried from base (`s`, `u`) to (`s_new`, `u_new`) [VA, V]."""
    return y * (s / s_new) * (u_new / u) ** 2


@source("definition", "t = (V_r1/V_r2)(V_b2/V_b1)", "derived here")
def off_nominal_ratio(u_from: Any, u_to: Any, base_from: Any, base_to: Any) -> Any:
    """Off-nominal ratio [pu]: rated volts of both sides over the busbars' nominal volts [V]."""
    return (u_from / u_to) * (base_to / base_from)


@source("definition", "t_new = t (V_b1/V_b1,new)(V_b2,new/V_b2)", "derived here")
def ratio_to_base(t: Any, u_from: Any, u_from_new: Any, u_to: Any, u_to_new: Any) -> Any:
    """Off-nominal ratio [pu] carried to other nominal volts of both busbars [V]."""
    return t * (u_from / u_from_new) * (u_to_new / u_to)
