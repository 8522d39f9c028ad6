"""The commands: what they print, their exit codes, what they leave on disk.

In-process for nearly everything; a few runs of the installed command for what only a process of
its own can show.
"""

import json
import os
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import jsonschema
import pytest
from click.testing import CliRunner, Result
from drafts import NO_OPEN_CIRCUIT, NO_TESTS, sheet, unit, write

from convert import cli, folder, report, study
from convert.cli import main
from convert.intake.fields import resource
from convert.intake.sheet import read

WIDTH = 100
SCHEMA = json.loads(resource("schemas", "output.schema.json").read_text(encoding="utf-8"))
HEAVY = ("numpy", "pandas", "pint", "yaml", "pandapower", "jsonschema", "scipy")
COMMANDS = ("build", "check", "prove", "rebase", "start")
#: two stages, resistances, a delta: what makes every column and every kind of row
STAGES = (
    ("rated_power: 20 MVA", "cooling_stages: {ONAN: 15 MVA, ONAF: 20 MVA}\n    study_stage: ONAF"),
    ("plate_impedance: 10.00 %", "plate_impedance: 10.00 %\n    plate_impedance_base: 20 MVA"),
)
SINGLE = """\
  P1:
    phases: 1
    vector_group: Ii0
    rated_power: 5 kVA
    hv: {busbar: Reed Mill 66, rated_voltage: 38.1 kV, across: line and neutral, metal: copper}
    lv: {busbar: Reed Mill 11, rated_voltage: 6.35 kV, across: line and neutral, metal: copper}
    results: {load_loss: 100 W, impedance_voltage: 4 %, temperature: 75 °C,
              no_load_loss: 20 W, no_load_current: 1 %}
"""
CLEAN = sheet(unit())
EVERYTHING = sheet(unit(*STAGES, resistance=True), SINGLE, unit(NO_OPEN_CIRCUIT, name="T2 odd"))
ONE_BAD = sheet(unit(), unit(NO_OPEN_CIRCUIT, name="T2 odd"))
ALL_BAD = sheet(unit(NO_OPEN_CIRCUIT), unit(NO_TESTS, name="T2"))
UNREADABLE = sheet(
    unit(("rated_voltage: 66 kV", "rated_voltage: 66 kW"), ("phases: 3", "phases: 2"))
)


def run(*arguments: object) -> Result:
    # an exception that no command turned into its code is a fault of the command
    result = CliRunner().invoke(main, [str(argument) for argument in arguments])
    if result.exception and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def below(path: Path) -> list[str]:
    """All that a folder holds, hidden things too."""
    return sorted(found.relative_to(path).as_posix() for found in path.rglob("*"))


class Made(NamedTuple):
    """A folder that build wrote, and what it printed."""

    folder: Path
    result: Result


def files_below(path: Path) -> list[str]:
    return [name for name in below(path) if (path / name).is_file()]


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Made:
    """Every kind of row, built once; a test that changes files takes a copy."""
    home = tmp_path_factory.mktemp("made")
    result = run("build", write(home, EVERYTHING), "--out", home / "out")
    assert result.exit_code == 1  # T2 odd has an error
    return Made(home / "out", result)


@pytest.fixture(scope="module")
def plain(tmp_path_factory: pytest.TempPathFactory) -> Made:
    """One clean unit, built once; --strict leaves a good study alone."""
    home = tmp_path_factory.mktemp("plain")
    result = run("build", write(home, CLEAN), "--out", home / "out", "--strict")
    assert result.exit_code == 0
    return Made(home / "out", result)


@pytest.fixture(scope="module")
def built() -> study.Study:
    with tempfile.TemporaryDirectory() as home:
        return study.build(read(write(Path(home), CLEAN)))


@pytest.fixture
def at_once(built: study.Study, monkeypatch: pytest.MonkeyPatch) -> None:
    """Let build have its result at once, where a test is about the writing of it."""
    monkeypatch.setattr(study, "build", lambda *_, **__: built)


def copy_of(built: Made, home: Path) -> Path:
    return Path(shutil.copytree(built.folder, home / "out"))


def change_network(target: Path, column: str, factor: float) -> None:
    path = target / "network.json"
    net = json.loads(path.read_text(encoding="utf-8"))
    table = json.loads(net["_object"]["trafo"]["_object"])
    table["data"][0][table["columns"].index(column)] *= factor
    net["_object"]["trafo"]["_object"] = json.dumps(table)
    path.write_text(json.dumps(net), encoding="utf-8")


