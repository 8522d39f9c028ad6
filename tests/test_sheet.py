"""Station sheets, read: good ones into columns, bad ones into the messages that stand beside them.

tests/sheets/bad/<name>.txt holds, line by line, what reading <name>.yaml must say.
"""

import os
import tempfile
from pathlib import Path

import numpy as np
import pytest
import yaml
from hypothesis import given, settings
from hypothesis import strategies as st

from convert.errors import BranchwrightError
from convert.intake.fields import layout
from convert.intake.sheet import read
from convert.plant import Status

SHEETS = Path(__file__).parent / "sheets"
GOOD = sorted((SHEETS / "good").glob("*.yaml"))
BAD = sorted((SHEETS / "bad").glob("*.yaml"))
FUZZ = settings(derandomize=True, deadline=None, max_examples=100)


def problems(path):
    with pytest.raises(BranchwrightError) as caught:
        read(path)
    return caught.value.problems


@pytest.mark.parametrize("path", GOOD, ids=lambda path: path.stem)
def test_a_good_sheet_is_read(path):
    plant = read(path)
    assert plant.transformers.n >= 1
    assert np.isin(plant.transformers["phases"], (1, 3)).all()
    assert (plant.transformers.word("vector_group") != "").all()


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_a_bad_sheet_says_what_stands_beside_it(path):
    said = [str(problem).replace(f"{path.parent}{os.sep}", "") for problem in problems(path)]
    wanted = path.with_suffix(".txt").read_text(encoding="utf-8").splitlines()
    assert sorted(said) == sorted(wanted)


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_faults_are_told_from_top_to_bottom_and_each_once(path):
    said = problems(path)
    lines = [problem.line for problem in said]
    assert lines == sorted(lines)
    assert len(said) == len(set(said))


def test_every_bad_sheet_has_its_messages_and_every_message_its_sheet():
    texts = {path.stem for path in (SHEETS / "bad").glob("*.txt")}
    assert texts == {path.stem for path in BAD}


# invented
NAMED = """station: {{name: Mill Lane}}
system: {{base_power: 100 MVA, frequency: 50 Hz}}
busbars: {{Mill 66: {{nominal_voltage: 66 kV}}, Mill 11: {{nominal_voltage: 11 kV}}}}
transformers:
  {0}:
    {{phases: 3, vector_group: YNd11, rated_power: 20 MVA,
     hv: {{busbar: Mill 66, rated_voltage: 66 kV}}, lv: {{busbar: Mill 11, rated_voltage: 11 kV}}}}
"""


@pytest.mark.parametrize(
    "name",
    [
        "'=T1'", "'@T1'", "+T1", "-T1", "../T1", "T1/../T2", "C:\\T1", "'T1 '", "' T1'", "''",
        '"T1\\n"', '"T1\\t"', '"T1\\r"', '"\\e[31mT1"', "T" * 65, "T1|calc", "T1;rm", "_T1", "<T1>",
        '"T1\\u202E"',
    ],
)  # fmt: skip
def test_a_name_that_a_program_would_act_on_is_refused(tmp_path, name):
    path = tmp_path / "sheet.yaml"
    path.write_text(NAMED.format(name), encoding="utf-8")
    (problem,) = problems(path)
    assert problem.line == 5
    assert "name" in problem.expected


@pytest.mark.parametrize(
    "name", ["T1", "1", "T" * 64, "66/11 kV T1 (spare)", "Mühle #2", "変圧器 1"]
)
def test_a_name_that_planners_write_is_read(tmp_path, name):
    path = tmp_path / "sheet.yaml"
    path.write_text(NAMED.format(f"'{name}'"), encoding="utf-8")
    assert list(read(path).transformers.text["name"]) == [name]


def test_three_readings_become_one():
    plant = read(SHEETS / "good" / "three_readings.yaml")
    test, ohms = plant.open_circuit, plant.resistance
    # (11.01 + 11.00 + 10.99)/3 kV, (3.31 + 2.62 + 3.35)/3 A; 4.1 + 5.0 + 5.1 kW
    assert test["volts"] == pytest.approx([11000.0], rel=1e-15)
    assert test["amps"] == pytest.approx([9.28 / 3], rel=1e-15)
    assert test["watts"] == pytest.approx([14200.0], rel=1e-15)
    assert ohms["ohms"][0] == pytest.approx(0.762, rel=1e-15)
    assert test["amps_spread"] == pytest.approx([0.73 / (9.28 / 3)], rel=1e-12)
    # half digits: of 10 V, 1 V and 10 V a third each; of 10 mA, 1 mA and 10 mA; of 100 W the sum
    assert test.half_digit["volts"] == pytest.approx([(5 + 0.5 + 5) / 3], rel=1e-12)
    assert test.half_digit["amps"] == pytest.approx([(5e-3 + 0.5e-3 + 5e-3) / 3], rel=1e-12)
    assert test.half_digit["watts"] == pytest.approx([150.0], rel=1e-12)


def test_one_reading_has_no_spread():
    test = read(SHEETS / "good" / "three_phase.yaml").open_circuit
    assert test["volts_spread"] == [0.0]


def test_every_value_keeps_its_line_and_its_print():
    path = SHEETS / "good" / "three_phase.yaml"
    lines = path.read_text(encoding="utf-8").splitlines()
    plant = read(path)
    seen = 0
    for table in (plant.busbars, plant.transformers, plant.open_circuit, plant.short_circuit,
                  plant.resistance):  # fmt: skip
        for spec in layout().fields.values():
            for row in range(table.n):
                line = table.line[spec.column][row] if spec.column in table.line else 0
                if line and spec.column in table.text:
                    assert table.text[spec.column][row] in lines[line - 1]
                    assert spec.path[-1] in lines[line - 1]
                    seen += 1
    assert seen > 25


