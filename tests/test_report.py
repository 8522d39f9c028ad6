"""What is printed, from small tables made by hand: alignment, width, order, verdict, data."""

import json
import math

import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from convert import report
from convert.errors import Finding, Severity
from convert.report import (
    WIDTH,
    check_text,
    findings_text,
    grid,
    json_text,
    table_text,
    verdict_line,
)

METHODS = ("phasor", "ieee_c57_12_90", "iec_60076_8")


def retest(*verdicts: str, name: str = "T1") -> pd.DataFrame:
    rows = [
        {"name": name, "state": "tested", "test": "open circuit", "quantity": f"lv {word}",
         "unit": unit, "certificate": "3.31 A, 2.62 A, 3.35 A", "correction": "",
         "expected": 10.0, "retest": 10.0 if verdict == "pass" else math.nan,
         "difference_percent": 2e-12 if verdict == "pass" else math.inf, "verdict": verdict}
        for verdict, word, unit in zip(verdicts, ("amps", "watts", "volts"), "AWV", strict=False)
    ]  # fmt: skip
    return pd.DataFrame(rows)


def regulation(*verdicts: str, loads: tuple[float, ...] = (0.5, 1.0)) -> pd.DataFrame:
    rows = [
        {"name": "T1", "load_fraction": load, "power_factor": 0.8, "sense": "lagging",
         "method": method, "hand_percent": 5.28, "flow_percent": 5.28, "difference_points": 1e-4,
         "bound_points": 2e-4, "verdict": "pass"}
        for load in loads for method in METHODS
    ]  # fmt: skip
    table = pd.DataFrame(rows)
    for at, verdict in enumerate(verdicts):
        table.loc[at, "verdict"] = verdict
    return table


# --- grids and tables ---------------------------------------------------------------------------


def test_numbers_stand_to_the_right_and_words_to_the_left():
    lines = grid(("unit", "x"), [("T1", "1.5"), ("T22", "-10.25")])
    assert lines == ["unit       x", "T1       1.5", "T22   -10.25"]


def test_a_column_with_an_empty_cell_is_still_one_of_numbers():
    assert grid(("a", "b"), [("1", "x"), ("", "y")]) == ["a  b", "1  x", "   y"]


def test_a_grid_without_rows_is_its_heading():
    assert grid(("unit", "x"), []) == ["unit  x"]


def test_no_line_ends_in_blanks():
    lines = grid(("unit", "note"), [("T1", "long text"), ("T2", "")])
    assert lines == [line.rstrip() for line in lines]


def test_a_wide_table_is_printed_in_blocks_that_each_name_the_unit():
    table = pd.DataFrame({"name": ["T1", "T2"], **{f"column_{n}": [1.0, 2.0] for n in range(20)}})
    blocks = table_text(table).split("\n\n")
    assert len(blocks) > 1
    for block in blocks:
        head, *rows = block.split("\n")
        assert head.startswith("name")
        assert [row.split()[0] for row in rows] == ["T1", "T2"]
    heads = " ".join(block.split("\n")[0] for block in blocks)
    assert [f"column_{n}" for n in range(20)] == [w for w in heads.split() if w != "name"]


@settings(derandomize=True, deadline=None, max_examples=60)
@given(
    st.lists(st.floats(allow_nan=True, allow_infinity=False), min_size=1, max_size=4),
    st.lists(st.text("abcxyz_", min_size=1, max_size=30), min_size=1, max_size=25, unique=True),
)
def test_no_table_is_wider_than_the_page(cells: list[float], names: list[str]):
    table = pd.DataFrame({"unit name": [f"T{n}" for n in range(len(cells))],
                          **dict.fromkeys(names, cells)})  # fmt: skip
    assert max(map(len, table_text(table).split("\n"))) <= WIDTH


def test_a_table_of_long_names_is_not_wider_either():
    # 64 letters is the longest name that a sheet may have
    table = pd.DataFrame({"name": ["A" * 64], "from_busbar": ["B" * 64], "r_pu": [0.02]})
    assert max(map(len, table_text(table).split("\n"))) <= WIDTH


def test_a_cell_that_holds_no_number_is_empty():
    table = pd.DataFrame({"name": ["T1", "T2"], "r_delta": [math.nan, 1.5]})
    assert "nan" not in table_text(table)


# --- findings -----------------------------------------------------------------------------------

ERROR = Finding(Severity.ERROR, "T9", "metal-missing", "a.yaml:3 hv.metal", "nothing",
                "copper or aluminium", "left out", "state it")  # fmt: skip
CAUTION = Finding(Severity.CAUTION, "T1", "stray-loss", "a.yaml:7", "-3 %", "0 to 60 %", "wrong",
                  "ohms", "common practice, no source")  # fmt: skip
NOTE = Finding(Severity.NOTE, "T1", "exact-circuit", "a.yaml", "x", "y", "z")


