"""Branch table and network files, held against the library's own admittances, checks and tables."""

import json
import subprocess
import sys
from importlib import import_module
from pathlib import Path
from types import SimpleNamespace

import branch_reader
import numpy as np
import pandapower as pp
import pandera.pandas as pa
import pytest
from pandapower.diagnostic import Diagnostic

from convert import build, read
from convert.entries import three_phase_network
from convert.plant import Plant
from convert.study import Study, examine

FILES = ("network.json", "single_phase.json")
BRANCHES = "branches.csv"
TABLES = ("bus", "trafo", "ext_grid")
HEAD = """\
# Invented data: no real station, unit or maker.
station: {name: Fixture station}
system: {base_power: 100 MVA, frequency: 50 Hz, study_temperature: 75 °C,
         load_fractions: [50 %, 100 %], power_factors: [0.8 lagging, "1", 0.9 leading]}
busbars:
  Hill 33: {nominal_voltage: 33 kV, source_voltage: 33.5 kV}
  Hill 33 spare: {nominal_voltage: 33 kV}
  Mill 11: {nominal_voltage: 11 kV}
  Dale 11: {nominal_voltage: 11 kV}
  Lane 11: {nominal_voltage: 11 kV}
  Yard 0.4: {nominal_voltage: 0.4 kV}
  Farm 0.4: {nominal_voltage: 0.4 kV}
  Pump 0.4: {nominal_voltage: 0.4 kV}
  Hut 0.24: {nominal_voltage: 0.24 kV}
  Shed 0.48: {nominal_voltage: 0.48 kV}
transformers:
"""
#: a unit of each kind: two cooling stages and YNd11; off-nominal, split by resistances and Dyn1;
#: tests from the opposite sides and Dyn11; results only and Yyn0; assumed only and Yzn5;
#: single-phase to neutral, reversed (Ii6) and line to line
UNITS = {
    "Staged": """
    certificate: {number: C-1, serial: 001, standard: IEC 60076-1}
    phases: 3
    vector_group: YNd11
    cooling_stages: {ONAN: 10 MVA, ONAF: 12.5 MVA}
    study_stage: ONAF
    hv: {busbar: Hill 33, rated_voltage: 33 kV, metal: copper}
    lv: {busbar: Mill 11, rated_voltage: 11 kV, metal: copper}
    tests:
      open_circuit:
        - {energised: lv, volts: 11.00 kV, amps: [2.81 A, 2.30 A, 2.84 A], watts: 9.12 kW}
      short_circuit:
        - {fed: hv, volts: 1.765 kV, amps: 130.0 A, watts: 21.20 kW, temperature: 24 °C}
      resistance:
        - {side: hv, between: line and line, ohms: 0.302 ohm, temperature: 21 °C}
        - {side: lv, between: line and line, ohms: 33.6 mohm, temperature: 21 °C}
""",
    "Split": """
    certificate: {number: C-2, serial: 002, standard: IEEE C57.12.00}
    phases: 3
    vector_group: Dyn1
    rated_power: 5 MVA
    hv: {busbar: Hill 33, rated_voltage: 34.5 kV, metal: copper}
    lv: {busbar: Dale 11, rated_voltage: 11.6 kV, metal: aluminium}
    split: resistances
    tests:
      open_circuit: [{energised: lv, volts: 11.45 kV, amps: 1.62 A, watts: 5.21 kW}]
      short_circuit:
        - {fed: hv, volts: 1.702 kV, amps: 60.2 A, watts: 17.1 kW, temperature: 28 °C}
      resistance:
        - {side: hv, between: winding, ohms: 1.62 ohm, temperature: 20 °C}
        - {side: lv, between: winding, ohms: 58.1 mohm, temperature: 22 °C}
""",
    "Opposite": """
    certificate: {number: C-3, standard: IEC 60076-1}
    phases: 3
    vector_group: Dyn11
    rated_power: 500 kVA
    hv: {busbar: Mill 11, rated_voltage: 11 kV, metal: aluminium}
    lv: {busbar: Yard 0.4, rated_voltage: 433 V, metal: aluminium}
    tests:
      open_circuit:
        - {energised: hv, volts: 10.80 kV, amps: 0.334 A, watts: [300 W, 310 W, 331 W]}
      short_circuit:
        - {fed: lv, volts: 15.42 V, amps: 501 A, watts: 3.10 kW, temperature: 19 °C}
""",
    "Given": """
    phases: 3
    vector_group: Yyn0
    rated_power: 200 kVA
    hv: {busbar: Dale 11, rated_voltage: 11 kV}
    lv: {busbar: Farm 0.4, rated_voltage: 415 V}
    results: {load_loss: 2.65 kW, impedance_voltage: 4.02 %, temperature: 75 °C,
              no_load_loss: 431 W, no_load_current: 1.72 %}
""",
    "Assumed": """
    phases: 3
    vector_group: Yzn5
    rated_power: 100 kVA
    hv: {busbar: Lane 11, rated_voltage: 11 kV}
    lv: {busbar: Pump 0.4, rated_voltage: 0.4 kV}
    assume: {load_loss: 1.75 kW, impedance_voltage: 4 %, temperature: 75 °C,
             no_load_loss: 320 W, no_load_current: 2.5 %}
""",
    "Neutral": """
    certificate: {number: C-6, standard: IEC 60076-1}
    phases: 1
    vector_group: Ii0
    rated_power: 25 kVA
    hv: {busbar: Dale 11, rated_voltage: 6.35 kV, across: line and neutral, metal: copper}
    lv: {busbar: Hut 0.24, rated_voltage: 250 V, across: line and line, metal: aluminium}
    tests:
      open_circuit: [{energised: lv, volts: 250 V, amps: 1.52 A, watts: 83 W}]
      short_circuit:
        - {fed: hv, volts: 190.2 V, amps: 3.94 A, watts: 402 W, temperature: 18 °C}
""",
    "Reversed": """
    phases: 1
    vector_group: Ii6
    rated_power: 50 kVA
    hv: {busbar: Dale 11, rated_voltage: 6.35 kV, across: line and neutral}
    lv: {busbar: Hut 0.24, rated_voltage: 240 V, across: line and line}
    results: {load_loss: 590 W, impedance_voltage: 3.3 %, temperature: 75 °C,
              no_load_loss: 131 W, no_load_current: 1.4 %}
""",
    "Line": """
    phases: 1
    vector_group: Ii0
    rated_power: 100 kVA
    hv: {busbar: Lane 11, rated_voltage: 11 kV, across: line and line, metal: copper}
    lv: {busbar: Shed 0.48, rated_voltage: 500 V, across: line and line, metal: copper}
    split: resistances
    tests:
      open_circuit: [{energised: hv, volts: 11.0 kV, amps: 0.142 A, watts: 222 W}]
      short_circuit:
        - {fed: lv, volts: 14.2 V, amps: 150 A, watts: 652 W, temperature: 22 °C}
      resistance:
        - {side: hv, ohms: 5.48 ohm, temperature: 20 °C}
        - {side: lv, ohms: 11.3 mohm, temperature: 20 °C}
""",
}


