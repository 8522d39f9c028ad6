"""The written network, run by pandapower, against two other programs and a nodal solution.

Readings of invented units go through the program into a network file. The other programs are fed
from the units themselves: PyPSA with the known T, power-grid-model with the exact pi of the same
two tests (a reciprocal symmetric two-port has one T and one pi). The row with plate values typed
straight in must not agree.
"""

from functools import cache
from typing import NamedTuple

import numpy as np
import pandapower as pp
import power_grid_model as pgm
import pypsa
import pytest
from forward import Side, Test, Unit, amps, solve, volts
from strategies import plant_of

from convert import chain, entries

CLOSE = 1e-9
STUDY = 75.0
BASE = 10e6
#: load fraction and angle: light, rated lagging, over rated, nearly pure lead, none
LOADS = [(0.2, 0.3), (1.0, np.arccos(0.8)), (1.3, 0.0), (0.7, -1.2), (0.0, 0.0)]


def unit(name, hv, lv, clock, power, z, y, **conditions):
    """Invented: z and y in per unit at 20 °C; a fifth of the resistance is stray."""
    unit = Unit(hv, lv, power, 0.0, 0.0, 0.0, 0.0, 1 if hv.connection == "I" else 3, clock)
    base = unit.ohm_base
    half = 0.4 * z.real * base
    hv_ohms = half * (3 if hv.connection == "D" else 1)
    lv_ohms = half / unit.ratio**2 * (3 if lv.connection == "D" else 1)
    made = Unit(
        hv=Side(hv.volts, hv.connection, hv_ohms, "copper", hv.nominal, hv.across),
        lv=Side(lv.volts, lv.connection, lv_ohms, "aluminium", lv.nominal, lv.across),
        power=power, stray=0.2 * z.real * base, x=z.imag * base, g=y.real / base,
        b=-y.imag / base, phases=unit.phases, clock=clock,
    )  # fmt: skip
    conditions = {"temperature": 31.0, "ohms_at": (19.0, 22.0)} | conditions
    return Test(made, name=name, **conditions)


def three(volts_rated, connection, nominal):
    return Side(volts_rated, connection, 1.0, nominal=nominal)


STATION = [
    unit("A", three(66e3, "YN", 69e3), three(11.55e3, "D", 11e3), 11, 20e6,
         0.005 + 0.104j, 0.0008 - 0.004j, sc_amps=131.0),
    unit("B", three(33e3, "D", 33e3), three(415.0, "YN", 400.0), 1, 1.5e6,
         0.011 + 0.0592j, 0.0017 - 0.012j, fed="lv", sc_amps=1500.0),
    unit("C", three(10.5e3, "Y", 11e3), three(3.3e3, "YN", 3.3e3), 6, 5e6,
         0.008 + 0.07j, 0.003 - 0.05j, energised="hv", oc_volts=9.9e3),
    unit("D", three(20e3, "D", 20e3), three(400.0, "YN", 400.0), 5, 400e3,
         0.0115 + 0.038j, 0.0023 - 0.018j),
]  # fmt: skip
FEEDER = [
    unit("E", Side(12.7e3, "I", 1.0, nominal=22e3, across="line and neutral"),
         Side(250.0, "I", 1.0, nominal=240.0), 0, 50e3, 0.016 + 0.03j, 0.004 - 0.02j),
    unit("F", Side(11e3, "I", 1.0, nominal=11e3), Side(240.0, "I", 1.0, nominal=250.0),
         6, 25e3, 0.02 + 0.025j, 0.006 - 0.03j),
]  # fmt: skip


class Flow(NamedTuple):
    """LV volts [pu of the busbar, HV at angle 0] and loss [pu of the rated power], (units, loads).

    `taken`: complex power of each load [pu of the rated power].
    """

    volts: np.ndarray
    loss: np.ndarray


def power(k, angle):
    return k * np.exp(1j * angle)


def nominal(test):
    """Volts of the busbars across the terminals used."""
    sides = (test.unit.hv, test.unit.lv)
    return [side.nominal / (np.sqrt(3) if side.across == "line and neutral" else 1)
            for side in sides]  # fmt: skip


# --- the network as written, and with plate values ----------------------------------------------


def written(tests):
    """Text of the network file of the tests."""
    plant = plant_of(tests, study=STUDY, base=BASE, sources=True)
    units, findings = chain.run(plant)
    assert not findings
    if tests[0].unit.phases == 1:
        return entries.network_text(entries.single_phase_network(plant, units, "feeder"))
    return entries.network_text(entries.three_phase_network(plant, units, "station")[0])


