"""Branches -> branch table, pandapower rows and network files.

Network files are written with the standard library alone, so that every float is exact and
nothing heavy is imported; the library fills what is left out when it loads them.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from .plant import Plant, Status, Table

Columns = dict[str, np.ndarray[Any, Any]]
#: leakage share that stands for none: the library divides by it; 5e-16 from the exact circuit
NO_SHARE = 1e-12
#: the newest format that the oldest supported pandapower reads
FORMAT = {"version": "3.5.6", "format_version": "3.3.0"}
_DTYPES = {
    "object": ("name", "std_type", "type", "zone", "geo", "tap_side", "tap_changer_type",
               "vector_group", "printed_vector_group", "serial", "certificate"),
    "bool": ("in_service", "controllable", "tap_dependency_table", "oltc"),
    "uint32": ("hv_bus", "lv_bus", "bus", "parallel"),
    "Int64": ("id_characteristic_table",),
}  # fmt: skip
_DTYPE = {column: kind for kind, columns in _DTYPES.items() for column in columns}


def branch_table(plant: Plant, units: Table, model: str) -> Columns:
    """Return the columns of branches.csv, (n,) each, in order.

    r_pu, x_pu (total series) and g_pu, b_pu (shunt at the inner node) lie on the to side of the
    ideal transformer `ratio_pu`·exp(j `shift_deg`), on (`base_mva`, `base_kv_to`).
    """
    names = plant.busbars.text["name"]
    worst = units.worst(("z_sc_study", "y_oc", "r_share_from"))
    n = units.n
    return {
        "name": units.text["name"],
        "phases": units["phases"].astype(int),
        "from_busbar": names[units["hv_bus"].astype(int)],
        "to_busbar": names[units["lv_bus"].astype(int)],
        "base_mva": units["s_system"] / 1e6,
        "base_kv_from": units["base_from"] / 1e3,
        "base_kv_to": units["base_to"] / 1e3,
        "rated_kv_from": units["u_hv"] / 1e3,
        "rated_kv_to": units["u_lv"] / 1e3,
        "rated_mva": units["s"] / 1e6,
        "parallel": np.ones(n, dtype=int),
        "r_pu": units["z_system"].real,
        "x_pu": units["z_system"].imag,
        "g_pu": units["y_system"].real,
        "b_pu": units["y_system"].imag,
        "ratio_pu": units["ratio"],
        "shift_deg": units["shift_deg"],
        "r_share_from": units["r_share_from"],
        "x_share_from": units["x_share_from"],
        "model": np.full(n, model, dtype=object),
        "winding_temp_degc": units["t_study"],
        "tap": units.word("sc_tap"),
        "status": np.array([Status(code).name.lower() for code in worst], dtype=object),
    }


def trafo_rows(own: Mapping[str, Any]) -> Columns:
    """Return pandapower `trafo` columns from circuits on their own base.

    Parameters
    ----------
    own : mapping of (n,) arrays
        name, hv_bus, lv_bus (positions in the bus table), rated_mva, rated_kv_from, rated_kv_to,
        z, y (complex, own base), shift_deg, r_share_from, x_share_from, and optional text columns
        vector_group (letters), printed_vector_group, serial, certificate.
    """
    n = len(own["name"])
    nothing = np.full(n, None, dtype=object)
    rows: Columns = {
        "name": own["name"],
        "std_type": nothing,
        "hv_bus": own["hv_bus"],
        "lv_bus": own["lv_bus"],
        "sn_mva": own["rated_mva"],
        "vn_hv_kv": own["rated_kv_from"],
        "vn_lv_kv": own["rated_kv_to"],
        "vk_percent": 100 * np.abs(own["z"]),
        "vkr_percent": 100 * own["z"].real,
        "pfe_kw": own["y"].real * own["rated_mva"] * 1e3,
        "i0_percent": 100 * np.abs(own["y"]),
        "shift_degree": own["shift_deg"],
        "tap_side": nothing,
        "tap_neutral": np.full(n, np.nan),
        "tap_min": np.full(n, np.nan),
        "tap_max": np.full(n, np.nan),
        "tap_step_percent": np.full(n, np.nan),
        "tap_step_degree": np.full(n, np.nan),
        "tap_pos": np.full(n, np.nan),
        "tap_changer_type": nothing,
        "id_characteristic_table": nothing,
        "tap_dependency_table": np.zeros(n, dtype=bool),
        "oltc": np.zeros(n, dtype=bool),
        "parallel": np.ones(n, dtype=int),
        "df": np.ones(n),
        "in_service": np.ones(n, dtype=bool),
        "leakage_resistance_ratio_hv": np.where(
            own["r_share_from"] == 0, NO_SHARE, own["r_share_from"]
        ),
        "leakage_reactance_ratio_hv": np.where(
            own["x_share_from"] == 0, NO_SHARE, own["x_share_from"]
        ),
    }
    for column in ("vector_group", "printed_vector_group", "serial", "certificate"):
        rows[column] = own.get(column, nothing)
    return rows


@dataclass(frozen=True)
class Network:
    """What one network file holds: bus, trafo and ext_grid columns, and a note to its reader."""

    name: str
    note: str
    sn_mva: float
    f_hz: float
    bus: Columns
    trafo: Columns
    ext_grid: Columns


def bus_names(units: Table, busbars: np.ndarray[Any, Any], side: str) -> np.ndarray[Any, Any]:
    """Return the name of each unit's bus: its busbar's, or its own island's if single-phase."""
    names = busbars[units[f"{side}_bus"].astype(int)]
    own = np.array([f"{unit}: {bus}" for unit, bus in zip(units.text["name"], names, strict=True)],
                   dtype=object)  # fmt: skip
    return np.where(units["phases"] == 1, own, names)