def plant(folder: Path, units: dict[str, str] = UNITS, head: str = HEAD) -> Plant:
    """Read a sheet of these units, each text being the block below its name."""
    sheet = folder / "station.yaml"
    text = head + "".join(f"  {name}:{block}" for name, block in units.items())
    sheet.write_text(text, encoding="utf-8")
    return read(sheet)


# --- the files of one study, either model ---------------------------------------------------------


@pytest.fixture(scope="module")
def made(tmp_path_factory) -> dict[str, SimpleNamespace]:
    found = {}
    for model in ("T", "cantilever"):
        home = tmp_path_factory.mktemp(model)
        study: Study = build(plant(home), model=model)
        study.write(home / "out")
        nets = {name: pp.from_json(str(home / "out" / name)) for name in FILES}
        found[model] = SimpleNamespace(folder=home / "out", study=study, nets=nets, model=model)
    return found


@pytest.fixture(params=["T", "cantilever"])
def written(request, made) -> SimpleNamespace:
    return made[request.param]


def raw(folder: Path, file: str, table: str) -> list[dict]:
    """Rows of a table as they stand in the file, read with the standard library."""
    part = json.loads((folder / file).read_text(encoding="utf-8"))["_object"][table]
    body = json.loads(part["_object"])
    return [dict(zip(body["columns"], row, strict=True)) for row in body["data"]]


