"""The proof is no mirror: it passes what build wrote, and names the unit of every edited row."""

import json
import re
import shutil
from collections.abc import Callable
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest
from test_entries import HEAD, UNITS, plant

from convert import BranchwrightError, build, prove
from convert.proof import summary

FILES = ("network.json", "single_phase.json")
LIMIT_PERCENT = 1e-6

Rows = list[dict]
Edit = Callable[[Rows, dict, SimpleNamespace], object]


def edit_file(folder: Path, file: str, edit: Callable[[dict[str, Rows]], object]) -> None:
    """Change the tables of a network file, with the standard library alone."""
    path = folder / file
    content = json.loads(path.read_text(encoding="utf-8"))
    parts = content["_object"]
    bodies = {name: json.loads(parts[name]["_object"]) for name in ("bus", "trafo", "ext_grid")}
    tables = {
        name: [dict(zip(body["columns"], row, strict=True)) for row in body["data"]]
        for name, body in bodies.items()
    }
    edit(tables)
    for name, rows in tables.items():
        columns = list(rows[0]) if rows else bodies[name]["columns"]
        data = [[row[column] for column in columns] for row in rows]
        body = {"columns": columns, "index": list(range(len(rows))), "data": data}
        parts[name]["_object"] = json.dumps(body)
    path.write_text(json.dumps(content), encoding="utf-8")


# --- one change a unit ----------------------------------------------------------------------------


def scaled(column: str) -> Edit:
    return lambda rows, row, other: row.update({column: row[column] * (1 + 1e-6)})


def turned(degrees: float) -> Edit:
    return lambda rows, row, other: row.update(shift_degree=row["shift_degree"] + degrees)


def put(**values: object) -> Edit:
    return lambda rows, row, other: row.update(values)


def swapped(rows: Rows, row: dict, other: SimpleNamespace) -> None:
    row["hv_bus"], row["lv_bus"] = row["lv_bus"], row["hv_bus"]


def moved(rows: Rows, row: dict, other: SimpleNamespace) -> None:
    kv = other.buses[row["hv_bus"]]["vn_kv"]
    row["hv_bus"] = next(
        at for at, bus in enumerate(other.buses) if at != row["hv_bus"] and bus["vn_kv"] == kv
    )


def plate(rows: Rows, row: dict, other: SimpleNamespace) -> None:
    """What a planner types in from the certificate as it stands."""
    row.update(
        vk_percent=other.certificate.uk_percent,
        vkr_percent=other.certificate.ur_percent,
        pfe_kw=other.certificate.p0_w / 1e3,
        i0_percent=other.certificate.i0_percent,
    )


#: name of the edited unit -> the change, and a quantity that must be named
EDITS: dict[str, tuple[Edit, str]] = {
    "sn_mva": (scaled("sn_mva"), "short circuit hv watts"),
    "vn_hv_kv": (scaled("vn_hv_kv"), "open circuit hv volts"),
    "vn_lv_kv": (scaled("vn_lv_kv"), "open circuit lv watts"),
    "vk_percent": (scaled("vk_percent"), "short circuit hv volts"),
    "vkr_percent": (scaled("vkr_percent"), "short circuit hv watts"),
    "pfe_kw": (scaled("pfe_kw"), "open circuit lv watts"),
    "i0_percent": (scaled("i0_percent"), "open circuit lv amps"),
    "shift forward": (turned(30), "phase shift lv angle"),
    "shift back": (turned(-30), "phase shift lv angle"),
    "swapped": (swapped, "connection hv nominal volts"),
    "moved": (moved, "connection hv nominal volts"),
    "deleted": (lambda rows, row, other: rows.remove(row), "open circuit lv amps"),
    "duplicated": (lambda rows, row, other: rows.append(dict(row)), "open circuit lv amps"),
    "plate row": (plate, "short circuit hv volts"),
    "two in parallel": (put(parallel=2), "short circuit hv volts"),
    "share of leakage": (put(leakage_reactance_ratio_hv=0.501), "open circuit lv amps"),
    "off its tap": (
        put(tap_side="hv", tap_pos=1.0, tap_neutral=0.0, tap_step_percent=1.25,
            tap_changer_type="Ratio"),
        "open circuit hv volts",
    ),
}  # fmt: skip
UNTOUCHED = ("untouched first", "untouched last")
KINDS = {"three ": "Staged", "single ": "Neutral"}


@pytest.fixture(scope="module")
def twins(tmp_path_factory) -> SimpleNamespace:
    """A three-phase and a single-phase unit for every edit, all alike, built and proven."""
    home = tmp_path_factory.mktemp("twins")
    names = [UNTOUCHED[0], *EDITS, UNTOUCHED[1]]
    units = {kind + name: UNITS[like] for kind, like in KINDS.items() for name in names}
    study = build(plant(home, units))
    study.write(home / "out")
    return SimpleNamespace(folder=home / "out", study=study)


