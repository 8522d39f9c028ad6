"""A file becomes text with lines: what is kept as written, and what a file may not be."""

import hashlib

import pytest

from convert.errors import BranchwrightError
from convert.intake import document
from convert.intake.document import MAX_BYTES, MAX_DEPTH, load
from convert.intake.sheet import read

# invented
SHEET = """station: {name: Mill Lane}
system: {base_power: 100 MVA, frequency: 50 Hz}
busbars:
  Mill 66: {nominal_voltage: 66 kV}
  Mill 11: {nominal_voltage: 11 kV}
transformers:
  T1:
    phases: 3
    vector_group: YNd11
    rated_power: 20 MVA
    hv: {busbar: Mill 66, rated_voltage: 66 kV}
    lv:
      busbar: Mill 11
      rated_voltage: 11 kV
"""


@pytest.fixture
def sheet(tmp_path):
    """Write a sheet (text or bytes) and return its path."""

    def write(content):
        path = tmp_path / "sheet.yaml"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write


def problems(path):
    with pytest.raises(BranchwrightError) as caught:
        read(path)
    return caught.value.problems


def only(path):
    (problem,) = problems(path)
    return problem


@pytest.mark.parametrize(
    "text", ["012345", "12:30", "off", "5.20", "2019-05-14", "1e3", "0x1F", "null", "~", "1_000"]
)
def test_text_is_kept_as_written(sheet, text):
    tree = load(sheet(SHEET.replace("Mill Lane", text))).tree
    assert tree["station"]["name"] == text


@pytest.mark.parametrize(("written", "number"), [("3", 3), ('"3"', 3), ("+3", 3), ("3.0", "3.0")])
def test_only_whole_numbers_of_the_schema_become_numbers(sheet, written, number):
    found = load(sheet(SHEET.replace("phases: 3", f"phases: {written}")))
    assert found.tree["transformers"]["T1"]["phases"] == number
    assert found.tree["transformers"]["T1"]["rated_power"] == "20 MVA"


def test_every_key_has_its_line(sheet):
    found = load(sheet(SHEET))
    unit = ("transformers", "T1")
    assert found.line(("station", "name")) == 1
    assert found.line(("busbars", "Mill 11")) == 5
    assert found.line((*unit, "hv", "rated_voltage")) == 11
    assert found.line((*unit, "lv", "rated_voltage")) == 14
    # a key that is not there stands where the one above it begins
    assert found.line((*unit, "lv", "metal")) == 12
    assert found.line((*unit, "tests", "open_circuit", 0, "volts")) == 7


def test_the_hash_is_of_the_bytes_of_the_file(sheet):
    data = b"\xef\xbb\xbf" + SHEET.encode()
    assert load(sheet(data)).sha256 == hashlib.sha256(data).hexdigest()


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
def test_a_byte_order_mark_and_any_line_ending_are_read(sheet, ending):
    found = load(sheet("\ufeff" + SHEET.replace("\n", ending)))
    assert (found.problems, found.tree["station"]) == ([], {"name": "Mill Lane"})
    assert found.line(("transformers", "T1", "lv", "busbar")) == 13


def test_a_file_that_is_not_there_is_named(tmp_path):
    said = str(only(tmp_path / "none.yaml"))
    assert said.startswith(f"{tmp_path / 'none.yaml'}: read no such file")
    assert "a station sheet" in said


def test_a_folder_is_no_sheet(tmp_path):
    said = str(only(tmp_path))
    assert said.startswith(f"{tmp_path}: read is a directory")


def test_a_path_that_no_system_can_hold_is_no_traceback():
    assert "a station sheet" in str(only("sheet\0.yaml"))


@pytest.mark.parametrize(
    ("data", "line"),
    [
        (SHEET.replace("Mill Lane", "Mühle").encode("latin-1"), 1),
        (SHEET.replace("11 kV", "11 °C").encode("cp1252"), 5),
        (SHEET.encode("utf-16"), 1),
    ],
)
def test_other_encodings_are_refused_at_their_line(sheet, data, line):
    problem = only(sheet(data))
    assert problem.line == line
    assert "UTF-8" in problem.expected


@pytest.mark.parametrize("character", ["\0", "\x07", "\x1b", "\x7f", "\x9b", "\ufffe"])
def test_a_control_character_is_named_at_its_line(sheet, character):
    problem = only(sheet(SHEET.replace("busbar: Mill 11", f"busbar: Mill{character}11")))
    assert problem.line == 13
    assert f"{ord(character):04X}" in problem.read.upper()
    assert "indentation" not in problem.mend  # there is nothing wrong with that


