"""One run end to end: the contract's columns, units left out by name, assumptions and steps."""

import hashlib
import json
import re
from pathlib import Path

import numpy as np
import pandapower as pp
import pandas as pd
import pytest
from pandapower.toolbox import nets_equal
from test_entries import HEAD, UNITS, plant

from convert import BranchwrightError, build, prove, read
from convert import study as study_room
from convert.study import Study, examine

#: design of the outputs: every column, in order
COLUMNS = {
    "branches": (
        "name phases from_busbar to_busbar base_mva base_kv_from base_kv_to rated_kv_from "
        "rated_kv_to rated_mva parallel r_pu x_pu g_pu b_pu ratio_pu shift_deg r_share_from "
        "x_share_from model winding_temp_degc tap status"
    ),
    "losses": "name load_fraction power_factor loss_w efficiency_percent",
    "retest": (
        "name state test quantity unit certificate correction expected retest "
        "difference_percent verdict"
    ),
    "regulation": (
        "name load_fraction power_factor sense method hand_percent flow_percent "
        "difference_points bound_points verdict"
    ),
    "findings": "severity subject rule reading found expected effect likely_cause source units",
}
#: units.csv is described in words: what each unit, stage and state must say
UNIT_COLUMNS = (
    "name stage state rated_mva winding_temp_degc uk_percent ur_percent ux_percent i0_percent "
    "p0_w pk_w ohmic_hv_w ohmic_lv_w stray_w k_hv_degc k_lv_degc k_stray_degc r_own_pu "
    "x_own_pu g_own_pu b_own_pu x_over_r rated_amps_hv rated_amps_lv"
)
#: 3.1 kW read at √3·15.42 V·100 A = 2.7 kVA; and a certificate without a short-circuit test
IMPOSSIBLE = UNITS["Opposite"].replace("501 A", "100 A")
NO_LOAD_ONLY = re.sub(r"      short_circuit:\n.*\n", "", UNITS["Opposite"])
UNSAID = HEAD.replace(", study_temperature: 75 °C", "")


@pytest.fixture(scope="module")
def home(tmp_path_factory) -> Path:
    return tmp_path_factory.mktemp("study")


@pytest.fixture(scope="module")
def mixed(home) -> Study:
    """Two units that cannot be reduced among three that can."""
    units = {
        "Assumed": UNITS["Assumed"],
        "Impossible": IMPOSSIBLE,
        "Opposite": UNITS["Opposite"],
        "Untested": NO_LOAD_ONLY,
        "Neutral": UNITS["Neutral"],
    }
    return build(plant(home, units))


@pytest.fixture
def unproven(monkeypatch) -> None:
    """Leave the load flows out: what a test of tables and steps does not need."""
    monkeypatch.setattr(
        "convert.proof.prove",
        lambda target, branches, units, retest, regulation, progress: (retest, regulation, []),
    )


def findings(folder: Path, units: dict[str, str], head: str = HEAD) -> pd.DataFrame:
    """Findings of a check, with rule and subject as index."""
    rows = [
        {"rule": f.rule, "subject": f.subject, "severity": str(f.severity), "found": f.found,
         "effect": f.effect, "reading": f.reading}
        for f in examine(plant(folder, units, head))[1]
    ]  # fmt: skip
    return pd.DataFrame(rows).set_index(["rule", "subject"])


def watts(text: str) -> list[float]:
    """Every power written in a text, in W."""
    scale = {"W": 1.0, "kW": 1e3, "MW": 1e6}
    return [float(n) * scale[u] for n, u in re.findall(r"([0-9.]+) ([kM]?W)\b", text)]


# --- tables and files -----------------------------------------------------------------------------


@pytest.mark.parametrize("table", COLUMNS)
def test_tables_have_exactly_the_columns_of_the_contract(mixed, table):
    assert list(mixed.tables()[table].columns) == COLUMNS[table].split()
    assert len(mixed.tables()[table])


