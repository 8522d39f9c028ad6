"""Which units may be reduced: each gate on a sheet made for it, and on its clean twin."""

import re
from pathlib import Path

import pytest
from drafts import (
    NO_HV_METAL,
    NO_LV_METAL,
    NO_OPEN_CIRCUIT,
    NO_SHORT_CIRCUIT,
    NO_TESTS,
    TESTED_AT,
    findings,
    line_of,
    only,
    plant,
    rule_names,
    rules,
    sheet,
    stands_at,
    unit,
)

from convert import chain
from convert.errors import Severity
from convert.plant import Status
from convert.study import examine

COLD = (TESTED_AT, "          temperature: 25 °C\n")
SPLIT = ("    tests:", "    split: resistances\n    tests:")
#: rule, what is wrong, a word of what is expected
MISSING = [
    ("no-load-missing", (NO_OPEN_CIRCUIT,), "open-circuit test"),
    ("load-loss-missing", (NO_SHORT_CIRCUIT,), "short-circuit test"),
    ("winding-temperature-missing", ((TESTED_AT, ""),), "winding temperature"),
    ("metal-missing", (COLD, NO_HV_METAL), "copper or aluminium"),
    ("metal-missing", (COLD, NO_LV_METAL), "copper or aluminium"),
    ("split-without-resistances", (SPLIT,), "tests.resistance"),
]
RESULTS = """\
    results:
      load_loss: 96.0 kW
      impedance_voltage: 10.0 %
      temperature: 75 °C
      no_load_loss: 14.0 kW
      no_load_current: 0.30 %
"""


def results(*changes: tuple[str, str]) -> str:
    text = unit(NO_TESTS) + RESULTS
    for old, new in changes:
        assert text.count(old) == 1
        text = text.replace(old, new)
    return text


def test_every_gate_has_a_test():
    tests = Path(__file__).read_text(encoding="utf-8")
    assert [rule for rule in rule_names("gates.py") if f'"{rule}' not in tests] == []


@pytest.mark.parametrize("resistance", [False, True])
def test_the_clean_unit_passes_every_gate(tmp_path: Path, resistance: bool):
    assert rules(findings(tmp_path, sheet(unit(resistance=resistance)))) == set()


@pytest.mark.parametrize(("rule", "changes", "expected"), MISSING)
def test_a_missing_fact_leaves_the_unit_out_and_says_what_is_wanted(
    tmp_path: Path, rule: str, changes: tuple, expected: str
):
    text = sheet(unit(), unit(*changes, name="T2"))
    units, found, left_out = examine(plant(tmp_path, text))
    error = only(found, rule)
    assert (error.severity, error.subject) == (Severity.ERROR, "T2")
    assert expected in error.expected
    assert "left out" in error.effect
    assert error.likely_cause  # how to mend it
    assert left_out == ["T2"]
    assert units.text["name"].tolist() == ["T1"]
    assert [f for f in found if f.subject == "T1"] == []


@pytest.mark.parametrize(("rule", "changes", "_expected"), MISSING)
def test_a_missing_fact_names_the_sheet_and_the_line_of_its_unit(
    tmp_path: Path, rule: str, changes: tuple, _expected: str
):
    text = sheet(unit(), unit(*changes, name="T2"))
    error = only(findings(tmp_path, text), rule)
    named = re.search(r"mill\.yaml:(\d+)\b", error.reading)
    assert named, error.reading
    assert int(named[1]) >= line_of(text, "  T2:")


def test_all_that_a_unit_lacks_is_said_in_one_go(tmp_path: Path):
    text = sheet(unit(), unit(NO_TESTS, name="T2"))
    assert rules(findings(tmp_path, text)) >= {"no-load-missing", "load-loss-missing"}


def test_a_missing_metal_is_named_by_its_side(tmp_path: Path):
    error = only(findings(tmp_path, sheet(unit(COLD, NO_LV_METAL))), "metal-missing")
    assert "lv" in error.reading
    assert "hv" not in error.reading


@pytest.mark.parametrize("changes", [(NO_HV_METAL, NO_LV_METAL), (COLD,)])
def test_the_metal_is_asked_for_only_where_losses_are_carried(tmp_path: Path, changes: tuple):
    # at the test's own temperature no constant is needed; away from it the clean sheet has both
    found = findings(tmp_path, sheet(unit(*changes)))
    assert "metal-missing" not in rules(found)


