"""Units on a test bay: from a transformer's physics to the readings of its certificate.

The inverse of the program, made another way: it imports nothing of it. A unit is its windings'
direct-current ohms, its stray ohms, its leakage and its core, in ohms. What a test reads is solved
by modified nodal analysis of one phase of the equivalent star: node volts and leg amps are the
unknowns, so that a shunt a million times smaller than a leg keeps its digits.

Temperature: a winding's ohms rise by (K + t), the stray ohms fall by it. The standards define the
load loss at the terminals, as I²R of both windings at rated amps and the stray loss, which is the
rest; so the law is put on the terminals' impedance, and the legs are found from it.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache
from typing import Any

import numpy as np

COLD = 20.0  # °C, at which a unit's ohms are held
#: K of the resistance-temperature law [°C]; copper and aluminium in one unit: `mixed` for the stray
CONSTANTS = {
    "IEC 60076-1": {"copper": 235.0, "aluminium": 225.0, "mixed": 229.0},
    "IEEE C57.12.00": {"copper": 234.5, "aluminium": 225.0, "mixed": 229.0},
}
OTHER = {"hv": "lv", "lv": "hv"}
DELTA, STAR = ((0, 1), (1, 2), (2, 0)), ((0, 3), (1, 3), (2, 3))  # elements between nodes
OPEN, SHORT = (0, 1, 0), (1, 0, 0)  # what holds at a terminal: a volts + b amps = c


def volts(value: Any) -> tuple[Any, Any, Any]:
    """A terminal held at phase volts."""
    return (1, 0, value)


def amps(value: Any) -> tuple[Any, Any, Any]:
    """A terminal into which amps are driven."""
    return (0, 1, value)


def burden(admittance: Any) -> tuple[Any, Any, Any]:
    """A terminal loaded with an admittance [S per phase]."""
    return (admittance, 1, 0)


# --- one phase of the equivalent star -----------------------------------------------------------


@dataclass(frozen=True)
class Circuit:
    """Legs and shunt of the T in ohm and siemens seen from HV, and the turns ratio HV/LV.

    Fields may be arrays: one element a circuit.
    """

    z_hv: Any
    z_lv: Any
    y: Any
    ratio: Any = 1.0

    @property
    def z(self) -> Any:
        """Total series impedance [ohm from HV]."""
        return self.z_hv + self.z_lv


@dataclass(frozen=True)
class State:
    """Phase volts and amps into both terminals, in volts and amps of each side."""

    volts: dict[str, Any]
    amps: dict[str, Any]

    def power(self, side: str) -> Any:
        """Complex power into one terminal [VA a phase]."""
        return self.volts[side] * np.conj(self.amps[side])


def solve(circuit: Circuit, hv: tuple[Any, Any, Any], lv: tuple[Any, Any, Any]) -> State:
    """Solve the T with one condition at each terminal."""
    z_hv, z_lv, y, n, *ends = np.broadcast_arrays(
        circuit.z_hv, circuit.z_lv, circuit.y, circuit.ratio, *hv, *lv
    )
    # unknowns: HV volts, inner node's volts, LV volts, HV amps, LV amps; LV in its own volts
    a = np.zeros((*z_hv.shape, 5, 5), dtype=complex)
    b = np.zeros((*z_hv.shape, 5, 1), dtype=complex)
    a[..., 0, 0], a[..., 0, 1], a[..., 0, 3] = 1, -1, -z_hv
    a[..., 1, 2], a[..., 1, 1], a[..., 1, 4] = n, -1, -z_lv / n
    a[..., 2, 3], a[..., 2, 4], a[..., 2, 1] = 1, 1 / n, -y
    a[..., 3, 0], a[..., 3, 3], b[..., 3, 0] = ends[:3]
    a[..., 4, 2], a[..., 4, 4], b[..., 4, 0] = ends[3:]
    x = np.linalg.solve(a, b)[..., 0]
    return State({"hv": x[..., 0], "lv": x[..., 2]}, {"hv": x[..., 3], "lv": x[..., 4]})


def feed(circuit: Circuit, side: str, what: Any, far: Any) -> State:
    """Solve with `what` at one side and `far` at the other."""
    ends = {side: what, OTHER[side]: far}
    return solve(circuit, ends["hv"], ends["lv"])


def seen(circuit: Circuit, side: str, far: Any) -> Any:
    """Impedance seen from one side with `far` at the other [ohm from HV], by driving one ampere."""
    state = feed(circuit, side, amps(1.0), far)
    return state.volts[side] * (circuit.ratio**2 if side == "lv" else 1.0)


def circuit_of(z_sc: Any, y_oc: Any, fed: str, energised: str, r_share: Any, x_share: Any, ratio=1):
    """The T with given leakage shares of HV that shows z_sc and y_oc where they are measured.

    By correction: series and shunt are scaled by what is wanted over what is seen, until it is.
    """
    z, y = np.asarray(z_sc, dtype=complex), np.asarray(y_oc, dtype=complex)
    for _ in range(25):
        leg = z.real * r_share + 1j * z.imag * x_share
        circuit = Circuit(leg, z - leg, y, ratio)
        more = z_sc / seen(circuit, fed, SHORT)
        drive = feed(circuit, energised, volts(1.0), OPEN).amps[energised]
        found = drive / (ratio**2 if energised == "lv" else 1.0)
        z, y = z * more, np.where(y_oc == 0, 0, y * y_oc / np.where(found == 0, 1, found))
        if np.all(np.abs(more - 1) < 4e-16):
            break
    return circuit


# --- under load ---------------------------------------------------------------------------------


def random_circuits(seed: int, n: int) -> Circuit:
    """Circuits on their own base: z up to 25 %, y up to 8 %, shares of r and x from 1 to 99 %."""
    random = np.random.default_rng(seed)
    z = np.exp(random.uniform(np.log(0.01), np.log(0.25), n))
    z = z * np.exp(1j * random.uniform(0.05, np.pi / 2, n))
    y = np.exp(random.uniform(np.log(5e-4), np.log(0.08), n))
    y = y * np.exp(-1j * random.uniform(0.05, np.pi / 2, n))
    r, x = random.uniform(0.01, 0.99, (2, n))
    leg = z.real * r + 1j * z.imag * x
    return Circuit(leg, z - leg, y)


def rise_at_rated_load_volts(t: Circuit, k: Any, angle: Any) -> Any:
    """(no-load - loaded)/loaded LV volts, where the loaded ones are rated: IEEE's regulation."""
    loaded = feed(t, "hv", volts(1.0), burden(k * np.exp(-1j * angle)))
    empty = feed(t, "hv", volts(1.0), OPEN)
    return np.abs(empty.volts["lv"]) / np.abs(loaded.volts["lv"]) - 1