@pytest.mark.usefixtures("unproven")
def test_units_table_has_a_row_for_every_stage_and_state(home):
    study = build(plant(home, {name: UNITS[name] for name in ("Staged", "Line")}))
    units = study.units
    assert list(units.columns)[: len(UNIT_COLUMNS.split())] == UNIT_COLUMNS.split()
    for side in ("hv", "lv"):
        for element in ("r1", "x1", "r2", "x2", "rc", "xm"):
            assert {f"{element}_{side}_ohm", f"{element}_{side}_delta_ohm"} <= set(units.columns)
    rows = list(zip(units["name"], units["stage"], units["state"], strict=True))
    states = ("tested", "reference", "study")
    assert rows == [
        *(("Staged", "ONAN", state) for state in states),
        *(("Staged", "ONAF", state) for state in states),
        *(("Line", "", state) for state in states),
    ]
    # a delta side has winding ohms, three times the star's; the star side and one phase have none
    staged = units.query("name == 'Staged'")
    np.testing.assert_allclose(staged["x1_lv_delta_ohm"], 3 * staged["x1_lv_ohm"], rtol=1e-15)
    assert staged["x1_hv_delta_ohm"].isna().all()
    assert units.query("name == 'Line'")[["x1_hv_delta_ohm", "x1_lv_delta_ohm"]].isna().all(None)


def test_written_tables_are_the_study_s(mixed, tmp_path):
    names = mixed.write(tmp_path / "out")
    assert sorted(names) == sorted(entry.name for entry in (tmp_path / "out").iterdir())
    for name, table in mixed.tables().items():
        text = (tmp_path / "out" / f"{name}.csv").read_text(encoding="utf-8")
        assert text.split("\n", 1)[0] == ",".join(table.columns)
        found = pd.read_csv(
            tmp_path / "out" / f"{name}.csv", float_precision="round_trip", keep_default_na=False,
            na_values={column: "" for column in table if table[column].dtype == float},
        )  # fmt: skip
        assert len(found) == len(table)
        for column in table.select_dtypes("number"):
            np.testing.assert_array_equal(found[column], table[column], err_msg=column)


def test_networks_are_left_out_on_request_and_the_proof_then_says_so(mixed, tmp_path):
    names = mixed.write(tmp_path / "out", network=False)
    assert {name for name in names if name.endswith(".json")} == {"record.json"}
    with pytest.raises(BranchwrightError, match="holds no network file; build with --network"):
        prove(tmp_path / "out")


def test_the_networks_are_the_library_s_and_are_those_written(mixed, tmp_path):
    mixed.write(tmp_path / "out")
    for name, net in (("network.json", mixed.network), ("single_phase.json", mixed.single_phase)):
        assert isinstance(net, pp.pandapowerNet)
        assert nets_equal(net, pp.from_json(str(tmp_path / "out" / name)))
    assert mixed.network is mixed.network  # loaded once, so that a planner's additions stay
    assert list(mixed.network.trafo["name"]) == ["Assumed", "Opposite"]
    assert list(mixed.single_phase.trafo["name"]) == ["Neutral"]


@pytest.mark.usefixtures("unproven")
def test_without_single_phase_units_there_is_no_such_network(home):
    study = build(plant(home, {"Given": UNITS["Given"]}))
    assert study.single_phase is None
    assert list(study.network_texts) == ["network.json"]


def test_names_that_look_like_numbers_stay_text(tmp_path):
    head = HEAD.replace("Lane 11", "1e3").replace("Pump 0.4", "NA")
    block = UNITS["Assumed"].replace("Lane 11", "1e3").replace("Pump 0.4", "NA")
    study = build(plant(tmp_path, {"007": block, "1e400": block}, head))
    study.write(tmp_path / "out")
    retest, regulation, found = prove(tmp_path / "out")
    assert found == []
    assert set(regulation["name"]) == {"007", "1e400"}
    assert set(retest.query("quantity == 'lv nominal volts'")["certificate"]) == {"NA"}


@pytest.mark.usefixtures("unproven")
def test_the_stage_of_the_study_moves_the_rating_and_not_the_ohms(home):
    """One transformer is one circuit, whatever base its rating makes."""
    plant(home, {"Staged": UNITS["Staged"]})
    hot, cool = (
        build(read(home / "station.yaml", stage=stage)).branches.iloc[0]
        for stage in ("ONAF", "ONAN")
    )
    assert (hot["rated_mva"], cool["rated_mva"]) == (12.5, 10.0)
    for column in ("r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu"):
        assert hot[column] == pytest.approx(cool[column], rel=1e-12), column


