"""What was assumed or simplified: that it is said, where it stands, and how much it moves.

The size of an effect is held against two runs of the same sheet, one with the assumption and one
with the other choice.
"""

import re
from pathlib import Path

import pytest
from drafts import (
    ALWAYS,
    NO_HV_METAL,
    NO_LV_METAL,
    NO_STANDARD,
    NO_TESTS,
    TESTED_AT,
    findings,
    only,
    plant,
    rule_names,
    rules,
    sheet,
    stands_at,
    unit,
    write,
)

from convert import chain
from convert.errors import Severity
from convert.intake.sheet import read
from convert.plant import Status
from convert.study import examine

COLD = (TESTED_AT, "          temperature: 25 °C\n")
UNTOLD = (TESTED_AT, "")
NO_STUDY = (("  study_temperature: 75 °C\n", ""),)
NO_REFERENCE = ("    reference_temperature: 75 °C\n", "")
ALUMINIUM = (
    (NO_HV_METAL[0], NO_HV_METAL[0].replace("copper", "aluminium")),
    (NO_LV_METAL[0], NO_LV_METAL[0].replace("copper", "aluminium")),
)
IEEE = ("standard: IEC 60076-1", "standard: IEEE C57.12.00")
#: a unit without an own row of findings cannot be named: the finding is about the study
STUDY = "the study"


def reduced(folder: Path, text: str, column: str, **options: float) -> float:
    """One number of the only unit of a sheet."""
    units, errors = chain.run(plant(folder, text, **options))
    assert errors == []
    return float(units[column][0])


def block(name: str, changes: tuple[str, str] = ("", "")) -> str:
    text = f"""\
    {name}:
      load_loss: 96.0 kW
      impedance_voltage: 10.0 %
      temperature: 75 °C
      no_load_loss: 14.0 kW
      no_load_current: 0.30 %
"""
    return text.replace(*changes) if changes[0] else text


def signed(text: str, unit_word: str = "%") -> list[float]:
    """The signed numbers of a text that stand before a unit."""
    return [float(n) for n in re.findall(rf"([+-]?\d+\.?\d*)\s*{unit_word}", text)]


def test_every_rule_has_a_test():
    tests = Path(__file__).read_text(encoding="utf-8")
    names = rule_names("checks/assumptions.py")
    assert len(names) >= 10
    assert [rule for rule in names if f'"{rule}' not in tests] == []


def test_a_clean_unit_rests_on_nothing_assumed(tmp_path: Path):
    text = sheet(unit(resistance=True))
    found = findings(tmp_path, text)
    assert {finding.rule for finding in found} == ALWAYS
    units, _ = chain.run(plant(tmp_path, text))
    for column in ("z_sc_study", "y_oc", "z_system", "y_system"):
        assert units.status[column].tolist() == [Status.MEASURED]


# --- temperatures -------------------------------------------------------------------------------


def test_a_study_without_a_temperature_says_that_75_is_assumed(tmp_path: Path):
    text = sheet(unit(NO_REFERENCE, COLD, resistance=True), changes=NO_STUDY)
    finding = only(findings(tmp_path, text), "study-temperature-assumed")
    assert (finding.severity, finding.subject) == (Severity.CAUTION, "T1")
    assert "75 °C assumed" in finding.effect
    assert "as tested at 25 °C" in finding.effect
    # the loss at 75 °C in the finding is that of a study which asks for 75 °C
    asked = reduced(tmp_path, sheet(unit(NO_REFERENCE, COLD, resistance=True)), "pk_study")
    assert f"{asked / 1e3:.2f}" in finding.effect
    assert "IEC 60076-1" in finding.source


@pytest.mark.parametrize(
    "text",
    [sheet(unit(NO_REFERENCE)), sheet(unit(), changes=NO_STUDY)],
    ids=["the sheet's study temperature", "the certificate's reference temperature"],
)
def test_a_temperature_from_the_sheet_is_no_assumption(tmp_path: Path, text: str):
    assert rules(findings(tmp_path, text)) == set()


def test_a_temperature_from_the_command_line_is_no_assumption(tmp_path: Path):
    text = sheet(unit(NO_REFERENCE), changes=NO_STUDY)
    assert rules(findings(tmp_path, text, temperature=75.0)) == set()


def test_an_assumed_winding_temperature_tells_what_ten_kelvin_do(tmp_path: Path):
    def at(assumed: int) -> str:
        return unit(UNTOLD) + f"    assume:\n      winding_temperature: {assumed} °C\n"

    text = sheet(at(20))
    finding = only(findings(tmp_path, text), "winding-temperature-assumed")
    assert (finding.severity, finding.subject) == (Severity.CAUTION, "T1")
    assert stands_at(finding, text, "winding_temperature: 20 °C")
    cold, warm = (reduced(tmp_path, sheet(at(t)), "r_study") for t in (20, 30))
    (told,) = [n for n in signed(finding.effect) if n < 0]
    # the finding's figure is a first-order one: 10 K of 255 K against 10 K of 265 K
    assert told == pytest.approx(100 * (warm / cold - 1), abs=0.2)


