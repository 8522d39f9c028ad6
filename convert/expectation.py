"""What the proof must find, by hand: readings of the re-run tests, and regulation.

Long tables as dicts of columns: one row a quantity, unit by unit, in the order of retest.csv and
regulation.csv. `quantity` opens with the side: `lv amps`; the words `volts applied` and
`amps applied` name what drives the re-run.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from . import circuit, entries, regulation
from .plant import Plant, System, Table

Columns = dict[str, np.ndarray[Any, Any]]
METHODS = ("phasor", "ieee_c57_12_90", "iec_60076_8")
#: hand formulas that are not applied to columns of one unit each, for the record
HAND = (
    regulation.thevenin, regulation.regulation_phasor, regulation.regulation_ieee,
    regulation.bound_ieee, regulation.drop_iec, regulation.cross_component, regulation.bound_iec,
    regulation.loss, regulation.efficiency,
)  # fmt: skip
UNIT_OF = {"volts": "V", "amps": "A", "watts": "W", "angle": "deg", "nominal": "V"}


def retest(plant: Plant, units: Table, model: str) -> Columns:
    """Return the expected readings of both re-run tests in both states, and of the connection.

    Parameters
    ----------
    plant : Plant
        For the printed readings.
    units : Table
        (n,) units from `chain.run`.
    model : str
        `T`, whose expectation is the certificate; or `cantilever`, which gives its own reading.
    """
    blocks: list[tuple[str, str, Any, Any, Any, Any]] = []
    for state in ("tested", "study"):
        blocks += _open_circuit(units, state, model)
        blocks += _short_circuit(units, state, model)
    blocks += _connection(plant, units)
    return _long(units, blocks)


def _long(units: Table, blocks: Sequence[tuple[str, str, Any, Any, Any, Any]]) -> Columns:
    """Stack (state, test, quantity, printed, correction, expected) blocks unit by unit."""
    n, m = units.n, len(blocks)

    def stacked(pick: int, kind: Any) -> np.ndarray[Any, Any]:
        out = np.empty((n, m), dtype=kind)
        for at, block in enumerate(blocks):
            out[:, at] = block[pick]
        return out.reshape(n * m)

    quantity = stacked(2, object)
    return {
        "name": np.repeat(units.text["name"], m),
        "state": stacked(0, object),
        "test": stacked(1, object),
        "quantity": quantity,
        "unit": np.array([UNIT_OF[q.split()[1]] for q in quantity], dtype=object),
        "certificate": stacked(3, object),
        "correction": stacked(4, object),
        "expected": stacked(5, float),
    }


def _side(units: Table, test: str) -> tuple[np.ndarray[Any, Any], np.ndarray[Any, Any]]:
    """Names of the fed and of the far side of a test."""
    fed = units[f"{test}_from"] == 1
    return np.where(fed, "hv", "lv"), np.where(fed, "lv", "hv")


def _words(side: np.ndarray[Any, Any], word: str) -> np.ndarray[Any, Any]:
    return np.array([f"{name} {word}" for name in side], dtype=object)


def _open_circuit(units: Table, state: str, model: str) -> list[Any]:
    fed, far = _side(units, "oc")
    from_side = fed == "hv"
    test = "open circuit"
    units.set("z_fed", np.where(from_side, units[f"z_from_{state}"], units[f"z_to_{state}"]))
    units.set("u_far", np.where(from_side, units["u_lv"], units["u_hv"]))
    units.put("far_volts", circuit.open_volts, u="oc_volts", u_fed="oc_rated_volts",
              u_open="u_far", z_fed="z_fed", y_m=f"y_m_{state}")  # fmt: skip
    amps, watts, note = units["oc_amps"], units["oc_watts"], ""
    if model != "T":
        units.put("y_seen", circuit.open_circuit_admittance, z_a="z_fed", y_m=f"y_m_{state}")
        base = {"u": "oc_volts", "u_r": "oc_rated_volts"}
        units.put("seen", circuit.test_amps, y="y_seen", i_r="oc_rated_amps", **base)  # type: ignore[arg-type]
        amps = units["seen"]
        units.put("seen", circuit.no_load_watts, y="y_seen", s="s", **base)  # type: ignore[arg-type]
        watts, note = units["seen"], "the simplified circuit's own reading"
    text = {key: units.word(f"oc_{key}") for key in ("volts", "amps", "watts")}
    return [
        (state, test, _words(fed, "volts applied"), text["volts"], "", units["oc_volts"]),
        (state, test, _words(fed, "amps"), text["amps"], note, amps),
        (state, test, _words(fed, "watts"), text["watts"], note, watts),
        (state, test, _words(far, "volts"), "", "rated ratio, less the leg's drop",
         units["far_volts"]),
    ]  # fmt: skip


def _short_circuit(units: Table, state: str, model: str) -> list[Any]:
    fed, _ = _side(units, "sc")
    from_side = fed == "hv"
    test = "short circuit"
    volts, watts, note = units["sc_volts"], units["sc_watts"], _carried(units, state)
    if state == "study" or model != "T":
        z = units[f"z_sc_{state}"]
        if model != "T":
            units.set("z_a", np.where(from_side, units[f"z_from_{state}"], units[f"z_to_{state}"]))
            units.set("z_b", np.where(from_side, units[f"z_to_{state}"], units[f"z_from_{state}"]))
            units.put("z_seen", circuit.short_circuit_impedance, z_a="z_a", z_b="z_b",
                      y_m=f"y_m_{state}")  # fmt: skip
            z = units["z_seen"]
            note = np.full(units.n, "the simplified circuit's own reading", dtype=object)
        units.set("z_seen", z)
        drive = {"z": "z_seen", "i": "sc_amps", "i_r": "sc_rated_amps"}
        units.put("seen", circuit.test_volts, u_r="sc_rated_volts", **drive)  # type: ignore[arg-type]
        volts = units["seen"]
        units.put("seen", circuit.test_watts, s="s", **drive)  # type: ignore[arg-type]
        watts = units["seen"]
    text = {key: units.word(f"sc_{key}") for key in ("volts", "amps", "watts")}
    return [
        (state, test, _words(fed, "amps applied"), text["amps"], "", units["sc_amps"]),
        (state, test, _words(fed, "volts"), text["volts"], note, volts),
        (state, test, _words(fed, "watts"), text["watts"], note, watts),
    ]


def _carried(units: Table, state: str) -> np.ndarray[Any, Any]:
    """Say how the tested loss was carried to the study's temperature."""
    notes = np.full(units.n, "", dtype=object)
    if state == "tested":
        return notes
    for row in np.flatnonzero(units["t_study"] != units["t_tested"]):
        warm, cold = units["t_study"][row], units["t_tested"][row]
        parts = [
            f"{side.upper()} I²R ×({units[f'k_{side}'][row]:g}+{warm:g})"
            f"/({units[f'k_{side}'][row]:g}+{cold:g})"
            for side in ("hv", "lv")
        ]
        k = units["k_stray"][row]
        parts.append(f"stray ×({k:g}+{cold:g})/({k:g}+{warm:g})")
        notes[row] = "; ".join(parts)
    return notes


