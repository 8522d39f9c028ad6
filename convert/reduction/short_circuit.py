"""Short-circuit test: volts, amps and watts of the fed side -> z_sc on the unit's own base."""

from __future__ import annotations

from typing import Any

from numpy import sqrt

from ..standards import source


@source("IEC 60076-1:2011", "11.4 (loss ~ I²)", "from memory")
def load_loss_at_rated_current(p: Any, i: Any, i_r: Any) -> Any:
    """Load loss at rated current [W] from watts `p` read at amps `i` on a side rated `i_r` amps."""
    return p * (i_r / i) ** 2


@source("IEC 60076-1:2011", "11.4 (volts ~ I)", "from memory")
def impedance_volts_at_rated_current(u: Any, i: Any, i_r: Any) -> Any:
    """Impedance voltage at rated current [V] from volts `u` read at amps `i`."""
    return u * (i_r / i)


@source("IEC 60076-1:2011", "short-circuit impedance in per unit of the rated volts", "from memory")
def impedance_voltage(u_k: Any, u_r: Any) -> Any:
    """Short-circuit impedance |z| [pu, own base] from the impedance volts and rated volts [V]."""
    return u_k / u_r


@source("IEC 60076-8:1997", "r = Pk/S", "from memory")
def series_resistance(p_k: Any, s: Any) -> Any:
    """Series resistance seen in the test [pu, own base] from Pk [W] and rated power [VA]."""
    return p_k / s


@source("IEC 60076-8:1997", "x² = z² - r²", "from memory")
def series_reactance(z: Any, r: Any) -> Any:
    """Series reactance [pu, own base] from |z| and r, both at the test's own temperature.

    Written as a product, which keeps its digits where `r` is close to `z`.
    """
    return sqrt((z - r) * (z + r))


@source("definition", "Z = R + jX", "derived here")
def impedance(r: Any, x: Any) -> Any:
    """Complex impedance seen in the short-circuit test [pu, own base]."""
    return r + 1j * x
