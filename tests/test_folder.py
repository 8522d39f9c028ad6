"""The output folder: exact numbers, whole files or none, and nothing of the planner's touched."""

import json
import math
import os
import struct
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pandas as pd
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from test_entries import UNITS, plant

from convert import BranchwrightError, build, folder

CONTRACT = {
    "branches.csv", "units.csv", "taps.csv", "zero_sequence.csv", "losses.csv", "network.json",
    "single_phase.json", "retest.csv", "regulation.csv", "findings.csv", "record.json",
}  # fmt: skip
OLD = {"branches.csv": "old b\n", "taps.csv": "old t\n", "single_phase.json": "{}"}
NEW = {"branches.csv": "new b\n", "units.csv": "new u\n", "network.json": "{1}"}
FOREIGN = {"notes.txt": "the planner's own", "branches.xlsx": "kept", "network.json.bak": "kept"}
RECORD = "record.json"
seeded = settings(derandomize=True, deadline=None, max_examples=300)


def bits(value: float) -> bytes:
    return b"nan" if math.isnan(value) else struct.pack("<d", value)


def back_again(table: pd.DataFrame, path: Path) -> pd.DataFrame:
    path.write_text(folder.csv_text(table), encoding="utf-8", newline="\n")
    return folder.read_csv(path)


@pytest.fixture(scope="module")
def path(tmp_path_factory) -> Path:
    return tmp_path_factory.mktemp("csv") / "table.csv"


# --- text of the tables ---------------------------------------------------------------------------


@seeded
@given(st.lists(st.floats(), min_size=1, max_size=6))
@example([5e-324, -0.0, 1.7976931348623157e308])
@example([math.nan, math.inf, -math.inf])
@example([math.nan])
@example([0.1 + 0.2, 2 / 3, 1e22, 123456789012345680.0])
def test_every_float_reads_back_as_the_same_float(path, numbers):
    table = pd.DataFrame({"name": ["a"] * len(numbers), "r_pu": numbers})
    found = back_again(table, path)["r_pu"]
    assert [bits(float(value)) for value in found] == [bits(value) for value in numbers]


@seeded
@given(st.lists(st.text(alphabet="=+-@'\"\t\n, 0aé№", max_size=6), min_size=1, max_size=4))
@example(["'=1+1"])
@example(["=1+1", "+1", "-1", "@a", "\ta", "'", "''", "NA", "nan", "", "007", "1e3", "true"])
def test_every_text_reads_back_as_the_same_text(path, texts):
    table = pd.DataFrame({"name": texts, "certificate": texts, "r_pu": 0.5})
    found = back_again(table, path)
    assert list(found["name"]) == texts
    assert list(found["certificate"]) == texts


def test_a_carriage_return_in_a_text_does_not_break_the_row(path):
    """No name may hold one; whether it is quoted or made a space, the rows must stay rows."""
    texts = ["a\rb", "\r=1", "c\r\n", "plain"]
    found = back_again(pd.DataFrame({"name": texts, "r_pu": 0.5}), path)
    assert ["".join(text.split()) for text in found["name"]] == ["ab", "=1", "c", "plain"]
    assert list(found["r_pu"]) == [0.5] * 4


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t"])
def test_no_text_cell_begins_as_a_formula_does(start):
    table = pd.DataFrame({"name": [f"{start}cmd|' /C calc'!A0"], "r_pu": [-0.5]})
    line = folder.csv_text(table).split("\n", 1)[1]
    assert line.lstrip('"').startswith(f"'{start}")
    assert line.rstrip("\n").endswith(",-0.5")  # a number keeps its sign


def test_whole_numbers_stay_whole_and_absent_ones_are_empty_cells(path):
    table = pd.DataFrame({"name": ["a", "b"], "phases": [3, 1], "x_pu": [math.nan, 0.25]})
    assert folder.csv_text(table) == "name,phases,x_pu\na,3,\nb,1,0.25\n"
    found = back_again(table, path)
    assert found["phases"].dtype.kind == "i"
    assert found["x_pu"].dtype == float