def test_a_split_by_resistances_passes_with_both_of_them(tmp_path: Path):
    assert rules(findings(tmp_path, sheet(unit(SPLIT, resistance=True)))) == set()


def test_a_split_with_the_ohms_of_one_side_is_refused(tmp_path: Path):
    text = unit(SPLIT, resistance=True)
    one_side = text[: text.index("        - side: lv")]
    assert rules(findings(tmp_path, sheet(one_side))) == {"split-without-resistances"}


def test_rated_volts_far_from_the_busbar_s_leave_the_unit_out(tmp_path: Path):
    far = ("rated_voltage: 66 kV", "rated_voltage: 132 kV")
    text = sheet(unit(far))
    error = only(findings(tmp_path, text), "rated-against-nominal")
    assert error.severity is Severity.ERROR
    assert stands_at(error, text, "rated_voltage: 132 kV")
    assert "132 kV" in error.found
    assert "66 kV" in error.found


def test_the_busbar_of_a_winding_to_neutral_is_named_by_its_own_volts(tmp_path: Path):
    # the sheet says 11 kV; 6.351 kV, a third root of it, stands nowhere in the sheet
    single = """\
  P1:
    phases: 1
    vector_group: Ii0
    rated_power: 5 kVA
    hv: {busbar: Reed Mill 66, rated_voltage: 38.1 kV, across: line and neutral}
    lv: {busbar: Reed Mill 11, rated_voltage: 2.4 kV, across: line and neutral}
    results: {load_loss: 100 W, impedance_voltage: 4 %, temperature: 75 °C,
              no_load_loss: 20 W, no_load_current: 1 %}
"""
    error = only(findings(tmp_path, sheet(unit(), single)), "rated-against-nominal")
    assert "2.4 kV" in error.found
    assert "11 kV" in error.found
    assert "neutral" in error.found


# --- power factors ------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("rule", "change", "cosphi"),
    [
        # 140 kW/(√3·11 kV·3.149 A) and 3 MW/(√3·6.6 kV·174.95 A) by hand
        ("open-circuit-power-factor", ("watts: 14.00 kW", "watts: 140.0 kW"), "2.333"),
        ("open-circuit-power-factor", ("amps: 3.149 A", "amps: 0.3149 A"), "2.333"),
        ("open-circuit-power-factor", ("volts: 11.000 kV", "volts: 1.100 kV"), "2.333"),
        ("short-circuit-power-factor", ("watts: 96.00 kW", "watts: 3.000 MW"), "1.5"),
    ],
)
def test_a_power_factor_above_one_is_refused_with_its_three_readings(
    tmp_path: Path, rule: str, change: tuple[str, str], cosphi: str
):
    text = sheet(unit(), unit(change, name="T2"))
    error = only(findings(tmp_path, text), rule)
    assert (error.severity, error.subject) == (Severity.ERROR, "T2")
    assert f"cosφ = {cosphi} " in error.found
    assert change[1].partition(": ")[2] in error.found
    assert "left out" in error.effect
    block = text[text.index("  T2:") :]
    line = line_of(block, "watts: " + ("3.000" if "short" in rule else "14"))
    assert f"mill.yaml:{line_of(text, '  T2:') + line - 1} " in error.reading


def test_a_refused_power_factor_names_the_factors_that_slips_leave_behind(tmp_path: Path):
    text = sheet(unit(("watts: 14.00 kW", "watts: 14.00 MW")))
    error = only(findings(tmp_path, text), "open-circuit-power-factor")
    assert "1000" in error.likely_cause
    assert "1.73" in error.likely_cause


def test_a_short_circuit_test_without_reactance_is_refused_and_told_so(tmp_path: Path):
    # a single-phase reading of exactly 100 V · 10 A: cosφ is 1, which "at most 1" would allow
    single = """\
  P1:
    phases: 1
    vector_group: Ii0
    rated_power: 5 kVA
    hv: {busbar: Reed Mill 66, rated_voltage: 38.1 kV, across: line and neutral}
    lv: {busbar: Reed Mill 11, rated_voltage: 6.35 kV, across: line and neutral}
    tests:
      open_circuit:
        - {energised: lv, volts: 6.35 kV, amps: 10 mA, watts: 30 W}
      short_circuit:
        - {fed: hv, volts: 100 V, amps: 10 A, watts: 1000 W, temperature: 75 °C}
"""
    error = only(findings(tmp_path, sheet(unit(), single)), "short-circuit-power-factor")
    assert "at most 1" not in error.expected
    assert "below 1" in error.expected


