"""Limits and constants of standards, against values stated here by hand from memory of them."""

import csv
from pathlib import Path

import numpy as np
import pytest

from convert import standards
from convert.reduction.resistance import resistance_at_temperature

FILES = sorted(path.stem for path in standards.HERE.glob("*.csv"))
STATUSES = {"read", "from memory"}

# IEC 60076-1:2011, 11.1 (235, 225); IEEE C57.12.90, 9.4 (234.5, 225, and 229 where mixed); memory
CONSTANTS = [
    ("IEC 60076-1", "copper", 235.0),
    ("IEC 60076-1", "aluminium", 225.0),
    ("IEEE C57.12.00", "copper", 234.5),
    ("IEEE C57.12.00", "aluminium", 225.0),
    ("IEEE C57.12.00", "mixed", 229.0),
]
# IEC 60076-1:2011, Table 1: below 10 % ±10 %, from 10 % on ±7.5 %; IEEE C57.12.00, 9.2: 2.5 % or
# less ±10 %, above 2.5 % ±7.5 %; both from memory
TOLERANCES = [
    ("IEC 60076-1", 4.0, 10.0),
    ("IEC 60076-1", 9.99, 10.0),
    ("IEC 60076-1", 10.0, 7.5),
    ("IEC 60076-1", 22.0, 7.5),
    ("IEEE C57.12.00", 1.5, 10.0),
    ("IEEE C57.12.00", 2.5, 10.0),
    ("IEEE C57.12.00", 2.51, 7.5),
    ("IEEE C57.12.00", 12.0, 7.5),
]


def test_both_tables_are_there():
    assert FILES == ["impedance_tolerance", "winding_constants"]


@pytest.mark.parametrize("name", FILES)
def test_every_row_names_its_source_and_whether_it_was_read(name: str):
    rows = standards.table(name)
    assert rows
    for row in rows:
        assert row["source"].strip()
        assert row["status"] in STATUSES
        assert row["standard"] in standards.STANDARDS
        assert all(cell is not None and cell.strip() for cell in row.values())


@pytest.mark.parametrize("name", FILES)
def test_a_table_opens_by_saying_what_it_holds(name: str):
    text = (standards.HERE / f"{name}.csv").read_text(encoding="utf-8")
    assert text.startswith("# ")


def test_comment_lines_are_no_rows():
    path = Path(standards.HERE) / "winding_constants.csv"
    with path.open(encoding="utf-8", newline="") as handle:
        plain = [row for row in csv.reader(handle) if not row[0].startswith("#")]
    assert len(standards.table("winding_constants")) == len(plain) - 1  # the heading


@pytest.mark.parametrize(("standard", "metal", "constant"), CONSTANTS)
def test_the_winding_constants_are_the_standards(standard: str, metal: str, constant: float):
    assert standards.winding_constant(standard, metal) == constant


def test_every_standard_has_each_metal_once():
    pairs = [(row["standard"], row["metal"]) for row in standards.table("winding_constants")]
    metals = ("copper", "aluminium", "mixed")
    assert sorted(pairs) == sorted((s, m) for s in standards.STANDARDS for m in metals)


def test_the_constant_of_copper_gives_the_known_factor():
    # practice: copper from 20 to 75 °C rises by 1.216, the figure that laboratories quote
    copper = standards.winding_constant("IEC 60076-1", "copper")
    warm = resistance_at_temperature(1.0, 20.0, 75.0, copper)
    assert warm == pytest.approx(1.216, abs=0.0005)


@pytest.mark.parametrize(("standard", "stated", "tolerance"), TOLERANCES)
def test_the_tolerance_at_and_beside_its_border(standard: str, stated: float, tolerance: float):
    assert 100 * standards.impedance_tolerance(standard, stated / 100) == pytest.approx(tolerance)


def test_a_column_has_the_tolerances_of_its_cells():
    column = np.array([0.04, 0.099, 0.10, 0.22])
    found = standards.impedance_tolerance("IEC 60076-1", column)
    assert found.tolist() == [0.10, 0.10, 0.075, 0.075]


@pytest.mark.parametrize("name", standards.STANDARDS)
def test_every_plate_has_a_tolerance(name: str):
    percent = np.concatenate([np.linspace(0.01, 60, 6000), [2.5, 10.0, 100.0]])
    found = standards.impedance_tolerance(name, percent / 100)
    assert set(np.round(100 * found, 6)) == {10.0, 7.5}
    assert (np.diff(found[np.argsort(percent)]) <= 0).all()  # never wider for a larger impedance


def test_a_plate_that_is_not_stated_has_no_tolerance():
    assert np.isnan(standards.impedance_tolerance("IEC 60076-1", np.nan))


def test_a_formula_shows_the_very_text_that_is_computed():
    @standards.source("Invented, 1", "clause 2", "read")
    def half_square(a: float) -> float:
        """Half of a square."""
        b = a**2
        return b / 2

    assert half_square(3.0) == 4.5
    assert str(half_square.source) == "Invented, 1, clause 2, read"
    assert standards.formula_text(half_square) == "b = a ** 2; b / 2"