# --- what is replaced, kept and refused -----------------------------------------------------------


def put(target: Path, files: dict[str, str], record: str = "") -> None:
    target.mkdir(exist_ok=True)
    for name, text in files.items():
        (target / name).write_text(text, encoding="utf-8")
    if record:
        hashes = {name: folder.sha256(target / name) for name in files}
        (target / RECORD).write_text(json.dumps({"date": record, "outputs": hashes}))


def content(target: Path) -> dict[str, str]:
    return {entry.name: entry.read_text(encoding="utf-8") for entry in target.iterdir()}


def test_the_contract_names_these_files():
    assert set(folder.CONTRACT) == CONTRACT
    assert folder.CONTRACT[-1] == RECORD


@pytest.mark.parametrize("there", [None, "empty"])
def test_a_new_or_empty_folder_gets_all_files_and_their_hashes(tmp_path, there):
    target = tmp_path / "a" / "out"
    if there:
        target.mkdir(parents=True)
    folder.write(target, NEW, {"date": "today"}, force=False)
    found = content(target)
    record = json.loads(found.pop(RECORD))
    assert found == NEW
    assert record == {"date": "today", "outputs": {n: folder.sha256(target / n) for n in NEW}}
    assert [entry.name for entry in target.parent.iterdir()] == ["out"]
    assert folder.read_record(target, edited=False) == record


@pytest.mark.parametrize("files", [FOREIGN, {RECORD: "{}"}, {".hidden": ""}])
def test_a_folder_that_holds_anything_is_refused_without_force(tmp_path, files):
    put(tmp_path / "out", files)
    with pytest.raises(BranchwrightError, match=r"not empty.*--force"):
        folder.write(tmp_path / "out", NEW, {}, force=False)
    assert content(tmp_path / "out") == files
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize("force", [False, True])
def test_a_file_in_the_folder_s_place_is_refused_even_with_force(tmp_path, force):
    (tmp_path / "out").write_text("mine")
    with pytest.raises(BranchwrightError, match="is a file"):
        folder.write(tmp_path / "out", NEW, {}, force=force)
    assert (tmp_path / "out").read_text() == "mine"


def test_force_replaces_the_contract_s_files_and_no_other(tmp_path):
    target = tmp_path / "out"
    put(target, OLD, record="before")
    put(target, FOREIGN)
    (target / "sub").mkdir()
    (target / "sub" / "units.csv").write_text("kept")
    folder.write(target, NEW, {"date": "now"}, force=True)
    assert (target / "sub" / "units.csv").read_text() == "kept"
    (target / "sub" / "units.csv").unlink()
    (target / "sub").rmdir()
    found = content(target)
    assert json.loads(found.pop(RECORD))["date"] == "now"
    assert found == {**NEW, **FOREIGN}  # what the new run does not write is gone
    assert folder.read_record(target, edited=False)["date"] == "now"


def test_a_folder_in_which_the_planner_stands_stays_that_folder(tmp_path, monkeypatch):
    """`build ... --out .` in an empty folder: the files must be there, not in a twin of it."""
    here = tmp_path / "here"
    here.mkdir()
    monkeypatch.chdir(here)
    folder.write(Path(), NEW, {}, force=False)
    assert set(os.listdir()) == {*NEW, RECORD}  # noqa: PTH208 - what the shell's own folder holds


# --- interrupts -----------------------------------------------------------------------------------


