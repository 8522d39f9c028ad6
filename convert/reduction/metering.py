"""Instrument readings -> line volts and total watts of the test."""

from __future__ import annotations

from typing import Any

from numpy import sqrt

from ..standards import source


@source("definition", "line volts of a star of phase volts", "derived here")
def line_volts(u: Any) -> Any:
    """Volts line to line [V] from the mean of the volts line to neutral."""
    return sqrt(3) * u


@source("definition", "total of three equal phases", "derived here")
def total_watts(p: Any) -> Any:
    """Watts of the three phases [W] from the watts of one."""
    return 3 * p


@source("definition", "uk times rated volts", "derived here")
def volts_of_share(share: Any, u_r: Any) -> Any:
    """Volts [V] that a stated share of the rated volts [pu] is."""
    return share * u_r


@source("definition", "i0 times rated current", "derived here")
def amps_of_share(share: Any, i_r: Any) -> Any:
    """Amps [A] that a stated share of the rated current [pu] is."""
    return share * i_r