def drop_at_rated_amps(t: Circuit, k: Any, angle: Any) -> Any:
    """(no-load - loaded)/no-load LV volts at rated HV volts and k of rated amps: IEC's drop."""
    empty = np.abs(feed(t, "hv", volts(1.0), OPEN).volts["lv"])

    def missed(m: Any) -> Any:
        loaded = feed(t, "hv", volts(1.0), burden(m * np.exp(-1j * angle)))
        return np.abs(loaded.amps["lv"]) - k, np.abs(loaded.volts["lv"])

    low = np.asarray(k, dtype=float)
    high = 1.02 * low
    off_low, _ = missed(low)
    for _ in range(12):  # secant
        off, loaded = missed(high)
        if np.max(np.abs(off)) < 1e-13:
            break
        step = off - off_low
        moved = np.where(step == 0, 0, off * (high - low) / np.where(step == 0, 1, step))
        low, off_low, high = high, off, high - moved
    else:
        raise ArithmeticError("no burden draws these amps")
    return (empty - loaded) / empty


# --- the unit -----------------------------------------------------------------------------------


@dataclass(frozen=True)
class Side:
    """One side: rated volts, connection (D, Y, Z, or I), metal, and ohms of a phase winding, cold.

    `nominal` is the busbar's line-to-line volts; `across` the terminals of a single-phase unit.
    """

    volts: float
    connection: str
    ohms: float
    metal: str = "copper"
    nominal: float = 0.0
    across: str = "line and line"

    def star_ohms(self, k: float, t: float) -> float:
        """Ohms whose I²R at line amps, a phase, is the winding's own at its amps."""
        winding_amps = 1 / np.sqrt(3) if self.connection == "D" else 1.0
        return winding_amps**2 * self.ohms * (k + t) / (k + COLD)

    def reading(self, k: float, t: float, between: str) -> float:
        """Direct-current ohms of a phase winding or between two line terminals."""
        r = self.ohms * (k + t) / (k + COLD)
        if between == "winding":
            return r
        return float(ohms_between(DELTA if self.connection == "D" else STAR, r))