class Interrupter:
    """Counts the calls that change the disk, notes them, and fails at one of them."""

    METHODS = ("write_text", "replace", "rename", "unlink", "rmdir", "mkdir", "chmod")

    def __init__(self, patch: pytest.MonkeyPatch, at: int, error: BaseException) -> None:
        self.at, self.error, self.calls = at, error, []
        for method in self.METHODS:
            patch.setattr(Path, method, self._counted(method, getattr(Path, method)))

    def _counted(self, name: str, method: Callable) -> Callable:
        def call(path: Path, *args: object, **options: object) -> object:
            self.calls.append((name, path.name))
            if len(self.calls) == self.at:
                raise self.error
            return method(path, *args, **options)

        return call


def interrupted_at_every_call(
    monkeypatch: pytest.MonkeyPatch, prepare: Callable[[], Path], error: BaseException
) -> Iterator[Path]:
    """Yield the folder after a run that failed at its first, second, ... change of the disk."""
    at = 1
    while True:
        target = prepare()
        with monkeypatch.context() as patch:
            interrupter = Interrupter(patch, at, error)
            try:
                folder.write(target, NEW, {"date": "now"}, force=True)
            except type(error):
                pass
            else:
                assert len(interrupter.calls) < at
                return
        yield target
        at += 1


FAILURES = [KeyboardInterrupt(), OSError(28, "No space left on device")]


def names(home: Path) -> Callable[[str], Path]:
    """A fresh subfolder at each call."""
    count = iter(range(1000))
    return lambda: home / f"run{next(count)}"


@pytest.mark.parametrize("error", FAILURES, ids=["interrupt", "disk full"])
def test_a_failed_first_run_leaves_nothing_or_everything(tmp_path, monkeypatch, error):
    fresh, runs = names(tmp_path), 0
    for target in interrupted_at_every_call(monkeypatch, lambda: fresh() / "out", error):
        if target.exists():
            assert folder.read_record(target, edited=False)["date"] == "now"
            assert set(content(target)) == {*NEW, RECORD}
        if target.parent.exists():
            assert {entry.name for entry in target.parent.iterdir()} <= {"out"}
        runs += 1
    assert runs > len(NEW)  # every file written, and the rename


@pytest.mark.parametrize("error", FAILURES, ids=["interrupt", "disk full"])
def test_a_failed_run_into_an_empty_folder_leaves_the_folder(tmp_path, monkeypatch, error):
    fresh = names(tmp_path)

    def prepare() -> Path:
        target = fresh() / "out"
        os.makedirs(target)  # noqa: PTH103 - Path.mkdir is watched
        return target

    for target in interrupted_at_every_call(monkeypatch, prepare, error):
        assert [entry.name for entry in target.parent.iterdir()] == ["out"]
        assert content(target) == {} or folder.read_record(target, edited=False)


@pytest.mark.parametrize("error", FAILURES, ids=["interrupt", "disk full"])
def test_a_failed_replacement_leaves_no_record_or_a_whole_state(tmp_path, monkeypatch, error):
    fresh, seen = names(tmp_path), set()

    def prepare() -> Path:
        home = fresh()
        home.mkdir()
        put(home / "out", OLD, record="before")
        put(home / "out", FOREIGN)
        return home / "out"

    for target in interrupted_at_every_call(monkeypatch, prepare, error):
        assert [entry.name for entry in target.parent.iterdir()] == ["out"]
        found = content(target)
        assert {name: found.pop(name) for name in FOREIGN} == FOREIGN
        date = json.loads(found.pop(RECORD))["date"] if RECORD in found else "none"
        if date != "none":
            assert folder.read_record(target, edited=False)
            assert found == {"before": OLD, "now": NEW}[date]
        for name, text in found.items():  # each file is wholly old or wholly new
            assert text in (OLD.get(name), NEW.get(name))
        seen.add(date)
    assert {"before", "none"} <= seen


