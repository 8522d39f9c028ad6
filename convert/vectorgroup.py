"""Connection of each side and clock number: reading, parity, phase shift.

The shift is the angle by which the low-voltage side lags the high-voltage side, 30 degrees an
hour of the clock (IEC 60076-1:2011, clause 7, from memory).
"""

from __future__ import annotations

import re
from dataclasses import dataclass

#: connections in the order of their printing; a zigzag shifts by an odd half-hour pair like a delta
HV_CONNECTIONS = ("D", "YN", "Y", "ZN", "Z")
LV_CONNECTIONS = ("d", "yn", "y", "zn", "z")
_TEXT = re.compile(r"(YN|Y|ZN|Z|D)[\s,/-]*(YN|Y|ZN|Z|D)[\s,/-]*([0-9]{1,2})", re.IGNORECASE)
_SINGLE = re.compile(r"I[\s,/-]*I[\s,/-]*([0-9]{1,2})", re.IGNORECASE)


@dataclass(frozen=True)
class VectorGroup:
    """High-voltage connection, low-voltage connection and clock: `YNd11`, or `Ii0`."""

    hv: str
    lv: str
    clock: int

    @property
    def letters(self) -> str:
        """Return the group without its clock, as the network library wants it."""
        return self.hv + self.lv

    def __str__(self) -> str:
        return f"{self.letters}{self.clock}"


def parse(text: str) -> VectorGroup:
    """Read `YNd11`, `Dyn 11`, `DYN-11` or, for a single-phase unit, `Ii0`.

    Raises
    ------
    ValueError
        With what was expected, when the text is no standard two-winding group or the clock number
        cannot be made by the two connections.
    """
    single = _SINGLE.fullmatch(text.strip())
    if single:
        return make("I", "i", int(single.group(1)))
    match = _TEXT.fullmatch(text.strip())
    # capitals are for the high-voltage side: dYN11 is the two sides in the wrong order
    if match is None or (match.group(1).islower() and match.group(2).isupper()):
        raise ValueError("a vector group such as YNd11, Dyn1, Yyn0, or Ii0 for a single-phase unit")
    return make(match.group(1).upper(), match.group(2).lower(), int(match.group(3)))


def make(hv: str, lv: str, clock: int) -> VectorGroup:
    """Join two connections and a clock, refusing a clock that they cannot make.

    Star-star, delta-delta and delta-zigzag give even hours; star-delta and star-zigzag odd ones;
    a single-phase unit 0 or 6 (IEC 60076-1:2011, clause 7 and annex D, from memory).
    """
    if hv == "I":
        hours: tuple[int, ...] = (0, 6)
    else:
        odd = (hv[0] in "DZ") != (lv[0] in "dz")
        hours = tuple(range(1 if odd else 0, 12, 2))
    if clock not in hours:
        listed = ", ".join(map(str, hours))
        raise ValueError(f"a clock number that {hv}{lv} can make: {listed}")
    return VectorGroup(hv, lv, clock)