def test_an_assumed_winding_temperature_is_not_used_where_the_test_gives_one(tmp_path: Path):
    text = sheet(unit() + "    assume:\n      winding_temperature: 20 °C\n")
    assert rules(findings(tmp_path, text)) == set()
    assert reduced(tmp_path, text, "t_tested") == 75.0


def test_units_at_several_temperatures_are_one_caution_about_the_study(tmp_path: Path):
    warm = unit(("reference_temperature: 75", "reference_temperature: 85"), name="T2")
    text = sheet(unit(), warm, changes=NO_STUDY)
    finding = only(findings(tmp_path, text), "mixed-temperatures")
    assert (finding.severity, finding.subject, finding.units) == (Severity.CAUTION, STUDY, 2)
    assert "75, 85 °C" in finding.found
    assert "mixed-temperatures" not in rules(findings(tmp_path, sheet(unit(), warm)))


# --- constants ----------------------------------------------------------------------------------


def test_an_unnamed_standard_tells_what_the_other_s_constant_would_do(tmp_path: Path):
    text = sheet(unit(NO_STANDARD, COLD, resistance=True))
    finding = only(findings(tmp_path, text), "standard-assumed")
    assert (finding.severity, finding.subject) == (Severity.NOTE, "T1")
    # without resistances the whole loss is I²R, so that it shows the constant alone
    iec, ieee = (reduced(tmp_path, sheet(unit(COLD, *c)), "pk_study") for c in ((), (IEEE,)))
    (told,) = signed(finding.effect)
    assert told == pytest.approx(100 * (ieee / iec - 1), abs=0.005)


def test_an_unnamed_standard_is_silent_where_it_decides_nothing(tmp_path: Path):
    # tested at the study's temperature nothing is carried; for aluminium both say 225
    for changes in ((NO_STANDARD,), (NO_STANDARD, COLD, *ALUMINIUM)):
        found = findings(tmp_path, sheet(unit(*changes, resistance=True)))
        assert "standard-assumed" not in rules(found)


def test_an_assumed_metal_tells_what_the_other_metal_would_do(tmp_path: Path):
    def of(metal: str) -> str:
        return unit(COLD, NO_HV_METAL, NO_LV_METAL) + f"    assume:\n      metal: {metal}\n"

    text = sheet(of("copper"))
    finding = only(findings(tmp_path, text), "metal-assumed")
    assert (finding.severity, finding.subject) == (Severity.CAUTION, "T1")
    assert stands_at(finding, text, "metal: copper\n")
    copper, aluminium = (
        reduced(tmp_path, sheet(of(m)), "pk_study") for m in ("copper", "aluminium")
    )
    (told,) = signed(finding.effect)
    assert told == pytest.approx(100 * (aluminium / copper - 1), abs=0.01)
    units, _ = chain.run(plant(tmp_path, text))
    assert units.status["pk_study"].tolist() == [Status.ASSUMED]


def test_a_metal_assumed_for_one_side_names_that_side(tmp_path: Path):
    text = sheet(unit(COLD, NO_LV_METAL) + "    assume:\n      metal: copper\n")
    finding = only(findings(tmp_path, text), "metal-assumed")
    assert "both" not in finding.expected
    assert "lv" in f"{finding.found} {finding.expected}".lower()


def test_an_assumed_metal_is_silent_where_both_are_stated_or_nothing_is_carried(tmp_path: Path):
    assume = "    assume:\n      metal: aluminium\n"
    for changes in ((COLD,), (NO_HV_METAL, NO_LV_METAL)):
        found = findings(tmp_path, sheet(unit(*changes) + assume))
        assert "metal-assumed" not in rules(found)


# --- losses -------------------------------------------------------------------------------------


def test_loss_that_cannot_be_separated_is_told_with_both_bounds(tmp_path: Path):
    text = sheet(unit(COLD))
    finding = only(findings(tmp_path, text), "loss-not-separated")
    assert (finding.severity, finding.subject) == (Severity.CAUTION, "T1")
    upper, lower = (float(n) for n in re.findall(r"([\d.]+) kW", finding.effect))
    # all I²R: 96 kW · 310/260; all stray: 96 kW · 260/310, by hand
    assert upper == pytest.approx(96.0 * 310 / 260, rel=1e-4)
    assert lower == pytest.approx(96.0 * 260 / 310, rel=1e-4)
    separated = reduced(tmp_path, sheet(unit(COLD, resistance=True)), "pk_study") / 1e3
    assert lower < separated < upper