def test_a_circuit_of_no_known_name_is_refused(home):
    with pytest.raises(BranchwrightError, match="model: read 'pi'; expected T or cantilever"):
        build(plant(home, {"Given": UNITS["Given"]}), model="pi")


# --- units with an error --------------------------------------------------------------------------


def test_a_unit_with_an_error_is_left_out_and_named_and_the_rest_is_proven(mixed):
    assert mixed.left_out == ["Impossible", "Untested"]
    kept = ["Assumed", "Opposite", "Neutral"]
    for table in ("branches", "units", "losses", "regulation"):
        assert list(dict.fromkeys(mixed.tables()[table]["name"])) == kept
    assert mixed.passed
    errors = mixed.findings.query("severity == 'error'")
    assert dict(zip(errors["subject"], errors["rule"], strict=True)) == {
        "Impossible": "short-circuit-power-factor",
        "Untested": "load-loss-missing",
    }
    found = errors.set_index("subject").loc["Impossible"]
    assert "15.42 V, 100 A, 3.10 kW" in found["found"]
    assert re.search(r"station\.yaml:\d+ ", found["reading"])


def test_findings_come_in_the_order_of_the_sheet(mixed):
    order = ["Assumed", "Impossible", "Opposite", "Untested", "Neutral"]
    about_units = [subject for subject in mixed.findings["subject"] if subject in order]
    assert about_units == sorted(about_units, key=order.index)
    assert set(about_units) == set(order)
    assert set(mixed.findings["severity"]) <= {"error", "caution", "note"}
    assert (mixed.findings["units"] >= 1).all()


@pytest.mark.usefixtures("unproven")
def test_strict_refuses_the_whole_study_for_one_unit(home):
    units = {"Given": UNITS["Given"], "Impossible": IMPOSSIBLE}
    with pytest.raises(BranchwrightError) as caught:
        build(plant(home, units), strict=True)
    lines = caught.value.problems
    assert str(lines[0]).startswith("Impossible: ")
    assert "cosφ" in str(lines[0])
    assert lines[-1] == "--strict: nothing was written"
    assert build(plant(home, {"Given": UNITS["Given"]}), strict=True).left_out == []


@pytest.mark.parametrize("strict", [False, True])
def test_a_study_of_which_every_unit_fails_is_refused(home, strict):
    units = {"Impossible": IMPOSSIBLE, "Untested": NO_LOAD_ONLY}
    with pytest.raises(BranchwrightError) as caught:
        build(plant(home, units), strict=strict)
    lines = [str(line) for line in caught.value.problems]
    assert [line.split(":")[0] for line in lines[:-1]] == ["Impossible", "Untested"]
    assert "no unit could be reduced" in lines[-1]


# --- assumptions ----------------------------------------------------------------------------------


def test_an_assumed_temperature_says_what_it_does_to_the_loss(home):
    """By hand: 500 kVA at 433 V is 666.69 A, aluminium, 19 °C, no resistances."""
    found = findings(home, {"Opposite": UNITS["Opposite"]}, UNSAID)
    row = found.loc[("study-temperature-assumed", "Opposite")]
    tested = 3100 * (500e3 / (3**0.5 * 433) / 501) ** 2
    assert "75 °C assumed" in row["effect"]
    assert watts(row["effect"]) == pytest.approx(
        [tested * (225 + 75) / (225 + 19), tested], rel=1e-4
    )
    assert "study-temperature-assumed" not in findings(home, UNITS).index.get_level_values(0)


@pytest.mark.usefixtures("unproven")
def test_a_stated_reference_is_the_study_s_temperature_and_no_assumption(home):
    block = UNITS["Opposite"] + "    reference_temperature: 85 °C\n"
    found = findings(home, {"Opposite": block}, UNSAID)
    assert "study-temperature-assumed" not in found.index.get_level_values(0)
    study = build(plant(home, {"Opposite": block}, UNSAID))
    assert list(study.branches["winding_temp_degc"]) == [85.0]


def test_temperatures_that_differ_in_one_station_get_a_caution(home):
    units = {
        name: UNITS["Opposite"] + f"    reference_temperature: {t} °C\n"
        for name, t in (("a", 75), ("b", 85))
    }
    row = findings(home, units, UNSAID).loc[("mixed-temperatures", "the study")]
    assert row["severity"] == "caution"
    assert "75, 85 °C" in row["found"]


