"""A branch table on another base: there and back, as built there afresh, and held to its file."""

import math
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from test_entries import HEAD, plant

from convert import BranchwrightError, entries, folder, rebase, unitsheet
from convert.basechange import EXTRAS, read_branches, read_busbars
from convert.study import examine

MOVED = ("r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu", "base_mva", "base_kv_from", "base_kv_to")
#: nominal volts [kV] in place of the sheet's, single-phase busbars among them
OTHER = {"Hill 33": 34.5, "Mill 11": 11.5, "Dale 11": 10.5, "Lane 11": 11.43, "Yard 0.4": 0.415,
         "Hut 0.24": 0.25, "Shed 0.48": 0.5}  # fmt: skip
SINGLE = ["Neutral", "Reversed", "Line"]


def branches(home: Path, head: str = HEAD) -> pd.DataFrame:
    """Branch table of the units of every kind, built from their sheet."""
    study = plant(home, head=head)
    return pd.DataFrame(entries.branch_table(study, examine(study)[0], "T"))


@pytest.fixture(scope="module")
def home(tmp_path_factory) -> Path:
    return tmp_path_factory.mktemp("basechange")


@pytest.fixture(scope="module")
def table(home) -> pd.DataFrame:
    return branches(home)


@pytest.fixture
def file(table, tmp_path) -> Path:
    target = tmp_path / "branches.csv"
    target.write_text(folder.csv_text(table), encoding="utf-8", newline="\n")
    return target


def with_volts(head: str, volts: dict[str, float]) -> str:
    for name, kv in volts.items():
        old = next(line for line in head.split("\n") if line.startswith(f"  {name}:"))
        head = head.replace(old, f"  {name}: {{nominal_voltage: {kv} kV}}")
    return head


# --- there and back, and as built there -----------------------------------------------------------


#: nominal volts of the sheet [V]
HOME = {"Hill 33": 33e3, "Mill 11": 11e3, "Yard 0.4": 400.0, "Dale 11": 11e3, "Lane 11": 11e3,
        "Hut 0.24": 240.0, "Shed 0.48": 480.0}  # fmt: skip
#: only single-phase branches end here: whether across lines or to neutral must be told
ALONE = ("Hut 0.24", "Shed 0.48")
factors = st.fixed_dictionaries({name: st.floats(0.01, 100) for name in HOME})


def moved(new: dict[str, float], old: dict[str, float] = HOME) -> dict[str, float | tuple]:
    """New volts, with the old ones beside them where they must be told."""
    return {name: (old[name], volts) if name in ALONE else volts for name, volts in new.items()}


@settings(derandomize=True, deadline=None, max_examples=100)
@given(mva=st.floats(1e-3, 1e5), factor=factors)
def test_there_and_back_gives_the_same_table(table, mva, factor):
    far = {name: HOME[name] * factor[name] for name in HOME}
    there = rebase(table, mva * 1e6, moved(far))
    back = rebase(there, 100e6, moved(HOME, far))
    for column in MOVED:
        np.testing.assert_allclose(back[column], table[column], rtol=4e-15, atol=0, err_msg=column)
    kept = [column for column in table if column not in MOVED]
    pd.testing.assert_frame_equal(back[kept], table[kept], check_exact=True)


@pytest.mark.parametrize(
    ("mva", "kv"), [(25.0, {}), (100.0, OTHER), (1000 / 3, OTHER), (0.1, {"Dale 11": 12.1})]
)
def test_a_carried_table_is_the_one_built_on_that_base(home, table, mva, kv):
    volts = {name: value * 1e3 for name, value in kv.items()}
    found = rebase(table, mva * 1e6, moved(volts))
    head = with_volts(HEAD, kv).replace("base_power: 100 MVA", f"base_power: {mva!r} MVA")
    fresh = branches(home, head)
    for column in MOVED:
        np.testing.assert_allclose(found[column], fresh[column], rtol=1e-13, err_msg=column)
    others = [column for column in table if column not in MOVED]
    pd.testing.assert_frame_equal(found[others], fresh[others])
    if kv:  # and it did move
        assert not np.allclose(found["ratio_pu"], table["ratio_pu"], rtol=1e-6)


def test_without_new_base_or_volts_nothing_moves(table):
    pd.testing.assert_frame_equal(rebase(table), table, check_exact=True)


def test_the_table_given_is_left_as_it_was(table):
    before = table.copy(deep=True)
    rebase(table, 25e6, {"Dale 11": 10.5e3}, EXTRAS)
    pd.testing.assert_frame_equal(table, before, check_exact=True)


