"""The one list of steps: Plant -> one wide table of units, from readings to per-unit branches.

No files, no solver. Columns ending in `_tested`, `_reference`, `_study` hold the three states of a
unit: at the short-circuit test's own winding temperature, at the certificate's reference
temperature and at the study's. All per-unit columns are on the unit's own base (rated power of
the study's stage, rated volts) but those ending in `_system`.
"""

from __future__ import annotations

import numpy as np

from . import circuit, gates, perunit
from .errors import Finding
from .gather import gather
from .plant import Mask, Plant, Status, Step, Table
from .reduction import open_circuit, resistance, short_circuit, temperature

STATES = ("tested", "reference", "study")
MODELS = ("T", "cantilever")


def run(plant: Plant, model: str = "T") -> tuple[Table, list[Finding]]:
    """Carry every unit from readings to its branch.

    Parameters
    ----------
    plant : Plant
        N transformers with their tests.
    model : str
        `T` (exact) or `cantilever` (shunt at the from terminals, z_sc and y_oc as they stand).

    Returns
    -------
    units : Table
        The units that passed the gates, in input order.
    findings : list of Finding
        An error for each unit that did not.
    """
    units = gather(plant)
    passed, findings = gates.check(plant, units)
    units = units.take(np.flatnonzero(passed))
    reduce_short_circuit(units)
    reduce_open_circuit(units)
    carry_to_temperatures(units)
    make_circuit(units, model)
    to_system_base(units)
    return units, findings


def reduce_open_circuit(units: Table) -> None:
    """Open-circuit readings -> y_oc."""
    fed = units["oc_from"] == 1
    units.set("oc_rated_volts", np.where(fed, units["u_hv"], units["u_lv"]))
    units.set("oc_rated_amps", np.where(fed, units["i_hv"], units["i_lv"]))
    units.put("p0", open_circuit.no_load_loss_at_rated_volts,
              p="oc_watts", u="oc_volts", u_r="oc_rated_volts")  # fmt: skip
    units.put("i0_amps", open_circuit.no_load_current_at_rated_volts,
              i="oc_amps", u="oc_volts", u_r="oc_rated_volts")  # fmt: skip
    units.put("i0", open_circuit.no_load_current_per_unit, i_0="i0_amps", i_r="oc_rated_amps")
    units.put("g_oc", open_circuit.shunt_conductance, p_0="p0", s="s")
    # within the printed digits i0 may be less than any circuit draws: no magnetising branch is left
    units.put("i0_least", open_circuit.least_no_load_current, g="g_oc", x="x")
    limit = units["i0"] < units["i0_least"]
    units.set("no_magnetising", limit)
    units.put("i0", open_circuit.least_no_load_current, where=limit, at_least=Status.ASSUMED,
              g="g_oc", x="x")  # fmt: skip
    units.put("b_oc", open_circuit.shunt_susceptance, i_0="i0", g="g_oc")
    units.put("y_oc", open_circuit.admittance, g="g_oc", b="b_oc")
    units.put("oc_amps", circuit.test_amps, where=limit, at_least=Status.ASSUMED, y="y_oc",
              u="oc_volts", u_r="oc_rated_volts", i_r="oc_rated_amps")  # fmt: skip


def reduce_short_circuit(units: Table) -> None:
    """Short-circuit readings -> z_sc at the test's own temperature."""
    fed = units["sc_from"] == 1
    units.set("sc_rated_volts", np.where(fed, units["u_hv"], units["u_lv"]))
    units.set("sc_rated_amps", np.where(fed, units["i_hv"], units["i_lv"]))
    units.put("pk_tested", short_circuit.load_loss_at_rated_current,
              p="sc_watts", i="sc_amps", i_r="sc_rated_amps")  # fmt: skip
    units.put("uk_volts", short_circuit.impedance_volts_at_rated_current,
              u="sc_volts", i="sc_amps", i_r="sc_rated_amps")  # fmt: skip
    units.put("uk_tested", short_circuit.impedance_voltage, u_k="uk_volts", u_r="sc_rated_volts")
    units.put("r_tested", short_circuit.series_resistance, p_k="pk_tested", s="s")
    units.put("x", short_circuit.series_reactance, z="uk_tested", r="r_tested")