# 14.00 kW at 11.000 kV wants 0.73481 A at least. The half digits 5 W, 0.5 V and 0.05 mA give way
# by 3.6e-4 + 0.5e-4 + 0.7e-4 = 4.7e-4 together; whole kilowatts by 3.6e-2.
AT_THE_LIMIT = [
    ("14.00 kW", "0.7349 A", "clean"),  # cosφ 0.9999
    ("14.00 kW", "0.7345 A", "taken"),  # 1.0004
    ("14.00 kW", "0.7344 A", "refused"),  # 1.0006
    ("14 kW", "0.7100 A", "taken"),  # 1.035
    ("14 kW", "0.7050 A", "refused"),  # 1.042
]


@pytest.mark.parametrize(("watts", "amps", "answer"), AT_THE_LIMIT)
def test_no_load_power_factors_above_one_pass_within_the_printed_digits_only(
    tmp_path: Path, watts: str, amps: str, answer: str
):
    text = sheet(unit(("watts: 14.00 kW", f"watts: {watts}"), ("amps: 3.149 A", f"amps: {amps}")))
    found = rules(findings(tmp_path, text))
    wanted = {
        "clean": set(),
        "taken": {"no-load-power-factor-one"},
        "refused": {"open-circuit-power-factor"},
    }
    assert found == wanted[answer]


def test_a_unit_taken_at_the_limit_has_no_magnetising_branch_and_says_that_it_is_assumed(
    tmp_path: Path,
):
    text = sheet(unit(("amps: 3.149 A", "amps: 0.7345 A")))
    units, _ = chain.run(plant(tmp_path, text))
    circuit = units["y_m_study"][0]
    assert abs(circuit.imag) < 1e-9 * abs(circuit)
    # all of the no-load current is that of the loss: 14 kW on 20 MVA
    # but for what the loss draws through half of x = 0.1: (x g/2)²/2 = 6e-10 of it
    assert units["i0"][0] == pytest.approx(14e3 / 20e6, rel=1e-9)
    assert units.status["y_oc"].tolist() == [Status.ASSUMED]


# i0 is stated as 0.070 %; P0/S from the stated watts on 20 MVA is
STATED = [
    ("13.9 kW", "0.07 %", set()),  # 0.0695 %
    ("14.0 kW", "0.07 %", {"no-load-power-factor-one"}),  # 0.0700 %: no magnetising current at all
    ("14.1 kW", "0.07 %", {"no-load-power-factor-one"}),  # 0.0705 %, within half a digit of 0.07
    ("15.2 kW", "0.07 %", {"open-circuit-power-factor"}),  # 0.0760 %, beyond it
    ("14.1 kW", "0.0700 %", {"open-circuit-power-factor"}),  # 0.0705 %, and the digits say so
]


@pytest.mark.parametrize(("watts", "share", "wanted"), STATED)
def test_stated_results_pass_within_their_printed_digits_too(
    tmp_path: Path, watts: str, share: str, wanted: set[str]
):
    text = results(("no_load_loss: 14.0 kW", f"no_load_loss: {watts}"), ("0.30 %", share))
    found = rules(findings(tmp_path, sheet(text)))
    assert found - {"no-load-loss-given", "load-loss-given"} == wanted


@pytest.mark.parametrize(
    ("rule", "change", "words"),
    [
        ("open-circuit-power-factor", ("0.30 %", "0.03 %"), ("14.0 kW", "0.03 %")),
        ("short-circuit-power-factor", ("96.0 kW", "9.60 MW"), ("9.60 MW", "10.0 %")),
    ],
)
def test_a_refused_result_is_told_in_the_words_of_the_sheet(
    tmp_path: Path, rule: str, change: tuple[str, str], words: tuple[str, ...]
):
    text = sheet(results(change))
    error = only(findings(tmp_path, text), rule)
    assert all(word in error.found for word in words)
    assert "nothing" not in error.found  # no reading is missing: results stand in for them
    assert "results" in error.reading