def _connection(plant: Plant, units: Table) -> list[Any]:
    """Expected busbars by position in the sheet, their nominal volts, and the no-load angle."""
    blocks: list[Any] = []
    for side, base in (("hv", "base_from"), ("lv", "base_to")):
        name = entries.bus_names(units, plant.busbars.text["name"], side)
        blocks.append(("study", "connection", f"{side} nominal volts", name, "", units[base]))
    angle = -units["shift_deg"] - np.degrees(np.angle(units["chain_a"]))
    turned = (angle + 180.0) % 360.0 - 180.0
    group = units.word("vector_group")
    note = "30° an hour, and the leg's angle at no load"
    blocks.append(("study", "phase shift", "lv angle", group, note, turned))
    return blocks


def one_point(system: System) -> System:
    """Return the system with one load point: the largest load, the first power factor."""
    return replace(
        system,
        load_fractions=(max(system.load_fractions),),
        power_factors=system.power_factors[:1],
    )


def regulation_points(system: System, units: Table) -> Columns:
    """Return the hand-calculated drop and regulation with their bounds, three methods a point.

    `hand_percent` is by the certificate's own r + jx at the study's temperature (`phasor`: by the
    circuit's chain constants); `bound_points` is the largest difference that the written circuit
    may show, in percentage points.
    """
    k, c, s, sense = (
        np.array(column)
        for column in zip(
            *(
                (k, c, _sine(c, sense), sense)
                for k in system.load_fractions
                for c, sense in system.power_factors
            ),
            strict=True,
        )
    )
    points, m = len(k), len(METHODS)
    hand, bound = _hand(units, k, c, s)
    shape = (units.n, points, m)
    per_point = {"load_fraction": k, "power_factor": c, "sense": sense.astype(object)}
    spread = {
        name: np.broadcast_to(column[None, :, None], shape).reshape(-1)
        for name, column in per_point.items()
    }
    return {
        "name": np.repeat(units.text["name"], points * m),
        **spread,
        "method": np.tile(np.array(METHODS, dtype=object), units.n * points),
        "hand_percent": 100 * hand.reshape(-1),
        "bound_points": 100 * bound.reshape(-1),
    }


