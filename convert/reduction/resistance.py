"""Winding-resistance test: direct-current ohms -> I²R loss at rated current."""

from __future__ import annotations

from typing import Any

from ..standards import source


@source("definition", "equivalent star: R_LL/2 for star and delta, delta winding/3", "derived here")
def star_resistance(ohms: Any, share: Any) -> Any:
    """Resistance per phase of the equivalent star [ohm].

    `share` is 1/2 for a reading between line terminals (star and delta alike), 1 for a star
    winding or a single-phase one, 1/3 for one winding of a delta.
    """
    return ohms * share


@source("IEC 60076-1:2011", "11.2.3 (R ~ K + θ)", "from memory")
def resistance_at_temperature(r: Any, t: Any, t_new: Any, k: Any) -> Any:
    """Resistance [ohm] carried from winding temperature `t` to `t_new` [°C]; `k` is K [°C]."""
    return r * (k + t_new) / (k + t)


@source("definition", "total I²R = m I² R per phase of the equivalent star", "derived here")
def ohmic_loss(i_r: Any, r: Any, phases: Any) -> Any:
    """I²R loss of one side at rated current [W] from ohms per phase of the equivalent star."""
    return phases * i_r**2 * r


@source("definition", "share of the I²R loss at rated current", "derived here")
def share_of_loss(p: Any, p_other: Any) -> Any:
    """Share of one side in the series resistance [1], by both sides' I²R loss [W]."""
    return p / (p + p_other)