def test_a_loss_without_resistances_has_both_its_bounds(home):
    row = findings(home, UNITS).loc[("loss-not-separated", "Opposite")]
    tested = 3100 * (500e3 / (3**0.5 * 433) / 501) ** 2
    hot, cold = 225 + 75, 225 + 19
    assert row["severity"] == "caution"
    assert watts(row["effect"]) == pytest.approx(
        [tested * hot / cold, tested * cold / hot], rel=1e-4
    )
    not_separated = findings(home, UNITS).loc["loss-not-separated"].index
    assert set(not_separated) == {"Opposite", "Neutral"}  # Staged, Split, Line have theirs


def test_facts_that_the_sheet_assumes_or_is_given_are_listed_as_printed(home):
    found = findings(home, UNITS)
    for rule, text in (("no-load-loss", "320 W, 2.5 %"), ("load-loss", "1.75 kW, 4 %")):
        row = found.loc[(f"{rule}-assumed", "Assumed")]
        assert row["severity"] == "caution"
        assert row["found"].startswith(text)
        assert row["effect"]
    for rule, text in (("no-load-loss", "431 W, 1.72 %"), ("load-loss", "2.65 kW, 4.02 %")):
        row = found.loc[(f"{rule}-given", "Given")]
        assert row["severity"] == "note"
        assert row["found"].startswith(text)


@pytest.mark.usefixtures("unproven")
def test_results_that_rest_on_an_assumption_say_so(home):
    study = build(plant(home, {name: UNITS[name] for name in ("Staged", "Given", "Assumed")}))
    assert dict(zip(study.branches["name"], study.branches["status"], strict=True)) == {
        "Staged": "measured", "Given": "given", "Assumed": "assumed",
    }  # fmt: skip


def test_assumed_metal_and_winding_temperature_are_listed_with_their_effect(home):
    block = UNITS["Opposite"].replace(", metal: aluminium", "")
    block = block.replace(", temperature: 19 °C", "")
    block += "    assume: {metal: copper, winding_temperature: 20 °C}\n"
    found = findings(home, {"Opposite": block})
    metal = found.loc[("metal-assumed", "Opposite")]
    assert "copper" in metal["found"]
    # (225+75)/(225+20) over (235+75)/(235+20) is 1.0073
    assert re.search(r"0\.72 %|0\.73 %", metal["effect"])
    cold = found.loc[("winding-temperature-assumed", "Opposite")]
    assert "20 °C" in cold["found"]
    # r at 75 °C falls with a warmer test: (235+20)/(235+30) - 1 is -3.8 %
    assert re.search(r"-3\.[789] ?%", cold["effect"])


def test_sources_that_no_sheet_names_are_listed_by_busbar(mixed):
    """Each set of busbars joined by transformers is fed at its highest voltage."""
    found = mixed.findings.query("rule == 'source-assumed'")
    # Lane 11 feeds Pump 0.4, Mill 11 feeds Yard 0.4; the rest stand alone
    assert set(found["subject"]) == {
        "Lane 11", "Mill 11", "Hill 33 spare", "Farm 0.4", "Shed 0.48",
    }  # fmt: skip
    assert (found["effect"] != "").all()


# --- the record -----------------------------------------------------------------------------------