def _own(units: Table, hv_bus: Any, lv_bus: Any) -> dict[str, Any]:
    letters = [
        None if hv == "I" else f"{hv}{lv}"
        for hv, lv in zip(units.word("hv_connection"), units.word("lv_connection"), strict=True)
    ]
    return {
        "name": units.text["name"],
        "hv_bus": hv_bus,
        "lv_bus": lv_bus,
        "rated_mva": units["s"] / 1e6,
        "rated_kv_from": units["u_hv"] / 1e3,
        "rated_kv_to": units["u_lv"] / 1e3,
        "z": units["z_t_study"],
        "y": units["y_m_study"],
        "shift_deg": units["shift_deg"],
        "r_share_from": units["r_share_from"],
        "x_share_from": units["x_share_from"],
        "vector_group": np.array(letters, dtype=object),
        "printed_vector_group": units.word("vector_group"),
        "serial": units.word("certificate_serial"),
        "certificate": units.word("certificate_number"),
    }


def three_phase_network(plant: Plant, units: Table, name: str) -> tuple[Network | None, list[int]]:
    """Return the station's balanced network, and the busbars given a source that no sheet names.

    Busbars that only single-phase units touch have no place in a balanced network.
    """
    three = units.take(np.flatnonzero(units["phases"] == 3))
    if not three.n:
        return None, []
    touched = set(units["hv_bus"].astype(int)) | set(units["lv_bus"].astype(int))
    mine = set(three["hv_bus"].astype(int)) | set(three["lv_bus"].astype(int))
    kept = [at for at in range(plant.busbars.n) if at in mine or at not in touched]
    position = {at: new for new, at in enumerate(kept)}
    ends = [[position[int(at)] for at in three[f"{side}_bus"]] for side in ("hv", "lv")]
    volts = plant.busbars["nominal_voltage"][kept]
    held = plant.busbars["source_voltage"][kept]
    added = _missing_sources(volts, held, ends[0], ends[1])
    held = held.copy()
    held[added] = volts[added]
    own = _own(three, np.array(ends[0]), np.array(ends[1]))
    network = Network(
        name,
        "Balanced network of the three-phase units; vector_group is without its clock, "
        "printed_vector_group as printed.",
        plant.system.base_power / 1e6,
        plant.system.frequency,
        buses(plant.busbars.text["name"][kept], volts),
        trafo_rows(own),
        sources(held, volts),
    )
    return network, [kept[at] for at in added]