def test_loss_that_cannot_be_separated_says_which_ohms_are_there(tmp_path: Path):
    one_side = unit(COLD, resistance=True)
    text = sheet(one_side[: one_side.index("        - side: lv")])
    assert "hv only" in only(findings(tmp_path, text), "loss-not-separated").found


@pytest.mark.parametrize("options", [{}, {"resistance": True}])
def test_loss_need_not_be_separated_where_it_is_not_carried(tmp_path: Path, options: dict):
    assert "loss-not-separated" not in rules(findings(tmp_path, sheet(unit(**options))))


def test_separated_loss_is_silent_though_it_is_carried(tmp_path: Path):
    assert rules(findings(tmp_path, sheet(unit(COLD, resistance=True)))) == set()


# --- facts in place of tests --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "ending", "severity", "status"),
    [
        ("results", "given", Severity.NOTE, Status.GIVEN),
        ("assume", "assumed", Severity.CAUTION, Status.ASSUMED),
    ],
)
def test_facts_that_stand_in_for_tests_say_so(
    tmp_path: Path, name: str, ending: str, severity: Severity, status: Status
):
    text = sheet(unit(NO_TESTS) + block(name))
    found = findings(tmp_path, text)
    assert rules(found) == {f"no-load-loss-{ending}", f"load-loss-{ending}"}
    for rule, key, value in (
        (f"no-load-loss-{ending}", "no_load_loss: 14.0 kW", ("14.0 kW", "0.30 %")),
        (f"load-loss-{ending}", "      load_loss: 96.0 kW", ("96.0 kW", "10.0 %")),
    ):
        finding = only(found, rule)
        assert (finding.severity, finding.subject) == (severity, "T1")
        assert stands_at(finding, text, key)
        assert all(part in finding.found for part in value)
        assert "rests on it" in finding.effect
    units, _ = chain.run(plant(tmp_path, text))
    assert units.status["z_system"].tolist() == [status]
    assert units.status["y_system"].tolist() == [status]


def test_a_measured_test_is_preferred_to_what_the_sheet_assumes(tmp_path: Path):
    text = sheet(unit() + block("assume", ("96.0 kW", "120.0 kW")))
    assert rules(findings(tmp_path, text)) == set()
    assert reduced(tmp_path, text, "pk_study") == pytest.approx(96e3, rel=1e-4)  # 174.95 A printed


def test_no_load_current_that_is_all_loss_is_a_caution(tmp_path: Path):
    text = sheet(unit(("amps: 3.149 A", "amps: 0.7345 A")))
    finding = only(findings(tmp_path, text), "no-load-power-factor-one")
    assert (finding.severity, finding.subject) == (Severity.CAUTION, "T1")
    assert stands_at(finding, text, "watts: 14.00 kW")
    assert "assumed" in finding.effect
    # 14 kW/(√3·11 kV·0.7345 A) by hand; a figure that rounds to 1 would say nothing
    assert "1.0004" in finding.found


def test_volts_that_are_not_rated_tell_how_the_readings_were_carried(tmp_path: Path):
    # 98 % of rated: current by 1/0.98, loss by 1/0.98²
    text = sheet(unit(("volts: 11.000 kV", "volts: 10.780 kV")))
    finding = only(findings(tmp_path, text), "no-load-not-at-rated-volts")
    assert (finding.severity, finding.subject) == (Severity.NOTE, "T1")
    assert stands_at(finding, text, "volts: 10.780 kV")
    assert "98 % of rated" in finding.found
    assert "×1.0412" in finding.effect
    assert "×1.0204" in finding.effect


@pytest.mark.parametrize(
    ("changes", "cause"),
    [
        # phase volts taken as line volts: the loss would be written three times too large
        ((("volts: 11.000 kV", "volts: 6.351 kV"),), "phase volts"),
        # the LV side's volts said to be the HV side's: 36 times
        ((("energised: lv", "energised: hv"),), "side"),
    ],
)
def test_volts_far_from_rated_are_a_caution_that_names_the_slip(
    tmp_path: Path, changes: tuple, cause: str
):
    text = sheet(unit(*changes))
    finding = only(findings(tmp_path, text), "no-load-not-at-rated-volts")
    assert finding.severity is Severity.CAUTION
    assert cause in finding.likely_cause


@pytest.mark.parametrize("volts", ["11.000 kV", "11.0004 kV", "[10.99 kV, 11.00 kV, 11.01 kV]"])
def test_volts_that_are_rated_as_far_as_they_are_printed_are_not_spoken_of(
    tmp_path: Path, volts: str
):
    text = sheet(unit(("volts: 11.000 kV", f"volts: {volts}")))
    fires = "no-load-not-at-rated-volts" in rules(findings(tmp_path, text))
    assert fires is (volts == "11.0004 kV")