@pytest.fixture(scope="module")
def edited(twins, tmp_path_factory) -> SimpleNamespace:
    """Every unit but the untouched ones edited in its own way: one proof judges them all."""
    folder = tmp_path_factory.mktemp("edited") / "out"
    shutil.copytree(twins.folder, folder)
    units = pd.read_csv(folder / "units.csv").query("state == 'study'")
    for file, kind in zip(FILES, KINDS, strict=True):

        def edit(tables: dict[str, Rows], kind: str = kind) -> None:
            by_name = {row["name"]: row for row in tables["trafo"]}
            for name, (change, _) in EDITS.items():
                row = by_name[kind + name]
                mine = units[(units["name"] == row["name"]) & (units["rated_mva"] == row["sn_mva"])]
                other = SimpleNamespace(buses=tables["bus"], certificate=mine.iloc[0])
                change(tables["trafo"], row, other)

        edit_file(folder, file, edit)
    retest, regulation, findings = prove(folder, edited=True)
    return SimpleNamespace(retest=retest, regulation=regulation, findings=findings)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", EDITS)
def test_an_edited_row_fails_and_its_unit_and_quantity_are_named(edited, kind, name):
    unit, quantity = kind + name, EDITS[name][1]
    retest = edited.retest[edited.retest["name"] == unit]
    failed = retest[retest["verdict"] == "fail"]
    assert quantity in {f"{row.test} {row.quantity}" for row in failed.itertuples()}
    assert set(failed["state"]) == {"study"}  # the tested state does not rest on the files
    (found,) = [f for f in edited.findings if f.subject == unit and f.rule == "proof-retest"]
    assert found.severity == "error"
    assert quantity in found.effect
    assert any(f"{row.test}: {row.quantity}" in found.reading for row in failed.itertuples())


def test_every_unit_that_was_not_edited_passes_beside_the_edited_ones(edited):
    # a deleted or misplaced row leaves busbars without volts, which is the file's own finding
    subjects = {finding.subject for finding in edited.findings} - set(FILES)
    assert subjects == {kind + name for kind in KINDS for name in EDITS}
    for table in (edited.retest, edited.regulation):
        untouched = table[table["name"].str.endswith(UNTOUCHED)]
        assert untouched["name"].nunique() == 4
        assert set(untouched["verdict"]) == {"pass"}


def test_differences_and_verdicts_are_always_there(edited):
    assert not edited.retest["difference_percent"].isna().any()
    assert not edited.regulation["difference_points"].isna().any()
    for table in (edited.retest, edited.regulation):
        assert set(table["verdict"]) == {"pass", "fail"}


def test_regulation_names_an_edited_impedance_by_its_own_finding(edited):
    """1e-6 of the impedance is 1e-5 points of regulation: above the exact method's 1e-7."""
    for kind in KINDS:
        mine = [f for f in edited.findings if f.subject == f"{kind}vk_percent"]
        (found,) = [f for f in mine if f.rule == "proof-regulation"]
        assert "phasor" in found.reading or "ieee_c57_12_90" in found.reading
        assert "%" in found.found
        assert "±" in found.expected


# --- what was not edited --------------------------------------------------------------------------


def test_the_untouched_folder_passes_with_its_residuals(twins):
    retest, regulation, findings = prove(twins.folder)
    assert findings == []
    assert set(retest["verdict"]) == set(regulation["verdict"]) == {"pass"}
    assert np.isfinite(retest["difference_percent"]).all()
    assert retest["difference_percent"].abs().max() < LIMIT_PERCENT
    assert (regulation["difference_points"].abs() <= regulation["bound_points"]).all()
    residuals = summary(retest, regulation)
    assert 0 < residuals["retest_worst_percent"] < LIMIT_PERCENT
    uses = {key: value for key, value in residuals.items() if key.startswith("bound_use_")}
    assert set(uses) == {
        f"bound_use_{method}" for method in ("phasor", "ieee_c57_12_90", "iec_60076_8")
    }
    assert all(0 < value <= 1 for value in uses.values())
    # what was proven again is what build wrote, to the last digit
    pd.testing.assert_frame_equal(retest, twins.study.retest, check_exact=True)
    pd.testing.assert_frame_equal(regulation, twins.study.regulation, check_exact=True)