# --- output as data -----------------------------------------------------------------------------


def validator(command: str) -> jsonschema.Draft202012Validator:
    return jsonschema.Draft202012Validator({**SCHEMA, "$ref": f"#/$defs/{command}"})


def no_constant(word: str) -> None:
    raise AssertionError(f"{word} is no JSON")


def data(result: Result, command: str) -> dict[str, Any]:
    """What a command printed with --format json, held against the schema."""
    found = json.loads(result.stdout, parse_constant=no_constant)
    assert [error.message for error in validator(command).iter_errors(found)] == []
    return found


def test_the_output_schema_is_one_and_closed():
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    assert SCHEMA["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    for name, node in SCHEMA["$defs"].items():
        assert node["additionalProperties"] is False, name
        assert node["description"], name
        assert all("description" in p or "$ref" in p for p in node["properties"].values()), name
    assert {"build", "check", "prove", "rebase"} <= set(SCHEMA["$defs"])


def test_build_prints_its_tables_as_data_with_options_in_the_sheet_s_place(tmp_path: Path):
    path, out = write(tmp_path, EVERYTHING), tmp_path / "out"
    result = run("build", path, "--out", out, "--base-power", "10 MVA", "--stage", "ONAN",
                 "--temperature", "85 °C", "--model", "cantilever", "--format", "json")  # fmt: skip
    assert result.exit_code == 1
    found = data(result, "build")
    branch, single = found["branches"]
    assert (branch["name"], single["name"]) == ("T1", "P1")
    assert (branch["base_mva"], branch["rated_mva"]) == (10.0, 15.0)
    assert (branch["winding_temp_degc"], branch["model"]) == (85.0, "cantilever")
    assert found["left_out"] == ["T2 odd"]
    assert found["proof"]["verdict"] == "pass"
    assert {row["state"] for row in found["units"]} == {"tested", "reference", "study"}
    # the data is that of the files
    written = folder.read_csv(out / "branches.csv").to_dict(orient="records")
    assert written == found["branches"]
    record = json.loads((out / "record.json").read_text(encoding="utf-8"))
    assert record["options"]["stage"] == "ONAN"
    assert record["system"]["base_power"] == "10 MVA"


def test_check_prints_its_findings_as_data(tmp_path: Path):
    result = run("check", write(tmp_path, ONE_BAD), "--format", "json")
    assert result.exit_code == 1
    found = data(result, "check")
    assert [f["subject"] for f in found["findings"] if f["severity"] == "error"] == ["T2 odd"]
    assert found["left_out"] == ["T2 odd"]


def test_prove_prints_its_tables_as_data(made: Made):
    result = run("prove", made.folder, "--format", "json")
    assert result.exit_code == 0
    found = data(result, "prove")
    assert found["findings"] == []
    assert found["proof"]["passed"] == found["proof"]["rows"]
    assert found["proof"]["rows"] == len(found["retest"]) + len(found["regulation"])


def test_a_failed_proof_is_data_too_where_the_library_finds_no_solution(
    plain: Made, tmp_path: Path
):
    edited = copy_of(plain, tmp_path)
    change_network(edited, "vk_percent", 1e-3)  # below vkr_percent: no load flow at all
    result = run("prove", edited, "--edited", "--format", "json")
    assert result.exit_code == 1
    found = data(result, "prove")
    assert found["proof"]["verdict"] == "fail"
    assert "T1" in [finding["subject"] for finding in found["findings"]]
    assert None in [row["retest"] for row in found["retest"]]


def test_rebase_prints_its_table_as_data(made: Made):
    added = [word for name in ("own", "ohm", "percent") for word in ("--add", name)]
    table = made.folder / "branches.csv"
    result = run("rebase", table, "--base-power", "10 MVA", "--format", "json", *added)
    assert result.exit_code == 0
    first, single = data(result, "rebase")["branches"]
    assert first["base_mva"] == 10.0
    assert single["base_mva"] == pytest.approx(10 / 3)
    assert {"x_own_pu", "x_to_ohm", "z_percent"} <= set(first)


@pytest.mark.parametrize(
    "spoil",
    [
        lambda d: d["branches"][0].pop("r_pu"),
        lambda d: d["branches"][0].update(r_pu="0.02"),
        lambda d: d["branches"][0].update(extra=1),
        lambda d: d["findings"][0].update(severity="fatal"),
        lambda d: d["retest"][0].update(verdict="passed"),
        lambda d: d.update(more=[]),
        lambda d: d["units"][0].update(state="cold"),
        lambda d: d["branches"][0].update(r_pu=None),
    ],
)
def test_the_schema_notices_data_that_is_not_ours(made: Made, spoil: Callable[[Any], object]):
    names = ("branches", "units", "losses", "retest", "regulation", "findings")
    tables = {name: folder.read_csv(made.folder / f"{name}.csv") for name in names}
    proof = report.proof_data(tables["retest"], tables["regulation"])
    text = report.json_text({**tables, "proof": proof, "left_out": [], "caution": "-"})
    good = json.loads(text)
    assert validator("build").is_valid(good)
    spoil(good)
    assert not validator("build").is_valid(good)


# --- output as text -----------------------------------------------------------------------------


LONG = (
    ("Reed Mill 66", "Reed Mill sixty-six kilovolt switchgear north section of two no1"),
    ("Reed Mill 11", "Reed Mill eleven kilovolt switchgear north section of two no one"),
    ("  T1:", "  Transformer number one in the north bay beside the old pump room:"),
)


def lengthened(text: str) -> str:
    for old, new in LONG:
        assert len(new.strip(" :")) == 64  # the longest name that a sheet may have
        text = text.replace(old, new)
    return text


def wide_lines(*results: Result) -> list[str]:
    assert all(result.stdout.count("\n") > 5 for result in results), results[-1].output
    lines = [line for result in results for line in result.stdout.splitlines()]
    return [line for line in lines if len(line) > WIDTH]


def test_no_line_is_wider_than_a_hundred_columns(made: Made):
    table = made.folder / "branches.csv"
    results = [run("prove", made.folder), run("rebase", table, "--add", "ohm"),
               run("check", made.folder.with_name("mill.yaml"))]  # fmt: skip
    assert wide_lines(made.result, *results) == []
    assert "Proof PASS" in results[0].stdout


def test_no_line_is_wider_for_the_longest_names(tmp_path: Path):
    path, out = write(tmp_path, lengthened(CLEAN)), tmp_path / "out"
    results = [run("build", path, "--out", out), run("check", path)]
    assert [result.exit_code for result in results] == [0, 0], results[0].stderr
    results.append(run("rebase", out / "branches.csv"))
    assert wide_lines(*results) == []


def test_build_prints_branches_findings_proof_files_and_the_caution(made: Made):
    text = " ".join(made.result.stdout.split())
    for part in ("branches on 100 MVA, 50 Hz", "no-load-missing", "Tests re-run", "Regulation",
                 "Proof PASS", "network.json", "single_phase.json", "record.json",
                 "licensing of the place"):  # fmt: skip
        assert part in text
    assert made.result.stderr == ""


def test_check_counts_and_writes_nothing(tmp_path: Path):
    path = write(tmp_path, ONE_BAD)
    result = run("check", path)
    assert result.exit_code == 1
    assert "1 error, 0 cautions" in result.stdout
    assert "T2 odd" in result.stdout.splitlines()[-1]
    assert below(tmp_path) == ["mill.yaml"]


def test_check_of_a_clean_sheet_ends_well(tmp_path: Path):
    result = run("check", write(tmp_path, CLEAN))
    assert result.exit_code == 0
    assert "0 errors, 0 cautions" in result.stdout


def test_rebase_prints_the_table_or_writes_it(made: Made, tmp_path: Path):
    table = made.folder / "branches.csv"
    printed = run("rebase", table)
    assert printed.exit_code == 0
    assert "r_pu" in printed.stdout
    out = tmp_path / "new.csv"
    assert run("rebase", table, "--base-power", "10 MVA", "--out", out).exit_code == 0
    assert folder.read_csv(out)["base_mva"][0] == 10.0
    again = run("rebase", table, "--out", out)
    assert again.exit_code == 2
    assert "--force" in again.stderr
    assert run("rebase", table, "--out", out, "--force").exit_code == 0
    assert folder.read_csv(out)["base_mva"][0] == 100.0


def test_rebase_takes_new_busbar_volts(made: Made, tmp_path: Path):
    table = made.folder / "branches.csv"
    path = tmp_path / "volts.csv"
    path.write_text("busbar,nominal_voltage\nReed Mill 11,11.5 kV\n", encoding="utf-8")
    result = run("rebase", table, "--busbars", path, "--format", "json")
    first, single = data(result, "rebase")["branches"]
    assert first["base_kv_to"] == 11.5
    assert single["base_kv_to"] == pytest.approx(11.5 / 3**0.5)


def test_the_drafted_sheet_builds_and_proves(tmp_path: Path):
    path = tmp_path / "mine.yaml"
    started = run("start", "station", "--out", path)
    assert started.exit_code == 0
    assert str(path) in started.stdout
    built = run("build", path, "--out", tmp_path / "out")
    assert built.exit_code == 0, built.output
    assert "Proof PASS" in built.stdout


def test_the_sample_is_printed_as_it_stands_in_the_cases(tmp_path: Path):
    printed = run("start", "sample")
    sample = resource("cases", "substation", "station.yaml").read_text(encoding="utf-8")
    assert printed.stdout == sample
    path = tmp_path / "mine.yaml"
    path.write_text(printed.stdout, encoding="utf-8")
    assert run("check", path).exit_code == 0


def test_start_does_not_write_over_a_sheet(tmp_path: Path):
    path = write(tmp_path, CLEAN)
    result = run("start", "station", "--out", path)
    assert result.exit_code == 2
    assert path.read_text(encoding="utf-8") == CLEAN
    assert run("start", "station", "--out", path, "--force").exit_code == 0
    assert path.read_text(encoding="utf-8") != CLEAN


# --- options ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("option", "value", "expected"),
    [
        ("--base-power", "100", "a rating in volt-amperes such as 20 MVA"),
        ("--base-power", "100 MW", "a rating in volt-amperes such as 20 MVA"),
        ("--base-power", "0 MVA", "above zero"),
        ("--base-power", "-5 MVA", "without a minus sign"),
        ("--base-power", "nan MVA", "a rating in volt-amperes"),
        ("--base-power", "100,5 MVA", "decimal point"),
        ("--frequency", "50", "a frequency such as 50 Hz"),
        ("--frequency", "0 Hz", "above zero"),
        ("--temperature", "hot", "a temperature such as 75 °C"),
        ("--temperature", "75 K", "a temperature such as 75 °C"),
        # the sheet itself takes -60 to 400 °C; copper has no resistance at -235 °C
        ("--temperature", "-235 °C", "-60"),
        ("--temperature", "900 °C", "400"),
        ("--model", "pi", "cantilever"),
        ("--format", "xml", "json"),
    ],
)
@pytest.mark.parametrize("command", ["build", "check"])
def test_a_bad_option_value_names_what_was_read_and_what_is_expected(
    tmp_path: Path, command: str, option: str, value: str, expected: str
):
    path = write(tmp_path, CLEAN)
    target = ["--out", tmp_path / "out"] if command == "build" else []
    result = run(command, path, *target, option, value)
    assert result.exit_code == 2
    assert option in result.stderr
    assert value in result.stderr
    assert expected in result.stderr
    assert below(tmp_path) == ["mill.yaml"]


