"""Load flows of many transformers at once, each an island of its own, by pandapower.

pandapower is imported when a network is loaded or solved, not before.
"""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from .errors import BranchwrightError

if TYPE_CHECKING:
    from pandas import DataFrame

#: the library takes this per unit on the network's own power; its own floor lies at about 1e-13
_FLOW_TOLERANCE_MVA = 1e-12
_MOST_ISLANDS = 3000


_POSITIVE = ("sn_mva", "vn_hv_kv", "vn_lv_kv", "vk_percent", "parallel")
#: what a file must hold to be proven
_NEEDED = {
    "bus": {"name", "vn_kv", "in_service"},
    "trafo": {"name", "hv_bus", "lv_bus", "shift_degree", "in_service", "vkr_percent", "pfe_kw",
              "i0_percent", *_POSITIVE},
}  # fmt: skip


@dataclass(frozen=True)
class Rows:
    """Transformer rows read back from a file: each with its two buses' names and kV.

    trafo has n rows; kv, names are (n, 2) for the HV and the LV bus; amp_factor is sqrt(3) for
    single-phase units, whose file says so.
    """

    trafo: DataFrame
    kv: np.ndarray[Any, Any]
    names: np.ndarray[Any, Any]
    amp_factor: np.ndarray[Any, Any]

    def take(self, at: Any) -> Rows:
        """Return the rows at these positions."""
        trafo = self.trafo.iloc[at].reset_index(drop=True)
        return Rows(trafo, self.kv[at], self.names[at], self.amp_factor[at])


@dataclass(frozen=True)
class Flow:
    """Results of one load flow a row, NaN where it found none: (n, 2) for HV and LV.

    vm [pu], va [deg] at the buses; p [MW], i [kA] into the transformer; why: (n,) text, what
    kept a row from a result.
    """

    vm: np.ndarray[Any, Any]
    va: np.ndarray[Any, Any]
    p: np.ndarray[Any, Any]
    i: np.ndarray[Any, Any]
    why: np.ndarray[Any, Any]


def read_network(path: Path) -> Any:
    """Load a network file with pandapower; one that it cannot read is refused by name."""
    import pandapower as pp

    try:
        net = pp.from_json(str(path))
        lacking = {name: _NEEDED[name] - set(net[name].columns) for name in _NEEDED}
    except Exception as error:  # an edited file can make the library raise anything
        text = f"{path}: is no network that pandapower reads ({type(error).__name__})"
        raise BranchwrightError([text]) from None
    if any(lacking.values()):
        listed = ", ".join(
            sorted(f"{table}.{c}" for table, names in lacking.items() for c in names)
        )
        raise BranchwrightError([f"{path}: lacks the columns {listed}"])
    return net


def quiet_runpp(net: Any, **options: Any) -> None:
    """Run a load flow; the library's own numerical warnings tell a planner nothing."""
    import pandapower as pp

    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        pp.runpp(net, numba=False, **options)


def sound(rows: Rows) -> np.ndarray[Any, Any]:
    """Return (n,) bool: rows whose numbers a load flow can take; others would spoil their chunk."""
    number = {
        name: pd.to_numeric(rows.trafo[name], errors="coerce").to_numpy(dtype=float)
        for name in (*_POSITIVE, "vkr_percent", "pfe_kw", "i0_percent", "shift_degree")
    }
    good = np.isfinite(rows.kv).all(axis=1) & (rows.kv > 0).all(axis=1)
    for name, column in number.items():
        good &= np.isfinite(column) & ((column > 0) | (name not in _POSITIVE))
    in_service = rows.trafo["in_service"].to_numpy() == True  # noqa: E712 - may be text or None
    return np.asarray(good & (number["vkr_percent"] <= number["vk_percent"]) & in_service)


def solve(
    rows: Rows,
    source: np.ndarray[Any, Any],
    shunt: np.ndarray[Any, Any] | None = None,
    current: np.ndarray[Any, Any] | None = None,
    angles: bool = False,
    near_rated: bool = True,
) -> Flow:
    """Solve each row as an island of its own, many islands a network.

    Parameters
    ----------
    rows : Rows
        n transformers.
    source : (n, 2) float
        Source volts at the HV and LV bus [pu of the bus], NaN for none.
    shunt, current : (n,) complex, optional
        Load at the LV bus [MVA, at its rated volts and its nominal volts]: constant impedance,
        or constant current.
    angles : bool
        Whether the transformers' phase shift is solved for.
    near_rated : bool
        Refuse volts outside 0.5 to 1.5 of the source's: the library knows false solutions there.

    Returns
    -------
    Flow
        NaN for islands without a solution, or whose power does not balance.
    """
    n = len(rows.trafo)
    good = sound(rows)
    why = np.where(good, "", "numbers that no load flow can take").astype(object)
    vm, va, p, i = np.full((4, n, 2), np.nan)
    out = Flow(vm, va, p, i, why)
    usable = np.flatnonzero(good)
    decade = np.floor(np.log10(rows.trafo["sn_mva"].to_numpy()[usable].astype(float)))
    for size in np.unique(decade):
        alike = usable[decade == size]
        for start in range(0, len(alike), _MOST_ISLANDS):
            at = alike[start : start + _MOST_ISLANDS]
            load = (None if shunt is None else shunt[at], None if current is None else current[at])
            _solve_chunk(rows, at, source[at], load, angles, near_rated, 10.0**size, out)
    return out


