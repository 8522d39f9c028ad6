"""The table of each unit at each cooling stage and in each state: what units.csv holds.

Percent and watts are the certificate's (z_sc, y_oc); r, x, g, b and the ohms are the circuit's.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from . import circuit, perunit
from .chain import STATES
from .gates import separable
from .plant import Plant, Status, Table
from .reduction import open_circuit

Columns = dict[str, np.ndarray[Any, Any]]
#: rated load at this power factor shows what a simpler circuit gets wrong
_LOAD = 0.8 - 0.6j


def table(plant: Plant, units: Table) -> Columns:
    """Return the rows of units.csv.

    Parameters
    ----------
    plant : Plant
        Its stages give the ratings that each unit is shown on.
    units : Table
        (n,) units from `chain.run`.

    Returns
    -------
    dict of (m,) arrays
        m = sum over units of (stages x states), unit by unit; columns in print order.
    """
    at, stage, power, state = _rows(plant, units)
    rows = units.take(at)
    rows.set("s_stage", power)
    for column in ("z_sc", "z_t", "z_from", "z_to", "y_m", "t", "pk", "p_hv", "p_lv", "p_stray"):
        picked = np.choose(state, [rows[f"{column}_{name}"] for name in STATES])
        status = np.choose(state, [rows.status[f"{column}_{name}"] for name in STATES])
        rows.set(column, picked, status)
    _on_stage(rows)
    _ohms(rows)
    _simpler(rows)
    units.log(*rows.steps)
    return _columns(rows, stage, np.array(STATES, dtype=object)[state])


def _rows(plant: Plant, units: Table) -> tuple[Any, Any, Any, Any]:
    """Row of the unit, stage name, power and state number of each row of the table."""
    position = {name: at for at, name in enumerate(units.text["name"])}
    names = plant.transformers.text["name"]
    listed: list[list[tuple[str, float]]] = [[] for _ in range(units.n)]
    owners = plant.stages["unit"].astype(int)
    for owner, name, power in zip(
        owners, plant.stages.text["name"], plant.stages["power"], strict=True
    ):
        if names[owner] in position:
            listed[position[names[owner]]].append((str(name), float(power)))
    flat = [
        (at, name, power, state)
        for at, stages in enumerate(listed)
        for name, power in (stages or [("", float(units["s"][at]))])
        for state in range(len(STATES))
    ]
    at, stage, power, state = zip(*flat, strict=True) if flat else ((), (), (), ())
    return (
        np.array(at, dtype=int),
        np.array(stage, dtype=object),
        np.array(power, dtype=float),
        np.array(state, dtype=int),
    )


def _on_stage(rows: Table) -> None:
    """Carry per-unit values from the study's stage to the row's; the circuit in ohm stays."""
    same_volts: dict[str, Any] = {"s": "s", "s_new": "s_stage", "u": "u_lv", "u_new": "u_lv"}
    for column in ("z_sc", "z_t", "z_from", "z_to"):
        rows.put(f"{column}_own", perunit.series_to_base, z=column, **same_volts)
    for column in ("y_m", "y_oc"):
        rows.put(f"{column}_own", perunit.shunt_to_base, y=column, **same_volts)
    for side in ("hv", "lv"):
        rows.put(f"amps_{side}", open_circuit.rated_current, s="s_stage", u=f"u_{side}",
                 phases="phases")  # fmt: skip
    # load loss at the stage's own rated current: r on the stage's base times its power
    rows.set("pk_own", rows["z_sc_own"].real * rows["s_stage"], rows.status["pk"])


def _ohms(rows: Table) -> None:
    """The six elements in ohm, from HV and from LV."""
    for side in ("hv", "lv"):
        rows.put(f"base_{side}", circuit.base_impedance, u=f"u_{side}", s="s_stage")
        base: dict[str, Any] = {"z_base": f"base_{side}"}
        for leg in ("from", "to"):
            rows.put(f"ohm_{leg}_{side}", circuit.ohms, z=f"z_{leg}_own", **base)
        rows.put(f"rc_{side}", circuit.core_resistance, y_m="y_m_own", **base)
        rows.put(f"xm_{side}", circuit.magnetising_reactance, y_m="y_m_own", **base)


def _simpler(rows: Table) -> None:
    """What the shunt at the terminals, or no shunt, gets wrong at rated load, cosφ 0.8 lagging."""
    rows.set("load", _LOAD)
    rows.set("one", 1.0)
    rows.set("none", 0.0)
    rows.put("a", circuit.chain_a, z_from="z_from_own", y_m="y_m_own")
    rows.put("b", circuit.chain_b, z_from="z_from_own", z_to="z_to_own", y_m="y_m_own")
    rows.put("d", circuit.chain_d, z_to="z_to_own", y_m="y_m_own")
    rows.put("d_cantilever", circuit.chain_d, z_to="z_sc_own", y_m="y_oc_own")
    rows.put("volts", circuit.from_volts, a="a", b="b", load="load")
    rows.put("watts", circuit.loss, a="a", b="b", c="y_m_own", d="d", load="load")
    for name, c, d in (("cantilever", "y_oc_own", "d_cantilever"), ("series_only", "none", "one")):
        chain: dict[str, Any] = {"a": "one", "b": "z_sc_own", "load": "load"}
        rows.put("volts_simple", circuit.from_volts, **chain)
        rows.put("watts_simple", circuit.loss, c=c, d=d, **chain)
        for what in ("volts", "watts"):
            rows.put(f"{name}_{what}", circuit.error, simple=f"{what}_simple", exact=what)


def _columns(rows: Table, stage: Any, state: Any) -> Columns:
    z, y, z_t, y_m = rows["z_sc_own"], rows["y_oc_own"], rows["z_t_own"], rows["y_m_own"]
    columns: Columns = {
        "name": rows.text["name"],
        "stage": stage,
        "state": state,
        "rated_mva": rows["s_stage"] / 1e6,
        "winding_temp_degc": rows["t"],
        "uk_percent": 100 * np.abs(z),
        "ur_percent": 100 * z.real,
        "ux_percent": 100 * z.imag,
        "i0_percent": 100 * np.abs(y),
        "p0_w": rows["p0"],
        "pk_w": rows["pk_own"],
        **_losses(rows),
        "r_own_pu": z_t.real,
        "x_own_pu": z_t.imag,
        "g_own_pu": y_m.real,
        "b_own_pu": y_m.imag,
        "x_over_r": z.imag / z.real,
        "rated_amps_hv": rows["amps_hv"],
        "rated_amps_lv": rows["amps_lv"],
    }
    for side in ("hv", "lv"):
        columns |= _side_columns(rows, side)
    for name in ("cantilever", "series_only"):
        columns[f"{name}_volts_error_percent"] = 100 * rows[f"{name}_volts"]
        columns[f"{name}_loss_error_percent"] = 100 * rows[f"{name}_watts"]
    worst = rows.worst(("z_sc", "y_oc"))
    columns["status"] = np.array([Status(code).name.lower() for code in worst], dtype=object)
    return columns


def _losses(rows: Table) -> Columns:
    """I²R of each side and stray loss at the row's amps and temperature, where told apart."""
    told = np.where(separable(rows), (rows["s_stage"] / rows["s"]) ** 2, np.nan)
    parts = {"ohmic_hv": "p_hv", "ohmic_lv": "p_lv", "stray": "p_stray"}
    losses = {f"{name}_w": told * rows[column] for name, column in parts.items()}
    return losses | {f"k_{part}_degc": rows[f"k_{part}"] for part in ("hv", "lv", "stray")}


def _side_columns(rows: Table, side: str) -> Columns:
    """Star-equivalent ohms seen from one side and, where it is a delta, its winding's ohms."""
    letter = np.char.upper(rows.word(f"{side}_connection").astype(str))
    delta = np.where(letter == "D", 3.0, np.nan)
    parts = {
        "r1": rows[f"ohm_from_{side}"].real,
        "x1": rows[f"ohm_from_{side}"].imag,
        "r2": rows[f"ohm_to_{side}"].real,
        "x2": rows[f"ohm_to_{side}"].imag,
        "rc": rows[f"rc_{side}"],
        "xm": rows[f"xm_{side}"],
    }
    star = {f"{name}_{side}_ohm": value for name, value in parts.items()}
    return star | {f"{name}_{side}_delta_ohm": delta * value for name, value in parts.items()}