def test_the_record_says_what_went_in_and_with_what_it_was_made(home, tmp_path):
    one = plant(home, {"Given": UNITS["Given"]})
    study = build(one, options={"model": "T", "strict": False})
    study.write(tmp_path / "out")
    record = json.loads((tmp_path / "out" / "record.json").read_text(encoding="utf-8"))
    digest = hashlib.sha256((home / "station.yaml").read_bytes()).hexdigest()
    assert record["inputs"] == [{"name": str(home / "station.yaml"), "sha256": digest}]
    for name, sha in record["outputs"].items():
        assert hashlib.sha256((tmp_path / "out" / name).read_bytes()).hexdigest() == sha
    assert set(record["outputs"]) == {e.name for e in (tmp_path / "out").iterdir()} - {
        "record.json"
    }
    assert {"python", "branchwright", "numpy", "pandas", "pandapower"} <= set(record["versions"])
    assert record["steps"] == study.steps
    assert record["options"] == {"model": "T", "strict": False}
    assert re.fullmatch(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\+00:00", record["date"])


def steps(folder: Path, **units: str) -> list[dict[str, str]]:
    return build(plant(folder, units)).steps


@pytest.mark.usefixtures("unproven")
def test_every_step_is_recorded_once_with_its_formula_and_source(home):
    recorded = steps(home, **UNITS)
    keys = [(step["out"], step["formula"], step["with"]) for step in recorded]
    assert len(keys) == len(set(keys))
    for step in recorded:
        assert step["source"].count(",") >= 1, step  # document, clause or what it says, how known
        for argument in re.findall(r"(\w+) = ", step["with"]):
            assert re.search(rf"\b{argument}\b", step["formula"]), step
    # the two reductions and the base change are there
    outs = {step["out"] for step in recorded}
    assert {"y_oc", "z_sc_study", "pk_study", "z_system", "y_system", "ratio"} <= outs


@pytest.mark.usefixtures("unproven")
def test_the_record_shows_the_side_that_was_energised(home):
    """A unit energised from HV has its shunt behind the HV leg, not behind the LV one."""
    shunt = {"lv": "z_to_study", "hv": "z_from_study"}
    given = UNITS["Opposite"]
    from_lv = given.replace("energised: hv, volts: 10.80 kV, amps: 0.334 A",
                            "energised: lv, volts: 425 V, amps: 8.5 A")  # fmt: skip
    for side, block in (("hv", given), ("lv", from_lv)):
        arguments = [s["with"] for s in steps(home, One=block) if s["out"] == "y_m_study"]
        assert len(arguments) == 1
        assert shunt[side] in arguments[0]


@pytest.mark.usefixtures("unproven")
def test_no_step_is_recorded_that_served_no_unit(home):
    """A measured unit has no given or assumed results, no phase volts and no watts of one phase."""
    recorded = {(step["out"], step["formula"]) for step in steps(home, Staged=UNITS["Staged"])}
    outs = {out for out, _ in recorded}
    assert not {out for out in outs if out.startswith(("results_", "assume_"))}
    assert not {"oc_volts", "oc_watts", "sc_volts", "sc_watts", "oc_amps"} & outs


@pytest.mark.usefixtures("unproven")
def test_a_second_formula_for_a_value_is_recorded_too(home):
    """cosφ of one at no load: i0 is made from the watts for that unit, from the amps for others."""
    limit = UNITS["Opposite"].replace("amps: 0.334 A", "amps: 0.05 A")
    limit = limit.replace("[300 W, 310 W, 331 W]", "936 W")
    assert "no-load-power-factor-one" in findings(home, {"Limit": limit}).index.get_level_values(0)
    both = steps(home, Usual=UNITS["Opposite"], Limit=limit)
    alone = steps(home, Usual=UNITS["Opposite"])
    count = {name: sum(step["out"] == "i0" for step in listed)
             for name, listed in (("both", both), ("alone", alone))}  # fmt: skip
    assert count == {"both": 2, "alone": 1}


def test_a_fleet_has_one_load_point_and_one_note_a_rule(home, monkeypatch):
    """The contract's rule above 1,000 units, shown on three."""
    monkeypatch.setattr(study_room, "FLEET", 2)
    names = ("Given", "Twin", "Third")
    fleet = build(plant(home, dict.fromkeys(names, UNITS["Given"])))
    points = fleet.regulation[["load_fraction", "power_factor", "sense"]].drop_duplicates()
    assert points.to_numpy().tolist() == [[1.0, 0.8, "lagging"]]
    assert fleet.passed
    notes = fleet.findings.query("severity == 'note'")
    assert not notes["rule"].duplicated().any()
    assert notes.set_index("rule").at["no-load-loss-given", "units"] == len(names)
    monkeypatch.setattr(study_room, "FLEET", 3)
    station = build(plant(home, dict.fromkeys(names, UNITS["Given"])))
    assert len(station.regulation) == 6 * len(fleet.regulation)  # the points of its sheet
    assert station.findings["rule"].tolist().count("no-load-loss-given") == len(names)