def test_phase_volts_that_are_rated_are_not_spoken_of(tmp_path: Path):
    text = sheet(unit(("volts: 11.000 kV", "volts: 6.351 kV\n          between: line and neutral")))
    assert rules(findings(tmp_path, text)) == set()


# --- the circuit --------------------------------------------------------------------------------


def test_the_exact_circuit_s_percent_is_explained_once_for_the_study(tmp_path: Path):
    small = unit(("amps: 3.149 A", "amps: 31.49 A"), name="T2")  # ten times the no-load current
    finding = only(findings(tmp_path, sheet(unit(), small)), "exact-circuit")
    assert (finding.severity, finding.subject, finding.units) == (Severity.NOTE, STUDY, 2)
    assert finding.found.startswith("T2: ")  # the unit that it moves most
    assert "10.000264" in finding.expected  # 6600/66000 on 174.9546 A, read at 174.95 A
    # the T's total is z(1 + z·y/4 + ...): |z·y| = 0.1 · 0.03 gives 0.075 % in round figures
    (share,) = [n for n in signed(finding.effect) if n]
    assert share == pytest.approx(0.075, abs=0.005)


def test_the_simplified_circuit_tells_its_error_unit_by_unit(tmp_path: Path):
    found = findings(tmp_path, sheet(unit(), unit(name="T2")), model="cantilever")
    notes = [finding for finding in found if finding.rule == "simplified-circuit"]
    assert [note.subject for note in notes] == ["T1", "T2"]
    assert all(note.severity is Severity.NOTE for note in notes)
    assert "exact-circuit" not in {finding.rule for finding in found}
    # the no-load test from LV sees y behind z: 1/(1 + z·y), 0.1 · 0.003 at right angles nearly
    amps, volts = signed(notes[0].found)[:2]
    assert amps == pytest.approx(-0.029, abs=0.001)
    # the short-circuit test from HV sees z and y in parallel: the same factor
    assert volts == pytest.approx(amps, abs=0.001)


def test_the_exact_circuit_has_no_note_of_simplification(tmp_path: Path):
    assert "simplified-circuit" not in {f.rule for f in findings(tmp_path, sheet())}


# --- nothing silent -----------------------------------------------------------------------------


def test_another_frequency_than_the_sheet_s_is_a_caution(tmp_path: Path):
    # x as read at 50 Hz is not that of 60 Hz, and it is not carried
    finding = only(findings(tmp_path, sheet(), frequency=60.0), "frequency-by-option")
    assert finding.severity is Severity.CAUTION
    assert "60 Hz" in finding.found
    assert "50 Hz" in finding.found
    assert "reactance" in finding.effect
    carried = reduced(tmp_path, sheet(), "x", frequency=60.0)
    assert carried == reduced(tmp_path, sheet(), "x")


def test_the_sheet_s_own_frequency_by_option_is_no_news(tmp_path: Path):
    assert rules(findings(tmp_path, sheet(), frequency=50.0)) == set()


@pytest.mark.parametrize("option", [50.0, 60.0])
def test_a_frequency_that_one_of_two_sheets_does_not_have_is_a_caution(
    tmp_path: Path, option: float
):
    # whichever sheet stands first, the other's tests were made at another frequency
    one = write(tmp_path, sheet())
    other = write(tmp_path, sheet(unit(name="T2")).replace("50 Hz", "60 Hz"), "other.yaml")
    for paths in ((one, other), (other, one)):
        _, found, _ = examine(read(*paths, frequency=option))
        assert rules(found) == {"frequency-by-option"}


@pytest.mark.parametrize(
    "text",
    [
        sheet(unit(NO_REFERENCE, COLD), changes=NO_STUDY),
        sheet(unit(NO_STANDARD)),
        sheet(unit(COLD)),
        sheet(unit(NO_TESTS) + block("results")),
        sheet(unit(UNTOLD) + "    assume:\n      winding_temperature: 20 °C\n"),
    ],
)
def test_every_finding_about_a_unit_names_the_sheet_and_a_line_of_it(tmp_path: Path, text: str):
    own = [finding for finding in findings(tmp_path, text) if finding.subject == "T1"]
    assert own
    assert [f.rule for f in own if not re.search(r"mill\.yaml:[1-9]", f.reading)] == []


def test_every_finding_has_an_effect_and_a_source(tmp_path: Path):
    texts = [
        sheet(unit(NO_REFERENCE, COLD), changes=NO_STUDY),
        sheet(unit(NO_STANDARD, NO_TESTS) + block("assume")),
        sheet(unit(NO_STANDARD, COLD, resistance=True)),
        sheet(unit(("amps: 3.149 A", "amps: 0.7345 A"))),
    ]
    for text in texts:
        for finding in findings(tmp_path, text):
            assert finding.effect, finding.rule
            assert finding.source, finding.rule