def test_units_of_every_kind_are_proven_with_either_circuit(written):
    study = written.study
    assert study.left_out == []
    assert study.passed
    assert set(study.retest["name"]) == {*UNITS, *FILES}
    far = study.retest.query("test == 'open circuit' and certificate == ''")
    assert far["name"].nunique() == len(UNITS)  # the open side's volts are compared too


@pytest.mark.parametrize("file", FILES)
def test_branches_alone_rebuild_the_admittances_that_the_library_makes_of_the_file(written, file):
    net = written.nets[file]
    pp.runpp(net, numba=False, calculate_voltage_angles=True)
    inside, bus = net._ppc["internal"], net._pd2ppc_lookups["bus"]
    branches = {branch.name: branch for branch in branch_reader.read(written.folder / BRANCHES)}
    total = np.zeros(inside["Ybus"].shape, dtype=complex)
    for at, unit in enumerate(net.trafo.itertuples()):
        ends = [bus[unit.hv_bus], bus[unit.lv_bus]]
        library = np.array(
            [inside["Yf"][at, ends].toarray()[0], inside["Yt"][at, ends].toarray()[0]]
        )
        rebuilt = np.array(branches[unit.name].y)
        np.testing.assert_allclose(rebuilt, library, rtol=1e-12, err_msg=unit.name)
        total[np.ix_(ends, ends)] += rebuilt
    np.testing.assert_allclose(total, inside["Ybus"].toarray(), rtol=1e-12, atol=0)


@pytest.mark.parametrize("file", FILES)
def test_branches_name_the_base_and_the_busbars_of_the_file(written, file):
    net = written.nets[file]
    branches = {branch.name: branch for branch in branch_reader.read(written.folder / BRANCHES)}
    assert sum(len(net.trafo) for net in written.nets.values()) == len(branches) == len(UNITS)
    for unit in net.trafo.itertuples():
        branch, ends = branches[unit.name], net.bus.loc[[unit.hv_bus, unit.lv_bus]]
        assert branch.base == (pytest.approx(net.sn_mva, rel=1e-15), *ends.vn_kv)
        own = f"{unit.name}: " if file == "single_phase.json" else ""
        assert tuple(ends.name) == tuple(own + name for name in branch.ends)


def test_the_admittances_of_given_results_show_those_results(made):
    """Outside anchor: what the sheet gives in percent and watts, seen at the rebuilt terminals."""
    given = {
        "Given": (0.2, 2.65e-3, 4.02, 431e-6, 1.72),
        "Reversed": (0.05, 590e-6, 3.3, 131e-6, 1.4),
    }
    kv = {"Given": (11.0, 0.415), "Reversed": (6.35, 0.24)}
    for branch in branch_reader.read(made["T"].folder / BRANCHES):
        if branch.name not in given:
            continue
        rating, load_loss, percent, no_load_loss, no_load_percent = given[branch.name]
        (y_ff, y_ft), (y_tf, y_tt) = branch.y
        base, kv_from, kv_to = branch.base
        rated_from, rated_to = kv[branch.name]
        z_fed = 1 / y_ff * kv_from**2 / base  # ohm from HV, LV shorted
        own = rated_from**2 / rating
        assert abs(z_fed) / own == pytest.approx(percent / 100, rel=1e-12)
        assert z_fed.real / own == pytest.approx(load_loss / rating, rel=1e-12)
        y_fed = (y_tt - y_tf * y_ft / y_ff) * base / kv_to**2  # siemens from LV, HV open
        assert abs(y_fed) * rated_to**2 / rating == pytest.approx(no_load_percent / 100, rel=1e-9)
        assert y_fed.real * rated_to**2 == pytest.approx(no_load_loss, rel=1e-9)


# --- what the library thinks of the files ---------------------------------------------------------


@pytest.mark.parametrize("file", FILES)
def test_the_diagnostic_finds_nothing(written, file):
    # the keyword makes the nominal-voltage check run at all; its own faults hide in diag_errors
    diagnostic = Diagnostic()
    net = pp.from_json(str(written.folder / file))
    found = diagnostic.diagnose_network(net, report_style=None, nom_voltage_tolerance=0.3)
    assert diagnostic.diag_errors == {}
    assert found == {}