def ohms_between(ends: tuple[tuple[int, int], ...], r: Any) -> Any:
    """Ohms between nodes 0 and 1 of equal elements `r`: one ampere through the node matrix."""
    size = 1 + max(max(pair) for pair in ends)
    matrix = np.zeros((size, size), dtype=np.result_type(type(r), float))
    for a, b in ends:
        matrix[[a, b], [a, b]] += 1 / r
        matrix[[a, b], [b, a]] -= 1 / r
    keep = [at for at in range(size) if at != 1]  # node 1 is earthed
    drive = np.zeros(size - 1)
    drive[0] = 1.0
    return np.linalg.solve(matrix[np.ix_(keep, keep)], drive)[0]


@dataclass(frozen=True)
class Unit:
    """A two-winding unit; stray ohms (cold), reactance, g, b: a phase of the star, seen from HV."""

    hv: Side
    lv: Side
    power: float
    stray: float
    x: float
    g: float
    b: float
    phases: int = 3
    clock: int = 0
    standard: str = "IEC 60076-1"

    @property
    def ratio(self) -> float:
        return self.hv.volts / self.lv.volts

    @property
    def ohm_base(self) -> float:
        """Ohms of one per unit, seen from HV."""
        return self.phase_volts("hv") / self.rated_amps("hv")

    @property
    def y(self) -> complex:
        """Admittance seen in the open-circuit test [S from HV]."""
        return complex(self.g, -self.b)

    def side(self, name: str) -> Side:
        return self.hv if name == "hv" else self.lv

    def phase_volts(self, side: str) -> float:
        return self.side(side).volts / self.line

    def rated_amps(self, side: str, power: float | None = None) -> float:
        return (power or self.power) / self.phases / self.phase_volts(side)

    @property
    def line(self) -> float:
        """Line volts over phase volts of the star."""
        return float(np.sqrt(3)) if self.phases == 3 else 1.0

    def k(self, side: str) -> float:
        return CONSTANTS[self.standard][self.side(side).metal]

    @property
    def k_stray(self) -> float:
        alike = self.hv.metal == self.lv.metal
        return CONSTANTS[self.standard][self.hv.metal if alike else "mixed"]

    def ohmic(self, side: str, t: float) -> float:
        """Winding ohms at `t`, a phase of the star [ohm from HV]."""
        own = self.side(side).star_ohms(self.k(side), t)
        return own * (self.ratio**2 if side == "lv" else 1.0)

    def z(self, t: float) -> complex:
        """Impedance seen in the short-circuit test at winding temperature `t` [ohm from HV]."""
        stray = self.stray * (self.k_stray + COLD) / (self.k_stray + t)
        return complex(self.ohmic("hv", t) + self.ohmic("lv", t) + stray, self.x)

    def r_share(self, t: float) -> float:
        """Share of HV in the winding ohms at `t`."""
        hv, lv = self.ohmic("hv", t), self.ohmic("lv", t)
        return hv / (hv + lv)


# --- the test bay -------------------------------------------------------------------------------