def test_a_base_ten_times_smaller_makes_impedance_ten_times_smaller(table):
    """The rule on one's fingers: z goes with the base power, y against it, the ratio stays."""
    found = rebase(table, 10e6)
    np.testing.assert_allclose(found["x_pu"], table["x_pu"] / 10, rtol=1e-15)
    np.testing.assert_allclose(found["b_pu"], table["b_pu"] * 10, rtol=1e-15)
    np.testing.assert_allclose(found["ratio_pu"], table["ratio_pu"], rtol=1e-15)


def test_single_phase_rows_take_a_third_of_the_base_and_their_own_volts(table):
    volts = {"Dale 11": 12e3, "Hut 0.24": 250.0, "Lane 11": 12e3}
    found = rebase(table, 30e6, moved(volts))
    rows = found.set_index("name")
    np.testing.assert_allclose(rows.loc[SINGLE, "base_mva"], 10.0, rtol=1e-15)
    assert rows.at["Neutral", "base_kv_from"] == pytest.approx(12 / math.sqrt(3), rel=1e-15)
    assert rows.at["Neutral", "base_kv_to"] == 0.25  # line to line
    assert rows.at["Line", "base_kv_from"] == 12.0
    assert rows.at["Given", "base_kv_from"] == 12.0  # the three-phase unit on Dale 11
    # ohms seen from the to side stay what they are
    for name in SINGLE:
        ohms = [
            one.at[name, "x_pu"] * one.at[name, "base_kv_to"] ** 2 / one.at[name, "base_mva"]
            for one in (rows, table.set_index("name"))
        ]
        assert ohms[0] == pytest.approx(ohms[1], rel=1e-14)


def test_single_phase_branches_alone_on_a_busbar_want_its_old_volts(table):
    """240 V across the lines of 240 V, or to neutral of 416 V: the table does not say which."""
    with pytest.raises(BranchwrightError) as caught:
        rebase(table, None, {"Hut 0.24": 250.0})
    lines = [str(line) for line in caught.value.problems]
    assert [line.split(":")[0] for line in lines] == ["Neutral", "Reversed"]
    assert "0.24 kV on Hut 0.24" in lines[0]
    assert "`was`" in lines[0]


@pytest.mark.parametrize("was", [230.0, 400.0])
def test_old_volts_that_the_branch_cannot_lie_across_are_refused(table, was):
    with pytest.raises(BranchwrightError, match="Neutral: single-phase"):
        rebase(table, None, {"Hut 0.24": (was, 250.0)})


@pytest.mark.parametrize("kv", [13.8, 15.0, 19.0, 20.0, 22.0])
def test_a_line_to_line_branch_never_turns_into_a_line_to_neutral_one(table, kv):
    """20 kV on an 11 kV busbar is 11.5 kV to neutral, near 11 kV; yet `Line` lies across lines."""
    try:
        found = rebase(table, None, {"Lane 11": kv * 1e3}).set_index("name")
    except BranchwrightError as error:
        assert "Line: single-phase, 11 kV on Lane 11" in str(error)  # noqa: PT017 - refusing is right
    else:
        assert found.at["Line", "base_kv_from"] == kv


def test_a_three_phase_branch_moves_to_any_volts(table):
    found = rebase(table, None, {"Hill 33": 132e3}).set_index("name")
    assert found.at["Staged", "base_kv_from"] == 132.0
    assert found.at["Staged", "ratio_pu"] == pytest.approx(0.25, rel=1e-15)


def test_a_busbar_that_no_branch_has_is_refused_with_those_there_are(table):
    with pytest.raises(BranchwrightError, match=r"busbar 'Hill 34': no branch ends on it.*Hill 33"):
        rebase(table, None, {"Hill 34": 33e3})


# --- extra columns --------------------------------------------------------------------------------


def test_extra_columns_are_those_of_the_unit_table_on_any_base(home, table):
    study = plant(home)
    units = pd.DataFrame(unitsheet.table(study, examine(study)[0]))
    rows = units[(units["state"] == "study") & (units["stage"] != "ONAN")].set_index("name")
    volts = {name: value * 1e3 for name, value in OTHER.items()}
    for carried in (table, rebase(table, 37e6, moved(volts))):
        found = rebase(carried, extras=EXTRAS).set_index("name")
        for part in "rxgb":
            np.testing.assert_allclose(found[f"{part}_own_pu"], rows[f"{part}_own_pu"], rtol=1e-13)
        for end, side in (("from", "hv"), ("to", "lv")):
            for part in "rx":
                legs = rows[f"{part}1_{side}_ohm"] + rows[f"{part}2_{side}_ohm"]
                np.testing.assert_allclose(found[f"{part}_{end}_ohm"], legs, rtol=1e-13)
            np.testing.assert_allclose(
                found[f"g_{end}_siemens"], 1 / rows[f"rc_{side}_ohm"], rtol=1e-13
            )
            np.testing.assert_allclose(
                found[f"b_{end}_siemens"], -1 / rows[f"xm_{side}_ohm"], rtol=1e-13
            )