@pytest.mark.parametrize("value", ["0 °C", "-25 °C", "120 °C"])
def test_a_temperature_may_be_zero_or_below(tmp_path: Path, value: str):
    assert run("check", write(tmp_path, CLEAN), "--temperature", value).exit_code == 0


def test_a_stage_that_a_unit_does_not_have_is_refused_with_the_stages_it_has(tmp_path: Path):
    path = write(tmp_path, sheet(unit(*STAGES)))
    result = run("check", path, "--stage", "OFAF")
    assert result.exit_code == 2
    assert "OFAF" in result.stderr
    assert "ONAN, ONAF" in result.stderr


def test_a_stage_for_a_study_without_stages_is_not_passed_over(tmp_path: Path):
    result = run("check", write(tmp_path, CLEAN), "--stage", "ONAF")
    assert "ONAF" in result.output


def test_sheets_that_differ_in_their_base_need_the_option(tmp_path: Path):
    one = write(tmp_path, CLEAN, "one.yaml")
    two = write(tmp_path, sheet(unit(name="T2")).replace("100 MVA", "10 MVA"), "two.yaml")
    refused = run("check", one, two)
    assert refused.exit_code == 2
    assert "two.yaml:" in refused.stderr
    assert "one.yaml:" in refused.stderr
    assert run("check", one, two, "--base-power", "50 MVA").exit_code == 0