def test_the_worst_findings_come_first():
    text = findings_text([NOTE, CAUTION, ERROR])
    heads = [line.partition(":")[0] for line in text.split("\n") if not line.startswith(" ")]
    assert heads == ["error", "caution", "note"]


def test_a_finding_is_printed_whole():
    text = " ".join(findings_text([CAUTION]).split())
    for part in ("caution", "stray-loss", "T1", "a.yaml:7", "-3 %", "0 to 60 %", "wrong", "ohms",
                 "common practice, no source"):  # fmt: skip
        assert part in text


def test_no_findings_is_said():
    assert findings_text([]) == "No findings."


def test_a_long_finding_is_wrapped_and_hangs():
    long = Finding(Severity.NOTE, "T1", "a-rule", "r", "found " * 60, "e", "f")
    lines = findings_text([long]).split("\n")
    assert len(lines) > 3
    assert max(map(len, lines)) <= WIDTH
    assert all(line.startswith("    ") for line in lines[1:])


def test_check_counts_each_kind_in_its_number():
    text = check_text([ERROR, CAUTION, NOTE, NOTE], 2, ["T9"])
    assert "2 units can be built: 1 error, 1 caution, 2 notes." in text
    assert text.split("\n")[-1].endswith("T9")


def test_one_unit_is_not_called_units():
    assert "1 unit can be built: 0 errors" in check_text([], 1, [])


def test_many_units_left_out_are_counted_rather_than_listed():
    text = check_text([], 3, [f"T{n}" for n in range(40)])
    last = " ".join(text.split("\n\n")[-1].split())
    assert "T0, T1" in last
    assert last.endswith("and 28 more")


# --- the proof ----------------------------------------------------------------------------------


def test_a_proof_that_holds_passes():
    text = " ".join(verdict_line(retest("pass", "pass"), regulation()).split())
    assert text.startswith("Proof PASS: 2 of 2 checks agree, worst difference 2.0e-12 %")
    assert "6 of 6 regulation points" in text
    assert "phasor 50 %" in text


@pytest.mark.parametrize(
    ("readings", "points", "counts"),
    [(("pass", "fail"), (), ("1 of 2", "6 of 6")), (("pass",), ("fail",), ("1 of 1", "5 of 6"))],
)
def test_one_failure_anywhere_fails_the_proof(readings: tuple, points: tuple, counts: tuple):
    text = " ".join(verdict_line(retest(*readings), regulation(*points)).split())
    assert text.startswith("Proof FAIL")
    assert all(count in text for count in counts)


def test_a_failed_row_is_shown_though_it_is_at_part_load():
    text = report.proof_text(retest("pass"), regulation("fail"))
    (line,) = [line for line in text.split("\n") if line.endswith("fail")]
    assert "phasor" in line


def test_a_failed_row_tells_its_own_load():
    # the table's heading speaks of full load; a row at half load must not pass for one
    text = report.proof_text(retest("pass"), regulation("fail"))
    (line,) = [line for line in text.split("\n") if line.endswith("fail")]
    assert "50 %" in line


def test_every_reading_is_listed_under_its_unit():
    both = pd.concat([retest("pass"), retest("pass", name="T2")], ignore_index=True)
    lines = report.proof_text(both, regulation()).split("\n")
    at = [lines.index("T1:"), lines.index("T2:")]
    assert at[1] == at[0] + 2
    assert "lv amps" in lines[at[0] + 1]


def test_points_that_are_not_listed_are_counted():
    assert "3 more points in regulation.csv" in report.proof_text(retest("pass"), regulation())


def test_no_line_of_a_proof_is_wider_than_the_page_for_the_longest_name():
    table = regulation()
    table["name"] = "A" * 64
    text = report.proof_text(retest("pass", "fail", name="A" * 64), table)
    assert max(map(len, text.split("\n"))) <= WIDTH


def test_the_proof_as_data_counts_both_tables():
    found = report.proof_data(retest("pass", "fail"), regulation())
    assert (found["verdict"], found["passed"], found["rows"]) == ("fail", 7, 8)
    assert found["bound_use_phasor"] == pytest.approx(0.5)


# --- data ---------------------------------------------------------------------------------------


def test_data_keeps_every_digit_and_has_null_for_no_number():
    table = pd.DataFrame({"a": [0.1 + 0.2, math.nan, math.inf], "b": ["x", "", "µΩ"]})
    found = json.loads(json_text({"rows": table, "inner": {"worst": math.nan}, "words": ["T1"]}))
    assert found == {
        "rows": [{"a": 0.1 + 0.2, "b": "x"}, {"a": None, "b": ""}, {"a": None, "b": "µΩ"}],
        "inner": {"worst": None},
        "words": ["T1"],
    }


def test_data_reads_as_it_is_written():
    assert "µΩ" in json_text({"a": "µΩ"})


def test_an_empty_table_is_an_empty_list():
    assert json.loads(json_text({"rows": pd.DataFrame(columns=["a"])})) == {"rows": []}