@pytest.mark.parametrize("file", FILES)
@pytest.mark.parametrize("table", TABLES)
def test_every_table_meets_the_library_s_own_schema(written, file, table):
    # the frame's own group checks refuse every network that the library itself makes, and
    # dtype("int64") its own uint32: only what the columns may hold is left
    schema = getattr(import_module(f"pandapower.network_schema.{table}"), f"{table}_schema")
    columns = pa.DataFrameSchema(schema.columns)
    try:
        columns.validate(written.nets[file][table], lazy=True)
    except pa.errors.SchemaErrors as error:
        cases = error.failure_cases
        kept = cases[~cases["check"].astype(str).str.startswith("dtype(")]
        assert kept.empty, kept.to_string()


@pytest.mark.parametrize("table", TABLES)
def test_types_of_the_columns_are_those_of_the_library_s_creators(written, table):
    made = pp.create_empty_network()
    pp.create_bus(made, 11.0, name="a")
    pp.create_bus(made, 0.4, name="b")
    pp.create_ext_grid(made, 0)
    pp.create_transformer_from_parameters(
        made, 0, 1, sn_mva=1.0, vn_hv_kv=11.0, vn_lv_kv=0.4, vk_percent=4.0, vkr_percent=1.0,
        pfe_kw=1.0, i0_percent=1.0, vector_group="Dyn", oltc=False,
        leakage_resistance_ratio_hv=0.5, leakage_reactance_ratio_hv=0.5,
    )  # fmt: skip
    ours = {"printed_vector_group", "serial", "certificate"} if table == "trafo" else set()
    for net in written.nets.values():
        types = net[table].dtypes.to_dict()
        assert {name: str(types.pop(name)) for name in ours} == dict.fromkeys(ours, "object")
        assert types == made[table].dtypes.to_dict()


