"""Values that transformers seldom have and circuits that none can have, on sheets made for them."""

from pathlib import Path

import pytest
from drafts import findings, only, plant, rule_names, rules, sheet, stands_at, unit

from convert.errors import Severity
from convert.study import examine

AMPS, WATTS = "amps: 3.149 A", "watts: 14.00 kW"


def test_every_rule_has_a_test():
    tests = Path(__file__).read_text(encoding="utf-8")
    assert [rule for rule in rule_names("checks/ranges.py") if f'"{rule}"' not in tests] == []


def test_a_clean_unit_is_within_every_range(tmp_path: Path):
    assert rules(findings(tmp_path, sheet(unit(resistance=True)))) == set()


@pytest.mark.parametrize(
    ("old", "new", "found"),
    [
        (AMPS, "amps: 314.9 A", "i0 30 %"),  # a decimal point moved by two
        (WATTS, "watts: 14.00 W", "cosφ 0.000233"),  # W for kW: 14/(√3·11 000·3.149)
    ],
)
def test_no_load_readings_that_no_unit_has_are_a_caution(
    tmp_path: Path, old: str, new: str, found: str
):
    text = sheet(unit((old, new)))
    finding = only(findings(tmp_path, text), "no-load-range")
    assert finding.severity is Severity.CAUTION
    assert found in finding.found
    assert "kA" in finding.likely_cause


def test_an_impedance_out_of_range_names_the_side(tmp_path: Path):
    text = sheet(unit(("fed: hv", "fed: lv"), ("    plate_impedance: 10.00 %\n", "")))
    finding = only(findings(tmp_path, text), "impedance-range")
    assert stands_at(finding, text, "volts: 6.600 kV")
    assert "side" in finding.likely_cause


def test_one_side_s_ohms_a_thousand_times_too_small_are_seen_against_the_other_s(tmp_path: Path):
    slip = ("ohms: 20.00 mohm", "ohms: 20.00 µohm")
    finding = only(findings(tmp_path, sheet(unit(slip, resistance=True))), "winding-losses")
    # 3·1049.7² A²·10 µΩ is 33 W where 33 kW should be
    assert "LV 33.1 W" in finding.found
    assert "mΩ" in finding.likely_cause


def test_readings_of_a_circuit_that_makes_power_leave_the_unit_out(tmp_path: Path):
    # no-load amps of 350 % beside uk of 10 %: the T that gives both has a negative conductance
    text = sheet(unit(), unit((AMPS, "amps: 3.674 kA"), name="T2"))
    units, found, left_out = examine(plant(tmp_path, text))
    error = only(found, "circuit-not-passive")
    assert (error.severity, error.subject) == (Severity.ERROR, "T2")
    assert left_out == ["T2"]
    assert units.text["name"].tolist() == ["T1"]