# --- bad input ----------------------------------------------------------------------------------


def test_a_bad_sheet_is_told_whole_and_nothing_is_written(tmp_path: Path):
    path = write(tmp_path, UNREADABLE)
    result = run("build", path, "--out", tmp_path / "out")
    assert result.exit_code == 2
    lines = result.stderr.splitlines()
    assert any("mill.yaml:17" in line and "66 kW" in line for line in lines)
    assert any("mill.yaml:12" in line and "'2'" in line for line in lines)
    assert result.stdout == ""
    assert below(tmp_path) == ["mill.yaml"]


def test_a_bad_sheet_beside_a_good_one_stops_both(tmp_path: Path):
    good, bad = write(tmp_path, CLEAN), write(tmp_path, UNREADABLE, "bad.yaml")
    result = run("build", good, bad, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert below(tmp_path) == ["bad.yaml", "mill.yaml"]


@pytest.mark.parametrize("command", ["build", "check"])
@pytest.mark.parametrize("kind", ["missing", "folder", "binary", "empty"])
def test_an_input_that_is_no_sheet_is_named(tmp_path: Path, command: str, kind: str):
    path = tmp_path / "in.yaml"
    if kind == "folder":
        path.mkdir()
    elif kind != "missing":
        path.write_bytes(b"\xff\xfe\x00\x01" if kind == "binary" else b"")
    target = ["--out", tmp_path / "out"] if command == "build" else []
    result = run(command, path, *target)
    assert result.exit_code == 2
    assert "in.yaml" in result.stderr
    assert "Traceback" not in result.output
    assert not (tmp_path / "out").exists()


def test_a_unit_with_an_error_is_left_out_named_last_and_the_rest_written(tmp_path: Path):
    result = run("build", write(tmp_path, ONE_BAD), "--out", tmp_path / "out")
    assert result.exit_code == 1
    assert "T2 odd" in result.stdout.rstrip().splitlines()[-1]
    assert folder.read_csv(tmp_path / "out" / "branches.csv")["name"].tolist() == ["T1"]
    findings = folder.read_csv(tmp_path / "out" / "findings.csv")
    assert "T2 odd" in findings[findings["severity"] == "error"]["subject"].tolist()
    assert "T2 odd" not in (tmp_path / "out" / "network.json").read_text(encoding="utf-8")


def test_strict_refuses_a_study_with_one_bad_unit(tmp_path: Path):
    result = run("build", write(tmp_path, ONE_BAD), "--out", tmp_path / "out", "--strict")
    assert result.exit_code == 2
    assert "T2 odd" in result.stderr
    assert "nothing was written" in result.stderr.splitlines()[-1]
    assert below(tmp_path) == ["mill.yaml"]


def test_a_study_of_bad_units_only_writes_nothing(tmp_path: Path):
    result = run("build", write(tmp_path, ALL_BAD), "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert "T1" in result.stderr
    assert "T2" in result.stderr
    assert below(tmp_path) == ["mill.yaml"]


# --- the folder ---------------------------------------------------------------------------------


def test_an_out_that_is_a_file_is_refused_before_any_work(tmp_path: Path):
    path, target = write(tmp_path, CLEAN), tmp_path / "out"
    target.write_text("mine", encoding="utf-8")
    result = run("build", path, "--out", target)
    assert result.exit_code == 2
    assert "is a file" in result.stderr
    assert target.read_text(encoding="utf-8") == "mine"


@pytest.mark.usefixtures("at_once")
def test_an_out_below_a_file_is_refused_with_the_file_named(tmp_path: Path):
    path = write(tmp_path, CLEAN)
    result = run("build", path, "--out", path / "out")
    assert result.exit_code == 2
    assert "mill.yaml" in result.stderr
    assert "nothing was written" in result.stderr
    assert below(tmp_path) == ["mill.yaml"]


@pytest.mark.usefixtures("at_once")
@pytest.mark.parametrize("what", ["a new folder", "a file in it"])
def test_a_folder_that_cannot_be_written_is_said_and_left_as_it_was(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, what: str
):
    # a lacking permission or a full disk, whoever runs the tests
    path, target = write(tmp_path, CLEAN), tmp_path / "out"
    true_write, true_folder = Path.write_text, tempfile.mkdtemp

    def write_text(self: Path, *arguments: Any, **options: Any) -> int:
        if self.parent.parent == tmp_path and what == "a file in it":
            raise OSError(28, "No space left on device", str(target))
        return true_write(self, *arguments, **options)

    def mkdtemp(*arguments: Any, **options: Any) -> str:
        if options.get("dir") == tmp_path and what == "a new folder":
            raise PermissionError(13, "Permission denied", str(target))
        return true_folder(*arguments, **options)

    monkeypatch.setattr(Path, "write_text", write_text)
    monkeypatch.setattr(folder.tempfile, "mkdtemp", mkdtemp)
    result = run("build", path, "--out", target)
    monkeypatch.undo()
    assert result.exit_code == 2
    assert ("Permission denied" in result.stderr) is (what == "a new folder")
    assert str(target) in result.stderr
    assert "nothing was written" in result.stderr
    assert below(tmp_path) == ["mill.yaml"]


@pytest.mark.usefixtures("at_once")
def test_a_folder_with_files_needs_force_which_keeps_files_of_others(tmp_path: Path):
    path, target = write(tmp_path, CLEAN), tmp_path / "out"
    target.mkdir()
    (target / "notes.txt").write_text("mine", encoding="utf-8")
    refused = run("build", path, "--out", target)
    assert refused.exit_code == 2
    assert "--force" in refused.stderr
    assert below(target) == ["notes.txt"]
    assert run("build", path, "--out", target, "--force").exit_code == 0
    assert (target / "notes.txt").read_text(encoding="utf-8") == "mine"
    assert (target / "record.json").is_file()


def test_prove_without_networks_says_how_to_get_them(tmp_path: Path):
    target = tmp_path / "out"
    built = run("build", write(tmp_path, CLEAN), "--out", target, "--no-network")
    assert built.exit_code == 0
    assert "network.json" not in built.stdout.partition("Files in ")[2]
    assert not (target / "network.json").exists()
    result = run("prove", target)
    assert result.exit_code == 2
    assert "--network" in result.stderr


def test_prove_refuses_a_changed_file_and_proves_it_when_told_to(plain: Made, tmp_path: Path):
    target = copy_of(plain, tmp_path)
    change_network(target, "vk_percent", 1 + 1e-6)
    refused = run("prove", target)
    assert refused.exit_code == 2
    assert "network.json" in refused.stderr
    assert "--edited" in refused.stderr
    failed = run("prove", target, "--edited")
    assert failed.exit_code == 1
    assert "Proof FAIL" in failed.stdout
    assert "T1" in failed.stdout.partition("Proof FAIL")[2]


@pytest.mark.parametrize("kind", ["missing", "empty", "file"])
def test_prove_of_what_build_has_not_written_is_refused(tmp_path: Path, kind: str):
    target = tmp_path / "out"
    if kind == "empty":
        target.mkdir()
    elif kind == "file":
        target.write_text("x", encoding="utf-8")
    result = run("prove", target)
    assert result.exit_code == 2
    assert "build" in result.stderr
    assert "Traceback" not in result.output


def test_rebase_of_a_spoiled_table_names_the_line_and_the_column(made: Made, tmp_path: Path):
    text = (made.folder / "branches.csv").read_text(encoding="utf-8")
    head, first, *_ = text.splitlines()
    cells = first.split(",")
    cells[head.split(",").index("x_pu")] = "much"
    path = tmp_path / "branches.csv"
    path.write_text(f"{head}\n{','.join(cells)}\n", encoding="utf-8")
    result = run("rebase", path)
    assert result.exit_code == 2
    assert "branches.csv:2" in result.stderr
    assert "x_pu" in result.stderr
    assert "'much'" in result.stderr


# --- interrupts ---------------------------------------------------------------------------------


@pytest.mark.parametrize("moment", ["while reading", "while proving", "while writing"])
@pytest.mark.parametrize("force", [False, True])
def test_an_interrupt_keeps_no_new_file(
    request: pytest.FixtureRequest,
    plain: Made,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    moment: str,
    force: bool,
):
    path, target = write(tmp_path, CLEAN), tmp_path / "out"
    if force:
        copy_of(plain, tmp_path)
    before = {name: (tmp_path / name).read_bytes() for name in files_below(tmp_path)}

    def interrupt(*_: object, **__: object) -> None:
        signal.raise_signal(signal.SIGINT)

    place, name = {
        "while reading": (study, "examine"),
        "while proving": (study.proof, "prove"),
        "while writing": (folder, "sha256"),
    }[moment]
    if moment == "while writing":
        request.getfixturevalue("at_once")
    monkeypatch.setattr(place, name, interrupt)
    result = run("build", path, "--out", target, *(["--force"] if force else []))
    monkeypatch.undo()
    assert result.exit_code == 130
    assert "interrupted" in result.stderr
    assert {name: (tmp_path / name).read_bytes() for name in files_below(tmp_path)} == before


def test_an_interrupt_that_a_library_wraps_is_still_one(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
):
    # Python wraps what is raised while a class is being made, so an interrupt that falls into the
    # import of a library comes out as a RuntimeError
    def interrupt(*_: object, **__: object) -> None:
        try:
            signal.raise_signal(signal.SIGINT)
        except KeyboardInterrupt as error:
            raise RuntimeError("Error calling __set_name__") from error

    monkeypatch.setattr(study.proof, "prove", interrupt)
    result = run("build", write(tmp_path, CLEAN), "--out", tmp_path / "out")
    assert result.exit_code == 130
    assert "interrupted" in result.stderr


# --- the installed command ----------------------------------------------------------------------


def installed() -> str:
    """The command beside the interpreter that runs the tests."""
    ending = ".exe" if os.name == "nt" else ""
    path = Path(sys.executable).with_name(f"branchwright{ending}")
    assert path.is_file(), "install the package first: pip install '.[test]'"
    return str(path)


def start_process(*arguments: object, **options: Any) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [installed(), *map(str, arguments)],
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        encoding="utf-8",
        **options,
    )


def test_the_installed_command_builds_and_says_nothing_else_in_a_pipe(tmp_path: Path):
    path = write(tmp_path, ONE_BAD)
    process = start_process("build", path.name, "--out", "out", cwd=tmp_path)
    printed, errors = process.communicate()
    assert process.returncode == 1
    assert errors == ""
    assert [line for line in printed.splitlines() if line.startswith("…")] == []
    assert "Proof PASS" in printed
    assert "T2 odd" in printed.rstrip().splitlines()[-1]
    assert (tmp_path / "out" / "record.json").is_file()


def test_the_installed_command_refuses_with_code_2(tmp_path: Path):
    path = write(tmp_path, UNREADABLE)
    process = start_process("check", path.name, cwd=tmp_path)
    printed, errors = process.communicate()
    assert process.returncode == 2
    assert printed == ""
    assert "mill.yaml:17" in errors


def test_help_loads_click_and_nothing_heavy(tmp_path: Path):
    code = (
        "import sys\n"
        "from convert.cli import main\n"
        f"for words in ([], *([name] for name in {COMMANDS!r})):\n"
        "    try:\n"
        "        main([*words, '--help'])\n"
        "    except SystemExit as end:\n"
        "        assert end.code == 0\n"
        f"loaded = set(sys.modules) & set({HEAVY!r})\n"
        "print('LOADED', sorted(loaded), 'click' in sys.modules)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], cwd=tmp_path, capture_output=True,
                          text=True, encoding="utf-8", check=True)  # fmt: skip
    assert done.stdout.splitlines()[-1] == "LOADED [] True"


def test_progress_is_for_terminals_only(monkeypatch: pytest.MonkeyPatch, capsys: Any):
    cli._progress("solving")
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    cli._progress("solving")
    assert "solving" in capsys.readouterr().err


@pytest.mark.skipif(os.name == "nt", reason="signals are another thing there")
def test_a_signal_from_outside_keeps_no_new_file(tmp_path: Path):
    # the networks are written to a scratch folder just before they are solved
    path, scratch = write(tmp_path, CLEAN), tmp_path / "scratch"
    scratch.mkdir()
    environment = {**os.environ, "TMPDIR": str(scratch)}
    process = start_process("build", path, "--out", tmp_path / "out", env=environment)
    while not any(scratch.rglob("*.json")) and process.poll() is None:
        time.sleep(0.005)
    process.send_signal(signal.SIGINT)
    _, errors = process.communicate()
    assert (process.returncode, errors) == (130, "interrupted; no new file was kept\n")
    assert below(tmp_path) == ["mill.yaml", "scratch"]


def test_a_fleet_s_networks_are_written_on_request_only(tmp_path: Path, monkeypatch):
    monkeypatch.setattr(study, "FLEET", 1)
    path = write(tmp_path, sheet(unit(), unit(name="T2")))
    for name, options, there in (("a", (), False), ("b", ("--network",), True)):
        assert run("build", path, "--out", tmp_path / name, *options).exit_code == 0
        assert (tmp_path / name / "network.json").exists() is there