def test_percent_columns_are_the_row_that_the_network_file_holds(home, table):
    study = plant(home)
    units = examine(study)[0]
    parts = (
        entries.three_phase_network(study, units, "")[0],
        entries.single_phase_network(study, units, ""),
    )
    rows = pd.concat([pd.DataFrame(dict(part.trafo)) for part in parts]).set_index("name")
    found = rebase(table, 37e6, extras=("percent",)).set_index("name")
    for column, row in (("z_percent", "vk_percent"), ("r_percent", "vkr_percent"),
                        ("y_percent", "i0_percent")):  # fmt: skip
        np.testing.assert_allclose(found[column], rows[row].astype(float), rtol=1e-13)
    np.testing.assert_allclose(
        found["g_percent"], 100 * rows["pfe_kw"] / 1e3 / rows["sn_mva"], rtol=1e-13
    )


@pytest.mark.parametrize("extra", EXTRAS)
def test_extra_columns_come_on_request_and_after_the_contract_s(table, extra):
    found = rebase(table, extras=(extra,))
    assert list(found.columns)[: len(table.columns)] == list(table.columns)
    added = list(found.columns)[len(table.columns) :]
    assert added
    assert all(extra in name or name.endswith("_siemens") for name in added)


# --- files ----------------------------------------------------------------------------------------


def test_a_written_table_reads_back_as_it_was(file, table):
    pd.testing.assert_frame_equal(read_branches(file), table, check_exact=True)


def test_a_table_saved_by_a_spreadsheet_reads_alike(file, table):
    """A byte order mark, CR LF and quotes change nothing."""
    lines = file.read_text(encoding="utf-8").splitlines()
    quoted = [",".join(f'"{cell}"' for cell in line.split(",")) for line in lines]
    file.write_bytes(("\ufeff" + "\r\n".join(quoted) + "\r\n").encode())
    pd.testing.assert_frame_equal(read_branches(file), table, check_exact=True)


def test_a_carried_table_is_a_branch_table_again(file, table):
    file.write_text(folder.csv_text(rebase(table, 37e6, extras=EXTRAS)), encoding="utf-8")
    back = rebase(read_branches(file)[list(table.columns)], 100e6)
    np.testing.assert_allclose(back["x_pu"], table["x_pu"], rtol=4e-15)


def cell(line: int, column: str, text: str):
    """Put a text into one cell, the lines counted as an editor does."""

    def change(lines: list[str]) -> list[str]:
        cells = lines[line - 1].split(",")
        cells[lines[0].split(",").index(column)] = text
        return [*lines[: line - 1], ",".join(cells), *lines[line:]]

    return change


BAD_TABLES = {
    "a word": (cell(3, "r_pu", "low"), r"branches\.csv:3: r_pu: read 'low'; expected a number"),
    "an empty cell": (cell(2, "x_pu", ""), r"branches\.csv:2: x_pu: read ''; expected a number"),
    "no number": (cell(4, "g_pu", "nan"), r"branches\.csv:4: g_pu: read 'nan'"),
    "infinity": (cell(4, "b_pu", "-inf"), r"branches\.csv:4: b_pu: read '-inf'"),
    "a base of nothing": (
        cell(2, "base_mva", "0"), r"branches\.csv:2: base_mva: read '0'; expected a number above",
    ),
    "volts below zero": (cell(9, "base_kv_to", "-11.0"), r"branches\.csv:9: base_kv_to: read '-1"),
    "no ratio": (cell(5, "ratio_pu", "0.0"), r"branches\.csv:5: ratio_pu: read '0\.0'"),
    "two phases": (cell(5, "phases", "2"), r"branches\.csv:5: phases: read '2'"),
    "a decimal comma": (cell(3, "r_pu", "0,5"), r"branches\.csv:3: read 24 cells; expected 23"),
    "a short line": (
        lambda lines: [*lines[:4], lines[4].rsplit(",", 2)[0], *lines[5:]],
        r"branches\.csv:5: read 21 cells; expected 23 cells",
    ),
    "a column less": (
        lambda lines: [lines[0].replace("x_pu", "x"), *lines[1:]],
        r"branches\.csv:1: x_pu: read no such column; expected the columns of a branches\.csv",
    ),
    "no branch": (lambda lines: lines[:1], r"branches\.csv:1: read no branch"),
    "nothing": (lambda lines: [], r"branches\.csv:1: .*read no such column"),
}  # fmt: skip