@dataclass(frozen=True)
class Test:
    """One unit and how it was tested; what is left out is as in the simplest certificate.

    `oc_volts` are line volts, `sc_amps` line amps of the fed side; `spread` parts three readings
    by this share; `stages` are ratings by name, `stage` the one that the study uses.
    """

    __test__ = False  # not a test of pytest's
    unit: Unit
    name: str = "T1"
    energised: str = "lv"
    fed: str = "hv"
    oc_volts: float = 0.0
    sc_amps: float = 0.0
    temperature: float = COLD
    ohms_at: tuple[float, float] | None = (COLD, COLD)
    ohms_between: tuple[str, str] = ("line and line", "line and line")
    oc_between: str = ""
    sc_between: str = ""
    oc_watts_are: str = ""
    sc_watts_are: str = ""
    spread: float = 0.0
    split: str = ""
    stages: tuple[tuple[str, float], ...] = ()
    stage: str = ""
    reference: float | None = None
    results: bool = False  # the certificate gives results at the temperature, and no readings
    results_power: float = 0.0  # their base, where it is not the unit's power

    def at(self, **changes: Any) -> Test:
        """The same test with some of it changed."""
        return replace(self, **changes)

    @cache  # noqa: B019 - a run makes few units
    def circuit(self, t: float) -> Circuit:
        """The known circuit at `t` [ohm from HV]: the T that shows both tests where made."""
        share = self.unit.r_share(self.temperature) if self.split == "resistances" else 0.5
        z = self.unit.z(t)
        return circuit_of(z, self.unit.y, self.fed, self.energised, share, 0.5, self.unit.ratio)

    def per_unit(self, t: float) -> Circuit:
        """The known circuit on the unit's own base."""
        c, base = self.circuit(t), self.unit.ohm_base
        return Circuit(c.z_hv / base, c.z_lv / base, c.y * base)

    def open_circuit(self) -> tuple[float, float, float]:
        """Line volts, line amps, total watts."""
        unit = self.unit
        line = self.oc_volts or unit.side(self.energised).volts
        state = feed(self.circuit(self.temperature), self.energised, volts(line / unit.line), OPEN)
        watts = unit.phases * state.power(self.energised).real
        return line, float(np.abs(state.amps[self.energised])), float(watts)

    def short_circuit(self, t: float | None = None) -> tuple[float, float, float]:
        """Line volts, line amps, total watts, at the test's temperature or another."""
        unit = self.unit
        drive = self.sc_amps or unit.rated_amps(self.fed)
        t = self.temperature if t is None else t
        state = feed(self.circuit(t), self.fed, amps(drive), SHORT)
        watts = unit.phases * state.power(self.fed).real
        return float(np.abs(state.volts[self.fed])) * unit.line, drive, float(watts)

    def ohms(self, side: str) -> float:
        """Direct-current reading of one side."""
        assert self.ohms_at is not None
        at = 0 if side == "hv" else 1
        unit = self.unit
        between = "winding" if unit.phases == 1 else self.ohms_between[at]
        return unit.side(side).reading(unit.k(side), self.ohms_at[at], between)


# --- the sheet ----------------------------------------------------------------------------------


def _three(value: float, spread: float, word: str, share: float = 1.0) -> str:
    """One reading, or three unlike ones whose mean (`share` 1) or sum (1/3) it is."""
    value = float(value)
    if not spread:
        return f"{value!r} {word}"
    one = value * share
    parts = [one * (1 + spread), one * (1 - 3 * spread)]
    parts.append((3 * share * value) - sum(parts))
    return f"[{', '.join(f'{float(part)!r} {word}' for part in parts)}]"


def _reading(test: Test, values: tuple[float, float, float], between: str, per: str) -> list[str]:
    line, drive, watts = values
    spread = test.spread if test.unit.phases == 3 else 0.0
    shown = float(line / np.sqrt(3)) if between == "line and neutral" else line
    lines = [f"volts: {_three(shown, spread, 'V')}", f"amps: {_three(drive, spread, 'A')}"]
    if per:
        three = watts / 3 if per == "per phase" else watts
        lines += [f"watts: {three!r} W", f"watts_are: {per}"]
    else:
        lines.append(f"watts: {_three(watts, spread, 'W', 1 / 3)}")
    return [*lines, f"between: {between}"] if between else lines


def _side_text(side: Side, bus: str, connection: str) -> str:
    parts = [f"busbar: {bus}", f"rated_voltage: {side.volts!r} V", f"metal: {side.metal}"]
    if side.connection == "I":
        parts.append(f"across: {side.across}")
    else:
        parts.append(f"connection: {connection}")
    return f"{{{', '.join(parts)}}}"