def test_the_record_goes_first_and_comes_last(tmp_path, monkeypatch):
    put(tmp_path / "out", OLD, record="before")
    interrupter = Interrupter(monkeypatch, -1, KeyboardInterrupt())
    folder.write(tmp_path / "out", NEW, {}, force=True)
    changes = [call for call in interrupter.calls if call[0] in ("unlink", "replace", "rename")]
    assert changes[0] == ("unlink", RECORD)
    assert changes[-1] == ("replace", RECORD)
    written = [name for call, name in changes if call == "replace"]
    assert sorted(written) == sorted([*NEW, RECORD])  # one rename each


# --- the record -----------------------------------------------------------------------------------


def test_a_record_is_held_against_the_files(tmp_path):
    put(tmp_path / "out", OLD, record="before")
    assert folder.read_record(tmp_path / "out", edited=False)["date"] == "before"
    (tmp_path / "out" / "taps.csv").write_text("other")
    with pytest.raises(BranchwrightError, match=r"taps\.csv: changed since.*--edited"):
        folder.read_record(tmp_path / "out", edited=False)
    assert folder.read_record(tmp_path / "out", edited=True)["date"] == "before"
    (tmp_path / "out" / "taps.csv").unlink()
    for edited in (False, True):
        with pytest.raises(BranchwrightError, match=r"taps\.csv: missing"):
            folder.read_record(tmp_path / "out", edited=edited)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (None, "not found; name a folder that build has written"),
        ("", "is no record"),
        ("{}", "is no record"),
        ("[]", "is no record"),
        ('{"outputs": 3}', "is no record"),
        ('{"outputs": {"branches.csv": ', "is no record"),
        ('"outputs"', "is no record"),
    ],
)
def test_what_is_no_record_is_refused(tmp_path, text, message):
    if text is not None:
        (tmp_path / RECORD).write_text(text)
    with pytest.raises(BranchwrightError, match=message):
        folder.read_record(tmp_path, edited=True)


# --- one file -------------------------------------------------------------------------------------


def test_one_file_is_written_once_and_replaced_only_by_force(tmp_path):
    target = tmp_path / "sheet.yaml"
    folder.write_file(target, "one\n", force=False)
    with pytest.raises(BranchwrightError, match="exists; name another file, or add --force"):
        folder.write_file(target, "two\n", force=False)
    assert target.read_bytes() == b"one\n"
    folder.write_file(target, "two\n", force=True)
    assert target.read_bytes() == b"two\n"
    with pytest.raises(BranchwrightError, match="does not exist"):
        folder.write_file(tmp_path / "no" / "sheet.yaml", "", force=True)
    assert [entry.name for entry in tmp_path.iterdir()] == ["sheet.yaml"]


def test_one_file_that_fails_leaves_the_old_one(tmp_path, monkeypatch):
    target = tmp_path / "sheet.yaml"
    target.write_text("old")
    Interrupter(monkeypatch, 2, KeyboardInterrupt())  # chmod, then the rename
    with pytest.raises(KeyboardInterrupt):
        folder.write_file(target, "new", force=True)
    assert [entry.name for entry in tmp_path.iterdir()] == ["sheet.yaml"]
    assert target.read_text() == "old"


# --- a whole run ----------------------------------------------------------------------------------


def test_the_same_sheet_gives_the_same_bytes_but_for_the_date(tmp_path):
    """The second run is another process with another order of sets, at another time."""
    kept = {name: UNITS[name] for name in ("Opposite", "Assumed")}
    build(plant(tmp_path, kept)).write(tmp_path / "one")
    program = (
        "import sys; from convert import build, read; "
        "build(read(sys.argv[1])).write(sys.argv[2])"
    )  # fmt: skip
    subprocess.run(
        [sys.executable, "-c", program, tmp_path / "station.yaml", tmp_path / "two"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONHASHSEED": "1234"},
        check=True,
    )
    one, two = content(tmp_path / "one"), content(tmp_path / "two")
    records = [json.loads(run.pop(RECORD)) for run in (one, two)]
    assert one == two
    assert all(record.pop("date") for record in records)
    assert records[0] == records[1]
    assert list(records[0]) == list(records[1])
