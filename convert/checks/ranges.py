"""Values that transformers seldom have, and circuits that none can have."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from ..errors import Finding, Severity
from ..gates import each, place, printed, separable
from ..plant import Table
from ..quantity import show
from ..standards import COMMON_PRACTICE

#: short-circuit impedance of power and distribution transformers lies between these
IMPEDANCE_RANGE = (0.005, 0.40)
#: I²R of the two windings seldom differs by more than this factor
SIDES = 5.0
#: no-load current [pu] and no-load power factor of a transformer lie between these
NO_LOAD_CURRENT = (0.0002, 0.10)
NO_LOAD_COSPHI = 0.02


def rules(units: Table) -> Iterator[Finding]:
    """Yield the findings of every rule of this file."""
    yield from _range(units)
    yield from _sides(units)
    yield from _no_load(units)
    yield from _passive(units)


def _range(units: Table) -> Iterator[Finding]:
    z = np.abs(units["z_sc_study"])
    low, high = IMPEDANCE_RANGE

    def fill(row: int) -> Finding:
        return Finding(
            Severity.CAUTION, "", "impedance-range", place(units, "sc_volts", row),
            f"uk {100 * z[row]:.4g} % from {printed(units, 'sc_volts', 'sc_amps', row=row)}",
            f"{100 * low:g} to {100 * high:g} %", "drop and fault level follow it",
            "the wrong side said to be fed (off by the square of the ratio), another unit's "
            "rating, or volts and amps of different tests", COMMON_PRACTICE,
        )  # fmt: skip

    yield from each(units, (z < low) | (z > high), fill)


def _sides(units: Table) -> Iterator[Finding]:
    ratio = units["p_hv_tested"] / units["p_lv_tested"]

    def fill(row: int) -> Finding:
        loss = [show(units[f"p_{side}_tested"][row], "active_power", 3) for side in ("hv", "lv")]
        return Finding(
            Severity.CAUTION, "", "winding-losses",
            "; ".join(place(units, c, row) for c in ("ohms_hv", "ohms_lv")),
            f"I²R HV {loss[0]}, LV {loss[1]}", f"within a factor of {SIDES:g} of each other",
            "I²R and stray loss are split wrongly", "mΩ for Ω or the reverse on one side, or the "
            "two sides' readings swapped", COMMON_PRACTICE,
        )  # fmt: skip

    bad = separable(units) & (np.abs(np.log(np.maximum(ratio, 1e-300))) > math.log(SIDES))
    yield from each(units, bad, fill)


def _no_load(units: Table) -> Iterator[Finding]:
    low, high = NO_LOAD_CURRENT
    cosphi = units["oc_cosphi"]

    def fill(row: int) -> Finding:
        readings = printed(units, "oc_volts", "oc_amps", "oc_watts", row=row)
        return Finding(
            Severity.CAUTION, "", "no-load-range", place(units, "oc_amps", row),
            f"i0 {100 * units['i0'][row]:.3g} %, cosφ {cosphi[row]:.3g} from {readings}",
            f"i0 of {100 * low:g} to {100 * high:g} %, cosφ above {NO_LOAD_COSPHI:g}",
            "magnetising and no-load loss follow it",
            "A entered as kA, W as kW or the reverse, a decimal point moved, or the wrong side "
            "said to be energised", COMMON_PRACTICE,
        )  # fmt: skip

    odd = (units["i0"] < low) | (units["i0"] > high) | (cosphi < NO_LOAD_COSPHI)
    yield from each(units, odd & (units["i0"] > 0), fill)


def _passive(units: Table) -> Iterator[Finding]:
    z, y = units["z_t_study"], units["y_m_study"]

    def fill(row: int) -> Finding:
        return Finding(
            Severity.ERROR, "", "circuit-not-passive",
            "; ".join(place(units, c, row) for c in ("sc_watts", "oc_amps")),
            f"the circuit of both tests has r {z[row].real:.4g}, x {z[row].imag:.4g}, g "
            f"{y[row].real:.4g}, b {y[row].imag:.4g} pu",
            "r and x above zero, g not below, b not above",
            "no transformer has these readings: the unit is left out",
            "readings of the two tests that do not belong together, or a factor of 1000",
            "a passive circuit",
        )  # fmt: skip

    tiny = 1e-6 * np.abs(y)  # rounding, where there is no magnetising branch
    passive = (z.real > 0) & (z.imag > 0) & (y.real >= -tiny) & (y.imag <= tiny)
    yield from each(units, ~passive, fill)
