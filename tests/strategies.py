"""Hypothesis strategies of units and their tests, and the way from a test to the program's answer.

The ranges hold what is built, from a pole unit to a large system transformer, and some way beyond.
"""

from __future__ import annotations

import tempfile
from dataclasses import replace
from pathlib import Path
from typing import Any

import forward
import numpy as np
from hypothesis import strategies as st

from convert import chain
from convert.intake.sheet import read

GROUPS = tuple(
    (hv, lv, clock)
    for hv in ("D", "Y", "YN", "Z", "ZN")
    for lv in ("D", "Y", "YN", "Z", "ZN")
    for clock in range(12)
    if clock % 2 == ((hv[0] in "DZ") != (lv[0] in "DZ"))
)


def plant_of(tests: list[forward.Test], **system: Any) -> Any:
    """Write the tests as a sheet and read it with the program."""
    return plant_of_text(forward.sheet(tests, **system))


def plant_of_text(text: str) -> Any:
    """Read the text of a sheet with the program."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "station.yaml"
        path.write_text(text, encoding="utf-8")
        return read(path)


def reduced(tests: list[forward.Test], model: str = "T", **system: Any) -> Any:
    """Carry the tests through the program; none may be left out."""
    units, findings = chain.run(plant_of(tests, **system), model)
    assert not findings, findings
    return units


def degrees(low: float, high: float) -> st.SearchStrategy[float]:
    """Temperatures to a thousandth of a degree, finer than any bay reads."""
    return st.floats(low, high).map(lambda v: round(v, 3))


def log_uniform(low: float, high: float) -> st.SearchStrategy[float]:
    """Numbers whose logarithm is spread evenly."""
    return st.floats(np.log(low), np.log(high)).map(lambda v: float(np.exp(v)))


@st.composite
def units(draw: Any, phases: int | None = None, angles: tuple[float, float] = (0.03, 0.995)) -> Any:
    """A unit; `angles`: range of cosφ of the short-circuit test (about) and of no load."""
    phases = phases or draw(st.sampled_from((3, 3, 1)))
    hv, lv, clock = draw(st.sampled_from(GROUPS)) if phases == 3 else ("I", "I", 0)
    metals = st.sampled_from(("copper", "aluminium"))
    low = draw(log_uniform(200.0, 40e3))
    high = min(low * draw(st.one_of(st.just(1.0), log_uniform(1.0, 100.0))), 765e3)
    least = max(5e3, high**2 / 5e4)
    power = draw(log_uniform(least, max(2 * least, min(high**2, 1e9))))
    sides = {}
    for name, connection, volts in (("hv", hv, high), ("lv", lv, low)):
        across = "line and line"
        if phases == 1:
            across = draw(st.sampled_from(("line and line", "line and neutral")))
        off = draw(st.floats(0.85, 1.15)) * (np.sqrt(3) if across == "line and neutral" else 1.0)
        sides[name] = forward.Side(volts, connection, 1.0, draw(metals), float(volts * off), across)
    bare = forward.Unit(
        sides["hv"], sides["lv"], power, 0.0, 0.0, 0.0, 0.0, phases, clock,
        draw(st.sampled_from(tuple(forward.CONSTANTS))),
    )  # fmt: skip
    z = draw(log_uniform(0.01, 0.25))
    r = z * draw(st.floats(*angles))
    ohmic = r * draw(st.floats(0.6, 1.0))
    share = draw(st.floats(0.3, 0.7))
    i_0 = draw(log_uniform(5e-4, 0.08))
    g = i_0 * draw(st.floats(*angles))
    base = bare.ohm_base
    ohms = {"hv": share * ohmic * base, "lv": (1 - share) * ohmic * base / bare.ratio**2}
    for name, side in sides.items():
        sides[name] = replace(side, ohms=ohms[name] * (3.0 if side.connection == "D" else 1.0))
    return replace(
        bare, hv=sides["hv"], lv=sides["lv"], stray=(r - ohmic) * base,
        x=float(np.sqrt((z - r) * (z + r))) * base, g=g / base,
        b=float(np.sqrt((i_0 - g) * (i_0 + g))) / base,
    )  # fmt: skip


@st.composite
def bays(draw: Any, split: str | None = None, **kind: Any) -> Any:
    """A unit with its tests: any side, volts, amps, temperatures, terminals and stages.

    `split`: how r is shared, `halves` or `resistances` (then of one metal, whose share is the same
    at all temperatures).
    """
    unit = draw(units(**kind))
    side, far = (st.sampled_from(("hv", "lv")) for _ in range(2))
    energised, fed = draw(side), draw(far)
    stages: tuple[tuple[str, float], ...] = ()
    amps = unit.rated_amps(fed)
    if draw(st.booleans()):
        other = unit.power * draw(st.floats(0.5, 2.0))
        stages = (("first", unit.power), ("second", other))
        amps = unit.rated_amps(fed, draw(st.sampled_from((unit.power, other))))
    split = split or draw(st.sampled_from(("", "halves", "resistances")))
    if split == "resistances":
        unit = replace(unit, lv=replace(unit.lv, metal=unit.hv.metal))
    three = unit.phases == 3
    between = st.sampled_from(("", "line and line", "line and neutral") if three else ("",))
    per = st.sampled_from(("", "total", "per phase") if three else ("",))
    ohms = st.sampled_from(("line and line", "winding"))
    cold = degrees(-5.0, 45.0)
    return forward.Test(
        unit,
        energised=energised,
        fed=fed,
        oc_volts=unit.side(energised).volts * draw(st.floats(0.8, 1.15)),
        sc_amps=amps * draw(st.floats(0.2, 1.1)),
        temperature=draw(degrees(0.0, 90.0)),
        ohms_at=(draw(cold), draw(cold)),
        ohms_between=(draw(ohms), draw(ohms)),
        oc_between=draw(between),
        sc_between=draw(between),
        oc_watts_are=draw(per),
        sc_watts_are=draw(per),
        spread=draw(st.sampled_from((0.0, 0.004))),
        split=split,
        stages=stages,
        stage="first" if stages else "",
        reference=draw(st.sampled_from((None, 75.0, 85.0))),
    )


def stations(most: int = 5, **kind: Any) -> st.SearchStrategy[list[forward.Test]]:
    """One to `most` units, named in order."""
    listed = st.lists(bays(**kind), min_size=1, max_size=most)
    return listed.map(lambda found: [test.at(name=f"T{at}") for at, test in enumerate(found, 1)])