def test_a_python_with_the_library_alone_loads_and_runs_the_files(made):
    program = """
import sys
import pandapower as pp
for name in sys.argv[1:]:
    net = pp.from_json(name)
    pp.runpp(net, numba=False)
    assert net.converged
    assert len(net.trafo) > 1
    assert not net.res_bus.vm_pu[net.bus.in_service].isna().any()
    assert net.res_bus.vm_pu.between(0.9, 1.15).all()
assert not any(name.split(".")[0] == "convert" for name in sys.modules)
"""
    names = [str(one.folder / name) for one in made.values() for name in FILES]
    done = subprocess.run(
        [sys.executable, "-I", "-c", program, *names], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr


def test_spare_busbars_and_fed_ones_have_volts_in_a_plain_load_flow(written):
    net = written.nets["network.json"]
    pp.runpp(net, numba=False)
    volts = dict(zip(net.bus["name"], net.res_bus["vm_pu"] * net.bus["vn_kv"], strict=True))
    assert volts["Hill 33"] == pytest.approx(33.5, rel=1e-12)  # the sheet's source
    assert volts["Hill 33 spare"] == pytest.approx(33.0, rel=1e-12)  # an assumed one
    assert volts["Lane 11"] == pytest.approx(11.0, rel=1e-12)  # an assumed one
    assert volts["Dale 11"] == pytest.approx(33.5 * 11.6 / 34.5, rel=1e-3)  # rated ratio
    # busbars that only single-phase units touch have no place in a balanced network
    assert not {"Hut 0.24", "Shed 0.48"} & set(volts)
    assumed = written.study.findings.query("rule == 'source-assumed'")["subject"]
    assert set(assumed) == {"Hill 33 spare", "Lane 11"}


@pytest.mark.parametrize("file", FILES)
def test_every_float_of_the_file_is_the_same_float_after_loading(written, file):
    checked = 0
    for table in TABLES:
        for at, row in enumerate(raw(written.folder, file, table)):
            for column, value in row.items():
                if isinstance(value, float):
                    assert written.nets[file][table].at[at, column] == value, (table, at, column)
                    checked += 1
    assert checked > 12 * len(written.nets[file].trafo)


def test_columns_of_ours_survive_the_library_s_own_saving(written):
    again = pp.from_json_string(pp.to_json(written.nets["network.json"]))
    row = again.trafo.set_index("name").loc["Staged"]
    assert row[["printed_vector_group", "vector_group", "serial", "certificate"]].to_list() == [
        "YNd11", "YNd", "001", "C-1",
    ]  # fmt: skip
    assert "printed_vector_group as printed" in again.note


def test_vector_groups_are_letters_without_clock_and_the_shift_carries_the_clock(written):
    rows = {row.name: row for net in written.nets.values() for row in net.trafo.itertuples()}
    groups = {name: (row.printed_vector_group, row.vector_group, row.shift_degree)
              for name, row in rows.items()}  # fmt: skip
    assert groups == {
        "Staged": ("YNd11", "YNd", 330.0),
        "Split": ("Dyn1", "Dyn", 30.0),
        "Opposite": ("Dyn11", "Dyn", 330.0),
        "Given": ("Yyn0", "Yyn", 0.0),
        "Assumed": ("Yzn5", "Yzn", 150.0),
        "Neutral": ("Ii0", None, 0.0),
        "Reversed": ("Ii6", None, 180.0),
        "Line": ("Ii0", None, 0.0),
    }


def test_no_zero_sequence_column_is_written_from_nothing(written):
    """One missing value among them makes the library use z0 = z1 without a word."""
    for net in written.nets.values():
        assert not [name for name in net.trafo.columns if "0_" in name and name != "i0_percent"]


def test_single_phase_islands_stand_on_their_own_volts_and_power(written):
    net = written.nets["single_phase.json"]
    assert net.sn_mva == pytest.approx(100 / 3, rel=1e-15)
    rows = net.trafo.set_index("name")
    kv = {name: tuple(net.bus.vn_kv[[row.hv_bus, row.lv_bus]]) for name, row in rows.iterrows()}
    assert kv["Line"] == (11.0, 0.48)
    assert kv["Neutral"] == (pytest.approx(11 / 3**0.5, rel=1e-15), 0.24)
    assert rows.at["Neutral", "sn_mva"] == 0.025
    assert len(set(net.trafo.hv_bus) | set(net.trafo.lv_bus)) == 2 * len(net.trafo)
    assert "multiply every *_ka column of the results by sqrt(3)" in net.note


def test_single_phase_amps_need_the_root_of_three_that_the_note_names(written):
    """At rated load 25 kVA at 250 V is 100 A; the library shows line amps of a balanced three."""
    net = pp.from_json(str(written.folder / "single_phase.json"))
    row = net.trafo.set_index("name").loc["Neutral"]
    pp.create_load(net, row.lv_bus, p_mw=0.025)
    pp.runpp(net, numba=False)
    at = net.trafo.index[net.trafo["name"] == "Neutral"][0]
    volts = net.res_bus.vm_pu[row.lv_bus] * 240
    assert 3**0.5 * net.res_trafo.i_lv_ka[at] * 1e3 * volts == pytest.approx(25e3, rel=1e-6)


def test_leakage_shares_are_halves_by_resistances_or_none(written):
    rows = {row.name: row for net in written.nets.values() for row in net.trafo.itertuples()}
    if written.model == "cantilever":  # the library divides by the share, so none is 1e-12
        for row in rows.values():
            assert row.leakage_resistance_ratio_hv == row.leakage_reactance_ratio_hv == 1e-12
        return
    assert rows["Staged"].leakage_resistance_ratio_hv == 0.5
    # HV delta winding 1.62 ohm of copper at 20 °C, LV star winding 58.1 mohm of aluminium at
    # 22 °C, both brought to the short-circuit test's 28 °C (IEEE constants), on one side's ohms
    hv = 1.62 / 3 * (234.5 + 28) / (234.5 + 20)
    lv = 58.1e-3 * (225 + 28) / (225 + 22) * (34.5 / 11.6) ** 2
    assert rows["Split"].leakage_resistance_ratio_hv == pytest.approx(hv / (hv + lv), rel=1e-12)
    assert all(row.leakage_reactance_ratio_hv == 0.5 for row in rows.values())


def test_tap_columns_say_nothing(written):
    for net in written.nets.values():
        for column in ("tap_side", "tap_pos", "tap_neutral", "tap_step_percent"):
            assert net.trafo[column].isna().all()
        assert not net.trafo["tap_dependency_table"].any()


def test_without_three_phase_units_there_is_no_balanced_network(tmp_path):
    study = plant(tmp_path, {"Line": UNITS["Line"]})
    assert three_phase_network(study, examine(study)[0], "") == (None, [])