def single_phase_network(plant: Plant, units: Table, name: str) -> Network | None:
    """Return the single-phase units, one island each on its own volts and rating."""
    single = units.take(np.flatnonzero(units["phases"] == 1))
    if not single.n:
        return None
    n = single.n
    names = [bus_names(single, plant.busbars.text["name"], side) for side in ("hv", "lv")]
    volts = np.concatenate([single["base_from"], single["base_to"]])
    held = np.concatenate([single["base_from"], np.full(n, np.nan)])
    return Network(
        name,
        "Single-phase units, one island each on its own volts and rating: per unit, volts and "
        "watts are the unit's own; multiply every *_ka column of the results by sqrt(3).",
        float(single["s_system"][0]) / 1e6,
        plant.system.frequency,
        buses(np.concatenate(names), volts),
        trafo_rows(_own(single, np.arange(n), np.arange(n, 2 * n))),
        sources(held, volts),
    )


def _missing_sources(volts: Any, held: Any, hv: Sequence[int], lv: Sequence[int]) -> list[int]:
    """Return, for each connected set of busbars without a source, its highest-voltage busbar."""
    group = list(range(len(volts)))

    def root(at: int) -> int:
        while group[at] != at:
            group[at] = group[group[at]]
            at = group[at]
        return at

    for a, b in zip(hv, lv, strict=True):
        group[root(b)] = root(a)
    sets: dict[int, list[int]] = {}
    for at in range(len(volts)):
        sets.setdefault(root(at), []).append(at)
    return [
        max(members, key=lambda at: (volts[at], -at))
        for members in sets.values()
        if np.isnan(held[members]).all()
    ]


def buses(names: Any, volts: Any) -> Columns:
    """Return pandapower `bus` columns from names and nominal volts [V]."""
    n = len(names)
    return {
        "name": np.asarray(names, dtype=object),
        "vn_kv": volts / 1e3,
        "type": np.full(n, "b", dtype=object),
        "zone": np.full(n, None, dtype=object),
        "in_service": np.ones(n, dtype=bool),
        "geo": np.full(n, None, dtype=object),
    }


def sources(held: Any, volts: Any) -> Columns:
    """Return pandapower `ext_grid` columns; `held`: volts [V] of each bus, NaN without source."""
    at = np.flatnonzero(~np.isnan(held))
    n = len(at)
    return {
        "name": np.full(n, None, dtype=object),
        "bus": at,
        "vm_pu": held[at] / volts[at],
        "va_degree": np.zeros(n),
        "slack_weight": np.ones(n),
        "in_service": np.ones(n, dtype=bool),
        "controllable": np.ones(n, dtype=bool),
    }


def network_text(network: Network) -> str:
    """Return a network as the text of a pandapower JSON file, every float exact."""
    tables = {
        "bus": _table(network.bus),
        "trafo": _table(network.trafo),
        "ext_grid": _table(network.ext_grid),
    }
    content = {
        **tables,
        **FORMAT,
        "name": network.name,
        "note": network.note,
        "f_hz": network.f_hz,
        "sn_mva": network.sn_mva,
        "std_types": {kind: {} for kind in ("line", "trafo", "trafo3w", "line_dc", "fuse")},
    }
    return json.dumps(
        {"_module": "pandapower.auxiliary", "_class": "pandapowerNet", "_object": content},
        ensure_ascii=False,
        indent=1,
    )


def _table(columns: Columns) -> dict[str, Any]:
    names = list(columns)
    listed = [_plain(columns[name]) for name in names]
    rows = [list(row) for row in zip(*listed, strict=True)]
    body = {"columns": names, "index": list(range(len(rows))), "data": rows}
    return {
        "_module": "pandas.core.frame",
        "_class": "DataFrame",
        "_object": json.dumps(body, ensure_ascii=False),
        "orient": "split",
        "dtype": {name: _DTYPE.get(name, "float64") for name in names},
        "is_multiindex": False,
        "is_multicolumn": False,
    }


def _plain(column: np.ndarray[Any, Any]) -> list[Any]:
    items: list[Any] = column.tolist()
    return [None if isinstance(item, float) and np.isnan(item) else item for item in items]