def library(tests, plate=False):
    net = pp.from_json_string(written(tests))
    if plate:
        z, y = terminal(tests)
        net.trafo["vk_percent"], net.trafo["vkr_percent"] = 100 * np.abs(z), 100 * z.real
        net.trafo["i0_percent"] = 100 * np.abs(y)
        net.trafo["pfe_kw"] = 1e3 * net.trafo["sn_mva"] * y.real
    rating = net.trafo["sn_mva"].to_numpy()
    lv = net.trafo["lv_bus"].to_numpy()
    for bus in lv:
        pp.create_load(net, bus, 0.0, 0.0)
    flows = []
    for load in LOADS:
        net.load["p_mw"] = rating * power(*load).real
        net.load["q_mvar"] = rating * power(*load).imag
        # from the direct-current angles: a flat start finds a false solution at 150° and 180°
        pp.runpp(net, numba=False, calculate_voltage_angles=True, init="dc", trafo_model="t",
                 tolerance_mva=1e-12, max_iteration=60)  # fmt: skip
        bus = net.res_bus.loc[lv]
        assert bus["vm_pu"].between(0.5, 1.5).all()
        turned = np.exp(1j * np.radians(bus["va_degree"].to_numpy()))
        flows.append((bus["vm_pu"].to_numpy() * turned, net.res_trafo["pl_mw"] / rating))
    return Flow(*(np.array(part).T for part in zip(*flows, strict=True)))


# --- the other programs -------------------------------------------------------------------------


def terminal(tests):
    """z_sc at the study's temperature and y_oc, per unit of each unit."""
    z = [test.unit.z(STUDY) / test.unit.ohm_base for test in tests]
    return np.array(z), np.array([test.unit.y * test.unit.ohm_base for test in tests])


def by_t(tests):
    """PyPSA, whose transformer takes series and shunt on its rating and the busbars' volts."""
    net = pypsa.Network()
    net.set_snapshots(range(len(LOADS)))
    for test in tests:
        unit, t = test.unit, test.per_unit(STUDY)
        (hv, lv), mva = nominal(test), unit.power / 1e6
        square = (unit.lv.volts / lv) ** 2
        for side, kv in (("hv", hv / 1e3), ("lv", lv / 1e3)):
            net.add("Bus", f"{test.name} {side}", v_nom=kv)
        net.add("Generator", test.name, bus=f"{test.name} hv", control="Slack")
        net.add("Transformer", test.name, bus0=f"{test.name} hv", bus1=f"{test.name} lv",
                model="t", s_nom=mva, r=t.z.real * square, x=t.z.imag * square,
                g=t.y.real / square, b=t.y.imag / square, tap_side=0,
                tap_ratio=unit.ratio * lv / hv, phase_shift=30.0 * unit.clock)  # fmt: skip
        wanted = [mva * power(*load) for load in LOADS]
        net.add("Load", test.name, bus=f"{test.name} lv", p_set=np.real(wanted),
                q_set=np.imag(wanted))  # fmt: skip
    net.lpf()  # a flat start does not find a shift of 150° and more
    solved = net.pf(x_tol=1e-12, use_seed=True)
    assert solved["converged"].all(axis=None)
    lv = [f"{test.name} lv" for test in tests]
    turned = np.exp(1j * net.buses_t.v_ang[lv].to_numpy())
    lost = (net.transformers_t.p0 + net.transformers_t.p1)[[test.name for test in tests]]
    rating = np.array([test.unit.power / 1e6 for test in tests])
    return Flow((net.buses_t.v_mag_pu[lv].to_numpy() * turned).T, (lost.to_numpy() / rating).T)