def _sine(c: float, sense: str) -> float:
    """Sine of the load angle: positive when the load lags."""
    return float((1 if sense == "lagging" else -1) * np.sqrt((1 - c) * (1 + c)))


def _hand(units: Table, k: Any, c: Any, s: Any) -> tuple[Any, Any]:
    """Hand values and bounds [pu], (n, points, methods)."""
    z, a, b = (units[name][:, None] for name in ("z_sc_study", "chain_a", "chain_b"))
    z_t = regulation.thevenin(a, b)
    q = np.maximum(
        np.abs(regulation.cross_component(z, c, s)), np.abs(regulation.cross_component(z_t, c, s))
    )
    k_max = k * np.maximum(1, np.abs(a))
    with np.errstate(invalid="ignore"):  # beyond k q = 1 no load flow exists; the bound is NaN
        iec = regulation.bound_iec(z, z_t, a, q, k, k_max)
    hand = (
        regulation.regulation_phasor(a, b, k, c, s),
        regulation.regulation_ieee(z.real, z.imag, k, c, s),
        regulation.drop_iec(z.real, z.imag, k, c, s),
    )
    bound = (
        np.full(hand[0].shape, 1e-9),
        regulation.bound_ieee(z, z_t, k),
        iec,
    )
    return np.stack(hand, axis=-1), np.stack(bound, axis=-1)


def losses(system: System, units: Table) -> Columns:
    """Return loss and efficiency at each load by hand: P0 + k² Pk at the study's temperature."""
    loads, senses = np.array(system.load_fractions), system.power_factors
    c = np.array(sorted({value for value, _ in senses}, reverse=True))
    shape = (units.n, len(loads), len(c))
    k = loads[None, :, None]
    columns: Mapping[str, Any] = {
        name: units[name][:, None, None] for name in ("p0", "pk_study", "s")
    }
    watts = regulation.loss(columns["p0"], columns["pk_study"], k)
    share = regulation.efficiency(columns["s"], watts, k, c[None, None, :])
    return {
        "name": np.repeat(units.text["name"], shape[1] * shape[2]),
        "load_fraction": np.broadcast_to(k, shape).reshape(-1),
        "power_factor": np.broadcast_to(c[None, None, :], shape).reshape(-1),
        "loss_w": np.broadcast_to(watts, shape).reshape(-1),
        "efficiency_percent": 100 * share.reshape(-1),
    }