@pytest.mark.parametrize("what", BAD_TABLES)
def test_a_bad_table_is_refused_with_its_line_and_column(file, what):
    change, message = BAD_TABLES[what]
    lines = change(file.read_text(encoding="utf-8").splitlines())
    file.write_text("\n".join(lines), encoding="utf-8")
    with pytest.raises(BranchwrightError, match=message):
        read_branches(file)


def test_every_bad_cell_of_a_table_is_named_at_once(file):
    lines = file.read_text(encoding="utf-8").splitlines()
    for change in (cell(2, "r_pu", "?"), cell(2, "x_pu", "?"), cell(9, "rated_mva", "0")):
        lines = change(lines)
    file.write_text("\n".join(lines), encoding="utf-8")
    with pytest.raises(BranchwrightError) as caught:
        read_branches(file)
    assert [(p.line, p.key) for p in caught.value.problems] == [
        (2, "r_pu"), (2, "x_pu"), (9, "rated_mva"),
    ]  # fmt: skip


def test_a_table_that_is_no_text_or_not_there_is_refused(tmp_path):
    with pytest.raises(BranchwrightError, match=r"none\.csv: read no such file"):
        read_branches(tmp_path / "none.csv")
    with pytest.raises(BranchwrightError, match=r"expected a branches\.csv"):
        read_branches(tmp_path)
    (tmp_path / "photo.csv").write_bytes(b"\x89PNG\xff\xfe\x00")
    with pytest.raises(BranchwrightError, match="no CSV text"):
        read_branches(tmp_path / "photo.csv")


def test_busbar_volts_are_read_with_their_units(tmp_path):
    target = tmp_path / "busbars.csv"
    target.write_bytes(b"\xef\xbb\xbfbusbar,nominal_voltage\r\nDale 11,10.5 kV\r\nHut,250 V\r\n")
    assert read_busbars(target) == {"Dale 11": 10500.0, "Hut": 250.0}
    target.write_text("busbar,nominal_voltage,was\nDale 11,10.5 kV,\nHut,250 V,240 V\n", "utf-8")
    assert read_busbars(target) == {"Dale 11": 10500.0, "Hut": (240.0, 250.0)}


BAD_BUSBARS = {
    "a bare number": ("Dale 11,10.5", r":2: nominal_voltage: read '10\.5'.*bare number"),
    "another unit": ("Dale 11,10.5 MVA", r":2: nominal_voltage: read '10\.5 MVA'"),
    "no volts": ("Dale 11,0 kV", r":2: nominal_voltage: read '0 kV'.*above zero"),
    "below zero": ("Dale 11,-11 kV", r":2: nominal_voltage: read '-11 kV'"),
    "a missing cell": ("Dale 11", r":2: nominal_voltage: read ''"),
    "a decimal comma": ('Dale 11,"10,5 kV"', r":2: nominal_voltage: read '10,5 kV'.*10\.5"),
    "the name twice": ("A,11 kV\nA,12 kV", r":3: busbar: read A; expected each once"),
}


@pytest.mark.parametrize("what", BAD_BUSBARS)
def test_bad_busbar_volts_are_refused_with_their_line(tmp_path, what):
    text, message = BAD_BUSBARS[what]
    target = tmp_path / "busbars.csv"
    target.write_text(f"busbar,nominal_voltage\n{text}\n", encoding="utf-8")
    with pytest.raises(BranchwrightError, match=message):
        read_busbars(target)


@pytest.mark.parametrize("text", ["", "name,kv\nDale 11,11 kV\n", "nominal_voltage,busbar\n"])
def test_a_busbar_file_without_its_headings_is_refused(tmp_path, text):
    target = tmp_path / "busbars.csv"
    target.write_text(text, encoding="utf-8")
    with pytest.raises(BranchwrightError, match="expected the headings busbar,nominal_voltage"):
        read_busbars(target)


def test_a_busbar_file_that_is_not_there_is_refused(tmp_path):
    with pytest.raises(BranchwrightError, match=r"none\.csv: read .*; expected a CSV file"):
        read_busbars(tmp_path / "none.csv")