def by_pi(tests):
    """power-grid-model with the exact pi: u = Ysc(1 - sqrt(1 - Yoc/Ysc)), z = 1/(Ysc - u), y = 2u.

    Its shunt stands half at each end, at the terminals' own volts.
    """
    z_sc, y_oc = terminal(tests)
    # u = Ysc(1 - sqrt(1 - Yoc/Ysc)), written as a quotient that keeps its digits
    u = y_oc / (1 + np.sqrt(1 - y_oc * z_sc))
    z, y = 1 / (1 / z_sc - u), 2 * u
    n = len(tests)
    at = np.arange(n)
    volts_at = np.array([nominal(test) for test in tests])
    rating = np.array([test.unit.power for test in tests])
    node = pgm.initialize_array("input", "node", 2 * n)
    node["id"], node["u_rated"] = np.arange(2 * n), volts_at.T.reshape(-1)
    source = pgm.initialize_array("input", "source", n)
    source["id"], source["node"], source["status"], source["u_ref"] = 2 * n + at, at, 1, 1.0
    source["sk"] = 1e40  # as good as ideal
    load = pgm.initialize_array("input", "sym_load", n)
    load["id"], load["node"], load["status"] = 3 * n + at, n + at, 1
    load["type"] = pgm.LoadGenType.const_power
    row = pgm.initialize_array("input", "transformer", n)
    row["id"], row["from_node"], row["to_node"] = 4 * n + at, at, n + at
    row["from_status"] = row["to_status"] = 1
    row["u1"], row["u2"] = np.array([(t.unit.hv.volts, t.unit.lv.volts) for t in tests]).T
    row["sn"], row["uk"], row["pk"] = rating, np.abs(z), z.real * rating
    row["i0"], row["p0"] = np.abs(y), y.real * rating
    row["clock"] = [test.unit.clock for test in tests]
    # windings of no meaning to a balanced flow but that they can make the clock
    row["winding_from"] = pgm.WindingType.wye
    odd = np.array([test.unit.clock % 2 == 1 for test in tests])
    row["winding_to"] = np.where(odd, pgm.WindingType.delta, pgm.WindingType.wye)
    row["tap_side"], row["tap_size"] = pgm.BranchSide.from_side, 0.0
    row["tap_pos"] = row["tap_min"] = row["tap_max"] = 0
    flows = []
    for each in LOADS:
        wanted = rating * power(*each)
        load["p_specified"], load["q_specified"] = wanted.real, wanted.imag
        model = pgm.PowerGridModel(
            {"node": node, "source": source, "sym_load": load, "transformer": row}
        )
        found = model.calculate_power_flow(error_tolerance=1e-14, max_iterations=60)
        bus = found["node"][n:]
        lost = found["transformer"]["p_from"] + found["transformer"]["p_to"]
        flows.append((bus["u_pu"] * np.exp(1j * bus["u_angle"]), lost / rating))
    return Flow(*(np.array(part).T for part in zip(*flows, strict=True)))


# --- the comparison -----------------------------------------------------------------------------


def largest(found, wanted):
    """Largest difference of the volts [pu], and of the loss [its own share], over the units."""
    by_volts = np.abs(found.volts - wanted.volts).max(axis=1)
    return by_volts, np.abs(found.loss / wanted.loss - 1).max(axis=1)


def agree(found, wanted):
    return all((difference <= CLOSE).all() for difference in largest(found, wanted))


STATIONS = {"station": STATION, "feeder": FEEDER}
known = cache(lambda oracle, name: oracle(STATIONS[name]))


@pytest.mark.parametrize("name", list(STATIONS))
@pytest.mark.parametrize("oracle", [by_t, by_pi])
def test_another_program_gives_the_volts_and_losses_of_the_written_network(oracle, name):
    found, wanted = library(STATIONS[name]), known(oracle, name)
    assert agree(found, wanted), largest(found, wanted)


@pytest.mark.parametrize("name", list(STATIONS))
@pytest.mark.parametrize("oracle", [by_t, by_pi])
def test_plate_values_typed_straight_in_fail_the_same_check(oracle, name):
    found, wanted = library(STATIONS[name], plate=True), known(oracle, name)
    assert not agree(found, wanted)
    # every unit by itself, and by far more than a rounding
    assert (np.maximum(*largest(found, wanted)) > 1e3 * CLOSE).all()


@pytest.mark.parametrize("fed", ["hv", "lv"])
def test_unlike_legs_which_neither_program_has_against_the_nodal_solution(fed):
    # LV volts and the load's amps of the written network drive the known T: HV must be at 1 pu
    shares = []
    for test in STATION:
        conditions = {"fed": fed, "sc_amps": 0.0, "split": "resistances"}
        lv = Side(**{**vars(test.unit.lv), "metal": "copper", "ohms": test.unit.lv.ohms * 0.4})
        changed = Unit(**{**vars(test.unit), "lv": lv})
        shares.append(test.at(unit=changed, **conditions))
    flow = library(shares)
    for row, test in enumerate(shares):
        hv, lv = (value / np.sqrt(3) for value in nominal(test))
        lag = np.exp(1j * np.radians(30.0 * test.unit.clock))
        found = flow.volts[row] * lag * lv  # as the star sees it, without its clock
        taken = np.array([power(*load) for load in LOADS]) * test.unit.power / 3
        state = solve(test.circuit(STUDY), volts(hv), amps(-np.conj(taken / found)))
        np.testing.assert_allclose(state.volts["lv"], found, rtol=CLOSE)
        lost = 3 * (state.power("hv") + state.power("lv")).real / test.unit.power
        np.testing.assert_allclose(flow.loss[row], lost, rtol=CLOSE)