def _solve_chunk(
    rows: Rows,
    at: Any,
    source: Any,
    load: tuple[Any, Any],
    angles: bool,
    near_rated: bool,
    power: float,
    out: Flow,
) -> None:
    """Solve the islands `at`; where the library finds no solution, halve until it is one unit."""
    try:
        net = _islands(rows.take(at), source, load, power)
        quiet_runpp(
            net, check_connectivity=False, calculate_voltage_angles=angles,
            init="dc" if angles else "flat", tolerance_mva=_FLOW_TOLERANCE_MVA, max_iteration=60,
        )  # fmt: skip
    except Exception as error:  # an edited row can make the library raise anything
        out.why[at] = f"{type(error).__name__}: {error}"[:120]
        if len(at) > 1:
            for half in (slice(0, len(at) // 2), slice(len(at) // 2, None)):
                shunt, current = (None if part is None else part[half] for part in load)
                _solve_chunk(
                    rows, at[half], source[half], (shunt, current), angles, near_rated, power, out
                )
        return
    n = len(at)
    vm = net.res_bus["vm_pu"].to_numpy().reshape(2, n).T
    good = _balanced(net, n, power)
    if near_rated:
        share = vm / np.nanmax(source, axis=1)[:, None]
        good &= ((share > 0.5) & (share < 1.5)).all(axis=1)
    done = at[good]
    out.why[at] = "volts or powers that do not fit: no true solution"
    out.why[done] = ""
    out.vm[done] = vm[good]
    out.va[done] = net.res_bus["va_degree"].to_numpy().reshape(2, n).T[good]
    for result, name in ((out.p, "p_{}_mw"), (out.i, "i_{}_ka")):
        columns = [net.res_trafo[name.format(side)].to_numpy() for side in ("hv", "lv")]
        result[done] = np.stack(columns, axis=1)[good]


@cache
def _stand() -> tuple[Any, dict[str, DataFrame]]:
    """One network for all islands: making an empty one takes the library a quarter of a second."""
    import pandapower as pp

    net = pp.create_empty_network(add_stdtypes=False)
    return net, {name: net[name] for name in ("bus", "ext_grid", "shunt", "load")}


def _islands(rows: Rows, source: Any, load: tuple[Any, Any], power: float) -> Any:
    """Return a network of n islands: buses 0..n-1 are the HV, n..2n-1 the LV ones."""
    n = len(rows.trafo)
    kv = rows.kv.T.reshape(-1)
    held = source.T.reshape(-1)
    net, empty = _stand()
    net.sn_mva = power
    net.bus = _typed(
        empty["bus"], {"name": None, "vn_kv": kv, "type": "b", "in_service": True}, 2 * n
    )
    at = np.flatnonzero(~np.isnan(held))
    net.ext_grid = _typed(
        empty["ext_grid"],
        {"bus": at, "vm_pu": held[at], "va_degree": 0.0, "slack_weight": 1.0, "in_service": True},
        len(at),
    )
    trafo = rows.trafo.copy()
    for name in (*_POSITIVE[:-1], "vkr_percent", "pfe_kw", "i0_percent", "shift_degree"):
        trafo[name] = trafo[name].astype(float)  # text in another row makes a column of objects
    trafo["parallel"] = trafo["parallel"].astype("uint32")
    trafo["in_service"] = True
    trafo["hv_bus"] = np.arange(n, dtype="uint32")
    trafo["lv_bus"] = np.arange(n, 2 * n, dtype="uint32")
    net.trafo = trafo
    net.shunt, net.load = empty["shunt"], empty["load"]
    shunt, current = load
    lv = np.arange(n, 2 * n)
    if shunt is not None:
        rated = trafo["vn_lv_kv"].to_numpy()
        columns = {"bus": lv, "p_mw": shunt.real, "q_mvar": shunt.imag, "vn_kv": rated, "step": 1,
                   "max_step": 1, "in_service": True}  # fmt: skip
        net.shunt = _typed(empty["shunt"], columns, n)
    if current is not None:
        share = dict.fromkeys(("const_i_p_percent", "const_i_q_percent"), 100.0)
        none = dict.fromkeys(("const_z_p_percent", "const_z_q_percent"), 0.0)
        columns = {"bus": lv, "p_mw": current.real, "q_mvar": current.imag, "scaling": 1.0,
                   "in_service": True, **share, **none}  # fmt: skip
        net.load = _typed(empty["load"], columns, n)
    return net


def _typed(empty: DataFrame, columns: dict[str, Any], n: int) -> DataFrame:
    """Return n rows with the columns and types of a library table."""
    table = pd.DataFrame(index=pd.RangeIndex(n))
    for name, kind in empty.dtypes.items():
        value = columns.get(str(name), False if kind.kind == "b" else None)
        table[name] = pd.Series([value] * n if np.isscalar(value) or value is None else value,
                                index=table.index).astype(kind)  # fmt: skip
    return table


def _balanced(net: Any, n: int, power: float) -> np.ndarray[Any, Any]:
    """Return (n,) bool: what the sources feed into each island is what its elements take."""
    taken = np.zeros(2 * n, dtype=complex)
    flow = net.res_trafo
    taken[:n] += flow["p_hv_mw"].to_numpy() + 1j * flow["q_hv_mvar"].to_numpy()
    taken[n:] += flow["p_lv_mw"].to_numpy() + 1j * flow["q_lv_mvar"].to_numpy()
    for name in ("shunt", "load"):
        if len(net[name]):
            result = net[f"res_{name}"]
            taken[n:] += result["p_mw"].to_numpy() + 1j * result["q_mvar"].to_numpy()
    fed = net.res_ext_grid
    given = fed["p_mw"].to_numpy() + 1j * fed["q_mvar"].to_numpy()
    np.subtract.at(taken, net.ext_grid["bus"].to_numpy(), given)
    largest = np.abs(taken.reshape(2, n)).max(axis=0)
    return np.asarray(largest < 1e-9 * power * 10, dtype=bool)