def carry_to_temperatures(units: Table) -> None:
    """Load loss and z_sc at the test's, the reference and the study's temperature."""
    units.set("t_tested", units["sc_temperature"], units.status["sc_temperature"])
    whole = ~gates.separable(units)
    moved = gates.needs_temperature(units)
    for side in ("hv", "lv"):
        units.put(f"r_star_tested_{side}", resistance.resistance_at_temperature,
                  r=f"r_star_{side}", t=f"t_{side}", t_new="t_tested", k=f"k_{side}")  # fmt: skip
        units.put(f"p_{side}_tested", resistance.ohmic_loss,
                  i_r=f"i_{side}", r=f"r_star_tested_{side}", phases="phases")  # fmt: skip
    # without both resistances the whole loss is taken as I²R, shared by the sides' constants
    half = np.where(moved, np.uint8(Status.ASSUMED), units.status["pk_tested"])
    for side in ("hv", "lv"):
        units.values[f"p_{side}_tested"] = np.where(
            whole, units["pk_tested"] / 2, units[f"p_{side}_tested"]
        )
        units.status[f"p_{side}_tested"] = np.where(
            whole, half, units.status[f"p_{side}_tested"]
        ).astype(np.uint8)
    units.put("p_stray_tested", temperature.stray_loss,
              p_k="pk_tested", p_hv="p_hv_tested", p_lv="p_lv_tested")  # fmt: skip
    for state in ("reference", "study"):
        t_new = f"t_{state}"
        same = units[t_new] == units["t_tested"]
        for side in ("hv", "lv"):
            units.put(f"p_{side}_{state}", temperature.ohmic_loss_at_temperature,
                      p=f"p_{side}_tested", t="t_tested", t_new=t_new, k=f"k_{side}")  # fmt: skip
        units.put(f"p_stray_{state}", temperature.stray_loss_at_temperature,
                  p="p_stray_tested", t="t_tested", t_new=t_new, k="k_stray")  # fmt: skip
        units.put(f"pk_{state}", temperature.load_loss, p_hv=f"p_hv_{state}",
                  p_lv=f"p_lv_{state}", p_stray=f"p_stray_{state}")  # fmt: skip
        units.overwrite(f"pk_{state}", "pk_tested", same)
        # a loss that is not carried still rests on both temperatures being what they are said to be
        rests_on = units.worst((f"pk_{state}", "t_tested", t_new))
        units.status[f"pk_{state}"] = np.where(units.has(f"pk_{state}"), rests_on, Status.ABSENT)
        units.status[f"pk_{state}"] = units.status[f"pk_{state}"].astype(np.uint8)
        units.put(f"r_{state}", short_circuit.series_resistance, p_k=f"pk_{state}", s="s")
    for state in STATES:
        units.put(f"z_sc_{state}", short_circuit.impedance, r=f"r_{state}", x="x")


def make_circuit(units: Table, model: str) -> None:
    """z_sc and y_oc -> the circuit of each state: series, shunt, legs, and chain constants."""
    _share(units, model)
    unequal = units["r_share_from"] != units["x_share_from"]
    fed = units["oc_from"] == 1
    for state in STATES:
        if model == "T":
            units.put("leg", circuit.exact_t_leg, z_sc=f"z_sc_{state}", y_oc="y_oc")
            units.put(f"z_t_{state}", circuit.exact_t_series, z_leg="leg")
            _unequal(units, state, unequal)
        else:
            units.set(f"z_t_{state}", units[f"z_sc_{state}"], units.status[f"z_sc_{state}"])
            units.set(f"y_m_{state}", units["y_oc"], units.status["y_oc"])
        for side in ("from", "to"):
            units.put(f"z_{side}_{state}", circuit.leg, z=f"z_t_{state}",
                      r_share=f"r_share_{side}", x_share=f"x_share_{side}")  # fmt: skip
        if model == "T":
            for where, side in ((~fed, "to"), (fed, "from")):
                units.put(f"y_m_{state}", circuit.exact_t_shunt, where=where,
                          y_oc="y_oc", z_leg=f"z_{side}_{state}")  # fmt: skip
    units.put("chain_a", circuit.chain_a, z_from="z_from_study", y_m="y_m_study")
    units.put("chain_b", circuit.chain_b, z_from="z_from_study", z_to="z_to_study",
              y_m="y_m_study")  # fmt: skip


def _share(units: Table, model: str) -> None:
    """Shares of the from side in r and x: halves, r by the resistances, or none (cantilever)."""
    share = 0.5 if model == "T" else 0.0
    units.set("x_share_from", share)
    units.set("r_share_from", share)
    if model == "T":
        units.put("r_share_from", resistance.share_of_loss,
                  where=units.word("split") == "resistances",
                  p="p_hv_tested", p_other="p_lv_tested")  # fmt: skip
    for part in ("r", "x"):
        units.set(f"{part}_share_to", 1 - units[f"{part}_share_from"])


def _unequal(units: Table, state: str, where: Mask) -> None:
    """Solve the T of the rows whose legs are unequal; the re-run of both tests proves it."""
    rows = np.flatnonzero(where)
    if not len(rows):
        return
    part = units.take(rows)
    solved = units[f"z_t_{state}"].copy()
    solved[rows] = circuit.exact_t_unequal(
        part[f"z_sc_{state}"], part["y_oc"], part["r_share_from"], part["x_share_from"],
        part["oc_from"] == 1, part["sc_from"] == 1,
    )  # fmt: skip
    units.values[f"z_t_{state}"] = solved
    # a solver is no formula: what is logged is the relation that it solves
    legs = (("z_a", f"z_from_{state}"), ("z_b", f"z_to_{state}"), ("y_m", f"y_m_{state}"))
    relation = f"z_sc_{state} where the legs are unequal, fed from HV"
    units.log(Step(relation, circuit.short_circuit_impedance, legs))


def to_system_base(units: Table) -> None:
    """The study's circuit on the system base, at the to side, and the off-nominal ratio."""
    units.put("z_system", perunit.series_to_base, z="z_t_study", s="s", s_new="s_system",
              u="u_lv", u_new="base_to")  # fmt: skip
    units.put("y_system", perunit.shunt_to_base, y="y_m_study", s="s", s_new="s_system",
              u="u_lv", u_new="base_to")  # fmt: skip
    units.put("ratio", perunit.off_nominal_ratio, u_from="u_hv", u_to="u_lv",
              base_from="base_from", base_to="base_to")  # fmt: skip
    units.set("shift_deg", 30.0 * units["clock"])