@pytest.mark.parametrize("escape", [r"\0", r"\e[31m", r"\x9b"])
def test_an_escape_in_quotes_brings_no_control_character_in(sheet, escape):
    problem = only(sheet(SHEET.replace("Mill Lane", f'"Mill{escape}Lane"')))
    assert (problem.line, problem.key) == (1, "station.name")


def test_a_message_prints_no_control_character(sheet):
    for problem in problems(sheet(SHEET.replace("phases:", '"\\e[2Jx\\ny": 3\n    phases:'))):
        assert str(problem).isprintable()


def test_a_message_is_no_longer_than_the_key_is_worth(sheet):
    said = problems(sheet(SHEET.replace("phases:", "k" * 900 + ": 3\n    phases:")))
    assert max(len(str(problem)) for problem in said) < 600


def test_a_file_of_the_most_bytes_is_read(sheet):
    text = SHEET + "#"
    path = sheet(text + "x" * (MAX_BYTES - len(text)))
    assert path.stat().st_size == MAX_BYTES
    assert load(path).problems == []


def test_a_file_of_more_bytes_is_refused(sheet):
    problem = only(sheet("#" + "x" * MAX_BYTES))
    assert str(MAX_BYTES) in problem.read
    assert str(MAX_BYTES) in problem.expected


def test_entries_are_counted_before_a_tree_is_made(sheet, monkeypatch):
    # the bound itself would take seconds to reach
    monkeypatch.setattr(document, "MAX_NODES", 2000)
    problem = only(sheet(SHEET + "note:\n" + "  - x\n" * 2000))
    assert "too many entries" in problem.read
    assert "2000 entries" in problem.expected
    assert problem.line > 1900


@pytest.mark.parametrize(
    "content",
    [
        "[" * 100_000,
        "{" * 100_000,
        "- " * 100_000,
        "a: " + "{a: " * (MAX_DEPTH + 1) + "1" + "}" * (MAX_DEPTH + 1),
        "\n".join(" " * depth + "a:" for depth in range(200)),
    ],
)
def test_deep_nesting_is_refused_before_a_tree_is_made(sheet, content):
    assert only(sheet(content)).line <= MAX_DEPTH + 1


def test_the_deepest_level_is_read(sheet):
    deep = "[" * (MAX_DEPTH - 2) + "x" + "]" * (MAX_DEPTH - 2)  # note stands on the second level
    said = problems(sheet(SHEET.replace("Mill Lane}", f"Mill Lane, note: {deep}}}")))
    assert [problem.key for problem in said] == ["station.note"]


def test_aliases_that_grow_are_refused_before_they_do(sheet):
    bomb = "a0: &a0 [x, x]\n"
    bomb += "".join(f"a{n}: &a{n} [*a{n - 1}, *a{n - 1}]\n" for n in range(1, 60))
    said = problems(sheet(SHEET + bomb))
    assert {problem.read.split()[1] for problem in said} == {"anchor", "alias"}
    assert len(said) == 60 + 59  # the two aliases of a line are told once


@pytest.mark.parametrize("mark", ["&power", "!!str", "!"])
def test_anchors_and_tags_do_not_hide_the_other_faults(sheet, mark):
    said = problems(sheet(SHEET.replace("20 MVA", f"{mark} 20 MW").replace("YNd11", "YNd0")))
    assert [problem.line for problem in said] == [9, 10, 10]


def test_a_quotation_mark_is_looked_for_where_it_begins(sheet):
    # the end of the file, where reading fails, says nothing to the planner
    assert only(sheet(SHEET.replace("busbar: Mill 66", "busbar: 'Mill 66"))).line == 11


@pytest.mark.parametrize(
    ("slip", "line"),
    [
        (("rated_power: 20 MVA", "rated_power: @20 MVA"), 10),
        (("rated_power: 20 MVA", "rated_power: %20"), 10),
        (("    phases: 3", "\tphases: 3"), 8),
        (("rated_power: 20 MVA", "rated_power 20 MVA"), 11),
        (("busbar: Mill 11", "busbar: Mill: 11"), 13),
    ],
)
def test_a_slip_of_yaml_is_found_at_its_line(sheet, slip, line):
    problem = only(sheet(SHEET.replace(*slip)))
    assert problem.line in (line, line + 1)
    assert "key: value" in problem.expected


def test_a_marker_at_the_end_begins_no_second_sheet(sheet):
    assert load(sheet(f"---\n{SHEET}...\n")).problems == []


def test_later_faults_stand_beside_a_key_given_twice(sheet):
    said = problems(sheet(SHEET.replace("phases: 3", "phases: 3\n    phases: 1\n    hue: 1")))
    assert [(problem.line, problem.key) for problem in said] == [
        (9, "transformers.T1.phases"),
        (10, "transformers.T1.hue"),
    ]