def test_re_run_readings_are_the_numbers_typed_from_the_certificate(twins):
    retest = twins.study.retest
    typed = {
        "three ": {
            "open circuit lv volts applied": 11000,
            "open circuit lv amps": (2.81 + 2.30 + 2.84) / 3,
            "open circuit lv watts": 9120,
            "short circuit hv amps applied": 130,
            "short circuit hv volts": 1765,
            "short circuit hv watts": 21200,
        },
        "single ": {
            "open circuit lv volts applied": 250,
            "open circuit lv amps": 1.52,
            "open circuit lv watts": 83,
            "short circuit hv amps applied": 3.94,
            "short circuit hv volts": 190.2,
            "short circuit hv watts": 402,
        },
    }
    for kind, readings in typed.items():
        rows = retest[(retest["name"] == kind + UNTOUCHED[0]) & (retest["state"] == "tested")]
        found = {f"{row.test} {row.quantity}": row.retest for row in rows.itertuples()}
        for quantity, value in readings.items():
            assert found[quantity] == pytest.approx(value, rel=1e-10), quantity


def test_study_state_watts_are_the_certificate_s_carried_by_hand(twins):
    """Single-phase, no resistances: all is I²R, halves of copper (235) and aluminium (225)."""
    retest = twins.study.retest.set_index(["name", "state", "test", "quantity"])
    row = retest.loc[("single " + UNTOUCHED[0], "study", "short circuit", "hv watts")]
    by_hand = 402 / 2 * ((235 + 75) / (235 + 18) + (225 + 75) / (225 + 18))
    assert row["retest"] == pytest.approx(by_hand, rel=1e-10)
    assert row["certificate"] == "402 W"
    for factor in ("(235+75)/(235+18)", "(225+75)/(225+18)"):
        assert factor in row["correction"]


# --- files that were changed, or are none ---------------------------------------------------------


@pytest.fixture
def pair(pair_once, tmp_path) -> Path:
    """A folder of two units, to spoil."""
    return Path(shutil.copytree(pair_once, tmp_path / "out"))


@pytest.fixture(scope="module")
def pair_once(tmp_path_factory) -> Path:
    home = tmp_path_factory.mktemp("pair")
    build(plant(home, {"bad": UNITS["Staged"], "good": UNITS["Staged"]})).write(home / "out")
    return home / "out"


@pytest.mark.parametrize(
    "name", ["branches.csv", "units.csv", "network.json", "retest.csv", "regulation.csv"]
)
def test_a_changed_file_is_refused_by_its_hash(pair, name):
    with (pair / name).open("a", encoding="utf-8") as handle:
        handle.write("\n")
    with pytest.raises(BranchwrightError, match=f"{name}: changed since it was written"):
        prove(pair)


def test_a_network_file_that_the_record_does_not_name_is_refused(pair):
    record = json.loads((pair / "record.json").read_text(encoding="utf-8"))
    del record["outputs"]["network.json"]
    (pair / "record.json").write_text(json.dumps(record), encoding="utf-8")
    with pytest.raises(BranchwrightError, match=r"network\.json"):
        prove(pair)


ABSURD = {
    "no impedance": put(vk_percent=None),
    "more resistance than impedance": put(vkr_percent=50.0),
    "none in parallel": put(parallel=0),
    "out of service": put(in_service=False),
    "no such busbar": put(hv_bus=99),
    "text for a number": put(vk_percent="four"),
}


@pytest.mark.parametrize("what", ABSURD)
def test_a_row_without_a_solution_is_named_and_takes_no_other_with_it(pair, what):
    def edit(tables: dict[str, Rows]) -> None:
        row = next(row for row in tables["trafo"] if row["name"] == "bad")
        ABSURD[what](tables["trafo"], row, SimpleNamespace())

    edit_file(pair, "network.json", edit)
    retest, regulation, findings = prove(pair, edited=True)
    named = {finding.subject for finding in findings} - set(FILES)
    assert named == {"bad"}
    for table in (retest, regulation):
        assert set(table[table["name"] == "good"]["verdict"]) == {"pass"}
    assert not retest["difference_percent"].isna().any()


@pytest.mark.parametrize("table", ["bus", "trafo", "ext_grid"])
def test_an_emptied_table_is_a_failed_proof_and_no_crash(pair, table):
    edit_file(pair, "network.json", lambda tables: tables[table].clear())
    _, _, findings = prove(pair, edited=True)
    assert "network.json" in {finding.subject for finding in findings}
    if table != "ext_grid":  # the tests are re-run with sources of their own
        assert {"bad", "good"} <= {finding.subject for finding in findings}


@pytest.mark.parametrize("text", ["{oops", "", "[1]", "{}"])
def test_a_network_file_that_is_none_is_refused_by_name(pair, text):
    (pair / "network.json").write_text(text, encoding="utf-8")
    with pytest.raises(BranchwrightError, match=r"network\.json"):
        prove(pair, edited=True)