def test_the_status_says_what_a_value_rests_on():
    measured = read(SHEETS / "good" / "three_phase.yaml")
    assert measured.short_circuit.status["watts"] == [Status.MEASURED]
    assert measured.transformers.status["results_load_loss"] == [Status.ABSENT]
    given = read(SHEETS / "good" / "results_only.yaml").transformers
    assert given.status["results_load_loss"] == [Status.GIVEN]
    assert given["results_no_load_current"] == pytest.approx([0.0032], rel=1e-15)
    assumed = read(SHEETS / "good" / "assumed.yaml").transformers
    assert assumed.status["assume_no_load_loss"] == [Status.ASSUMED]


def test_a_group_by_its_parts_is_the_group_by_its_name():
    units = read(SHEETS / "good" / "connection_and_clock.yaml").transformers
    assert list(units.text["vector_group"]) == ["YNd11", "Dyn1"]
    assert list(units["clock"]) == [11, 1]


def test_the_signs_of_units_are_read_alike():
    plant = read(SHEETS / "good" / "unit_signs.yaml")
    assert plant.resistance["ohms"] == pytest.approx([26.0, 0.0125], rel=1e-15)
    assert list(plant.resistance["temperature"]) == [-5.0, 21.5]
    # 415.7 V / √3
    assert plant.open_circuit["volts"] == pytest.approx([240.0045], abs=1e-4)
    assert plant.short_circuit["amps"] == pytest.approx([2.27], rel=1e-15)


def test_identity_is_kept_as_printed():
    units = read(SHEETS / "good" / "text_stays_text.yaml").transformers
    kept = [units.text[f"certificate_{key}"][0] for key in ("number", "serial", "date")]
    assert kept == ["12:30", "012345", "2019-05-14"]


def test_the_points_of_the_regulation_table_are_read():
    system = read(SHEETS / "good" / "study_points.yaml").system
    assert system.load_fractions == pytest.approx((0.1, 1.2))
    assert system.power_factors == ((0.7, "lagging"), (1.0, "unity"), (0.95, "leading"))


# fuzzing ------------------------------------------------------------------------------------------


def assert_read_or_refused(data):
    """Any bytes are a sheet, or refused in printable lines that say what was read and expected."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "sheet.yaml"
        path.write_bytes(data)
        try:
            read(path)
            said = []
        except BranchwrightError as error:
            said = [str(problem) for problem in error.problems] or [""]
    for line in said:
        assert line.startswith(f"{path}:")
        assert ": read " in line
        assert "; expected " in line
        assert line.isprintable(), line


PIECES = st.one_of(
    st.binary(max_size=6),
    st.sampled_from(
        [b"\0", b"\xff", b"\xc3", b"\xef\xbb\xbf", b"\t", b"\n", b"\n\n- ", b": ", b"?", b"&a ",
         b"*a", b"!x ", b"!!int ", b"<<: ", b"---\n", b"...", b"%TAG", b"#", b"'", b'"', b'"\\e"',
         b"[", b"]", b"{", b"}", b"|\n", b">-", b"[]", b"{}", b"1e999 V", b"0e400 V", b"nan",
         b"\xe2\x80\xa8", b"\xc2\x85", b"\\x00"]
    ),
)  # fmt: skip


@st.composite
def mutated_sheets(draw):
    data = draw(st.sampled_from(GOOD)).read_bytes()
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(data)))
        end = min(len(data), start + draw(st.sampled_from([0, 0, 1, 2, 8, 60])))
        data = data[:start] + draw(PIECES) + data[end:]
    return data


@FUZZ
@given(mutated_sheets())
def test_changed_bytes_are_read_or_refused(data):
    assert_read_or_refused(data)


KEYS = sorted({part for path in layout().fields for part in path if part not in ("*", "[]")})
TEXTS = st.one_of(
    st.text(max_size=12),
    st.sampled_from(["T1", "Mill 11", "hv", "3", "1", "11 kV", "20 MVA", "5 W", "-1 A", "Yy0", ""]),
)  # fmt: skip
TREES = st.recursive(
    st.one_of(TEXTS, st.none(), st.booleans(), st.integers(), st.floats()),
    lambda inner: st.one_of(
        st.lists(inner, max_size=4),
        st.dictionaries(st.one_of(st.sampled_from(KEYS), TEXTS), inner, max_size=6),
    ),
    max_leaves=30,
)


@st.composite
def sheet_trees(draw):
    """A good sheet with some of its parts, at any depth, replaced by trees of any form."""
    tree = yaml.load(draw(st.sampled_from(GOOD)).read_text("utf-8-sig"), yaml.BaseLoader)
    for _ in range(draw(st.integers(1, 3))):
        node = tree
        while True:
            keys = list(node) if isinstance(node, dict) else list(range(len(node)))
            if not keys:
                break
            key = draw(st.sampled_from(keys))
            if not isinstance(node[key], (dict, list)) or draw(st.integers(0, 4)) == 0:
                node[key] = draw(TREES)
                break
            node = node[key]
    return tree


@FUZZ
@given(st.one_of(TREES, sheet_trees(), sheet_trees(), sheet_trees()))
def test_changed_trees_are_read_or_refused(tree):
    assert_read_or_refused(yaml.safe_dump(tree, allow_unicode=True).encode())