def _rating(test: Test) -> list[str]:
    if not test.stages:
        return [f"rated_power: {test.unit.power!r} VA"]
    listed = [f"  {name}: {power!r} VA" for name, power in test.stages]
    return ["cooling_stages:", *listed, f"study_stage: {test.stage}"]


def _results(test: Test) -> list[str]:
    """What the certificate gives by result, on the rated amps of the base; HV fed, LV energised."""
    unit, base = test.unit, test.results_power or test.unit.power
    hot = test.at(oc_volts=0.0, sc_amps=unit.rated_amps(test.fed, base))
    (line, _, loss), (_, drive, no_load) = hot.short_circuit(), hot.open_circuit()
    return [
        "results:",
        f"  load_loss: {loss!r} W",
        f"  impedance_voltage: {float(line / unit.hv.volts)!r} pu",
        f"  temperature: {test.temperature!r} °C",
        f"  base: {base!r} VA",
        f"  no_load_loss: {no_load!r} W",
        f"  no_load_current: {float(drive / unit.rated_amps(test.energised, base))!r} pu",
    ]


def _tests(test: Test) -> list[str]:
    lines = ["tests:"]
    if not test.results:
        lines += ["  open_circuit:", f"    - energised: {test.energised}"]
        oc = _reading(test, test.open_circuit(), test.oc_between, test.oc_watts_are)
        lines += [f"      {line}" for line in oc]
        lines += ["  short_circuit:", f"    - fed: {test.fed}"]
        sc = _reading(test, test.short_circuit(), test.sc_between, test.sc_watts_are)
        lines += [f"      {line}" for line in (*sc, f"temperature: {test.temperature!r} °C")]
    if test.ohms_at is not None:
        lines.append("  resistance:")
        for at, side in enumerate(("hv", "lv")):
            spread = test.spread if test.unit.phases == 3 else 0.0
            ohms = _three(test.ohms(side), spread, "ohm")
            lines += [f"    - side: {side}", f"      ohms: {ohms}"]
            lines.append(f"      temperature: {test.ohms_at[at]!r} °C")
            if test.unit.phases == 3:
                lines.append(f"      between: {test.ohms_between[at]}")
    return lines if len(lines) > 1 else []


def _unit_text(test: Test) -> list[str]:
    unit = test.unit
    buses = {side: f"{test.name} {side}" for side in ("hv", "lv")}
    lines = [
        f"phases: {unit.phases}",
        f"certificate: {{standard: {unit.standard}}}",
        *_rating(test),
        f"hv: {_side_text(unit.hv, buses['hv'], unit.hv.connection)}",
        f"lv: {_side_text(unit.lv, buses['lv'], unit.lv.connection.lower())}",
        f"clock: {unit.clock}" if unit.phases == 3 else f"vector_group: Ii{unit.clock}",
    ]
    if test.reference is not None:
        lines.append(f"reference_temperature: {test.reference!r} °C")
    if test.split:
        lines.append(f"split: {test.split}")
    if test.results:
        lines += _results(test)
    return [*lines, *_tests(test)]


def sheet(
    tests: list[Test],
    study: float | None = 75.0,
    base: float = 100e6,
    frequency: float = 50.0,
    sources: bool = False,
) -> str:
    """A station sheet of units, each on two busbars of its own, with every digit of its readings.

    `sources`: hold the HV busbars at their nominal volts.
    """
    lines = ["station: {name: Invented units}", "system:", f"  base_power: {base!r} VA"]
    lines.append(f"  frequency: {frequency!r} Hz")
    if study is not None:
        lines.append(f"  study_temperature: {study!r} °C")
    lines.append("busbars:")
    for test in tests:
        for name in ("hv", "lv"):
            side = test.unit.side(name)
            nominal = side.nominal or side.volts
            held = f", source_voltage: {nominal!r} V" if sources and name == "hv" else ""
            lines.append(f"  {test.name} {name}: {{nominal_voltage: {nominal!r} V{held}}}")
    lines.append("transformers:")
    for test in tests:
        lines += [f"  {test.name}:", *(f"    {line}" for line in _unit_text(test))]
    return "\n".join(lines) + "\n"