@pytest.mark.parametrize(
    ("name", "column", "cell"),
    [
        ("branches.csv", "rated_mva", None),
        ("branches.csv", "base_kv_to", "low"),
        ("units.csv", "state", None),
        ("units.csv", "r_own_pu", "low"),
        ("retest.csv", "expected", None),
        ("retest.csv", "expected", "low"),
        ("regulation.csv", "bound_points", None),
    ],
)
def test_a_damaged_table_is_refused_by_name(pair, name, column, cell):
    table = pd.read_csv(pair / name, dtype=str, keep_default_na=False)
    table = table.drop(columns=column) if cell is None else table.assign(**{column: cell})
    table.to_csv(pair / name, index=False)
    with pytest.raises(BranchwrightError, match=rf"{name}.*{column}"):
        prove(pair, edited=True)


def test_a_unit_without_expected_readings_is_named_and_no_crash(pair):
    """Nothing to compare is no pass."""
    table = pd.read_csv(pair / "retest.csv", dtype=str, keep_default_na=False)
    table[table["name"] != "bad"].to_csv(pair / "retest.csv", index=False)
    try:
        _, _, findings = prove(pair, edited=True)
    except BranchwrightError as error:
        assert "bad" in str(error)  # noqa: PT017 - either answer is right
    else:
        assert "bad" in {finding.subject for finding in findings}


def test_a_dropped_column_is_refused_or_fails_by_name(pair):
    edit_file(
        pair, "network.json", lambda tables: [row.pop("vk_percent") for row in tables["trafo"]]
    )
    try:
        _, _, findings = prove(pair, edited=True)
    except BranchwrightError as error:
        assert "network.json" in str(error)  # noqa: PT017 - either answer is right
        assert "vk_percent" in str(error)  # noqa: PT017
    else:
        assert {"bad", "good"} <= {finding.subject for finding in findings}


def test_a_busbar_without_a_source_fails_the_plain_load_flow(pair):
    def unfed(tables: dict[str, Rows]) -> None:
        for row in tables["ext_grid"]:
            row["in_service"] = row["bus"] != 0

    edit_file(pair, "network.json", unfed)
    retest, _, findings = prove(pair, edited=True)
    assert [finding.subject for finding in findings] == ["network.json"]
    row = retest.query("name == 'network.json'").iloc[0]
    assert (row["test"], row["verdict"]) == ("plain load flow", "fail")
    assert row["retest"] > 0


@pytest.mark.parametrize(
    "column", ["r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu", "shift_deg", "base_kv_to", "to_busbar"]
)
def test_an_edited_branch_table_fails_and_names_its_column(pair, column):
    table = pd.read_csv(pair / "branches.csv", dtype={"name": str})
    row = table.index[table["name"] == "bad"][0]
    old = table.loc[row, column]
    table.loc[row, column] = "Elsewhere" if isinstance(old, str) else old * (1 + 1e-6) + (old == 0)
    table.to_csv(pair / "branches.csv", index=False)
    retest, _, findings = prove(pair, edited=True)
    failed = retest[(retest["verdict"] == "fail") & (retest["test"] == "branch table")]
    assert set(failed["name"]) == {"bad"}
    wanted = {"b_pu": "y_pu", "to_busbar": "base_kv_to"}.get(column, column)
    assert wanted in set(failed["quantity"])
    assert "bad" in {finding.subject for finding in findings}


def test_the_shift_of_every_group_and_clock_is_proven_by_a_load_flow(tmp_path):
    """Five connections a side and every hour that they can make."""
    groups = []
    for hv in ("D", "Y", "YN", "Z", "ZN"):
        for lv in ("d", "y", "yn", "z", "zn"):
            odd = (hv[0] in "DZ") != (lv[0] in "dz")
            groups += [f"{hv}{lv}{clock}" for clock in range(int(odd), 12, 2)]
    lv = re.search(r"lv: {busbar: ([^,]+),", UNITS["Given"])[1]
    units, busbars = {}, []
    for name in groups:  # a busbar each: unlike clocks in parallel would be a short circuit
        block = UNITS["Given"].replace("vector_group: Yyn0", f"vector_group: {name}")
        units[name] = block.replace(lv, f"Bus {name}")
        busbars.append(f"  Bus {name}: {{nominal_voltage: 0.4 kV}}\n")
    head = HEAD.replace("[50 %, 100 %]", "[100 %]").replace(', "1", 0.9 leading]', "]")
    head = head.replace("transformers:\n", "".join(busbars) + "transformers:\n")
    study = build(plant(tmp_path, units, head))
    assert study.passed
    angle = study.retest[study.retest["quantity"] == "lv angle"].set_index("name")["retest"]
    assert len(angle) == len(groups) == 150
    for name, found in angle.items():
        clock = int(re.search(r"\d+$", name)[0])
        # hours of the clock are 30° of lag; the no-load angle of the circuit is below 0.1°
        assert abs((found + 30 * clock + 180) % 360 - 180) < 0.1
