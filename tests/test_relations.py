"""Relations between the keys of a sheet, and between sheets that are read together."""

import os

import pytest

from convert.errors import BranchwrightError
from convert.intake import relations
from convert.intake.sheet import read

# invented
SHEET = """station: {name: Mill Lane}
system:
  base_power: 100 MVA
  frequency: 50 Hz
busbars:
  Mill 66: {nominal_voltage: 66 kV}
  Mill 11: {nominal_voltage: 11 kV}
transformers:
  T1:
    phases: 3
    vector_group: YNd11
    cooling_stages: {ONAN: 15 MVA, ONAF: 20 MVA}
    study_stage: ONAF
    hv: {busbar: Mill 66, rated_voltage: 66 kV}
    lv: {busbar: Mill 11, rated_voltage: 11 kV}
"""
OTHER = SHEET.replace("T1", "T2")


@pytest.fixture
def sheets(tmp_path):
    """Write sheets a.yaml, b.yaml, ... and return their paths."""

    def write(*texts):
        paths = [tmp_path / f"{name}.yaml" for name, _ in zip("abcd", texts, strict=False)]
        for path, text in zip(paths, texts, strict=True):
            path.write_text(text, encoding="utf-8")
        return paths

    return write


def messages(paths, **options):
    """The messages of reading, folder left out."""
    with pytest.raises(BranchwrightError) as caught:
        read(*paths, **options)
    folder = f"{paths[0].parent}{os.sep}"
    return [str(problem).replace(folder, "") for problem in caught.value.problems]


def test_sheets_are_joined_and_agreeing_busbars_are_one(sheets):
    south = OTHER.replace("  Mill 11: {nominal_voltage: 11 kV}\n", "").replace(
        "Mill 66: {nominal_voltage: 66 kV}",
        "South 11: {nominal_voltage: 11 kV}\n  Mill 66: {nominal_voltage: 66000 V}",
    )
    plant = read(*sheets(SHEET, south.replace("busbar: Mill 11", "busbar: South 11")))
    assert list(plant.busbars.text["name"]) == ["Mill 66", "Mill 11", "South 11"]
    assert list(plant.transformers.text["name"]) == ["T1", "T2"]
    assert list(plant.transformers["hv_bus"]) == [0, 0]
    assert list(plant.transformers["lv_bus"]) == [1, 2]
    assert list(plant.stages["unit"]) == [0, 0, 1, 1]
    assert [source.name[-6:] for source in plant.sources] == ["a.yaml", "b.yaml"]


def test_a_sheet_may_lie_on_the_busbars_of_another(sheets):
    alone = OTHER.replace("  Mill 66: {nominal_voltage: 66 kV}\n", "")
    assert read(*sheets(SHEET, alone)).busbars.n == 2
    assert messages(sheets(alone)) == [
        "a.yaml:13: transformers.T2.hv.busbar: read 'Mill 66'; expected the name of a busbar; "
        "did you mean Mill 11?"
    ]


def test_one_sheet_may_hold_the_source_of_a_shared_busbar(sheets):
    held = "Mill 66: {nominal_voltage: 66 kV, source_voltage: 67 kV}"
    plant = read(*sheets(SHEET, OTHER.replace("Mill 66: {nominal_voltage: 66 kV}", held)))
    assert plant.busbars["source_voltage"][0] == 67000.0


def test_shared_busbars_must_agree(sheets):
    differing = OTHER.replace(
        "Mill 11: {nominal_voltage: 11 kV}", "Mill 11: {nominal_voltage: 10 kV}"
    )
    assert messages(sheets(SHEET, differing)) == [
        "b.yaml:7: busbars.Mill 11.nominal_voltage: read '10 kV'; expected 11 kV as in a.yaml:7"
    ]


def test_a_name_is_used_once_over_all_sheets(sheets):
    assert messages(sheets(SHEET, SHEET)) == [
        "b.yaml:9: transformers.T1: read the name 'T1' again (first in a.yaml:9); "
        "expected names used once"
    ]


def test_one_sheet_given_twice_is_told_by_its_names(sheets):
    (path,) = sheets(SHEET)
    assert messages([path, path]) == [
        "a.yaml:9: transformers.T1: read the name 'T1' again (first in a.yaml:9); "
        "expected names used once"
    ]


def test_base_and_frequency_must_agree(sheets):
    differing = OTHER.replace("100 MVA", "10 MVA").replace("50 Hz", "60 Hz")
    assert messages(sheets(SHEET, differing)) == [
        "b.yaml:3: system.base_power: read '10 MVA'; expected 100 MVA as in a.yaml:3; "
        "or give --base-power",
        "b.yaml:4: system.frequency: read '60 Hz'; expected 50 Hz as in a.yaml:4; "
        "or give --frequency",
    ]


def test_equal_bases_may_be_written_in_two_ways(sheets):
    system = read(*sheets(SHEET, OTHER.replace("100 MVA", "0.1 GVA"))).system
    assert system.base_power == pytest.approx(1e8, rel=1e-15)


def test_an_option_decides_where_sheets_differ(sheets):
    differing = OTHER.replace("100 MVA", "10 MVA").replace("50 Hz", "60 Hz")
    system = read(*sheets(SHEET, differing), base_power=25e6, frequency=60.0).system
    assert (system.base_power, system.frequency) == (25e6, 60.0)


def test_study_temperatures_must_agree_where_both_sheets_say_one(sheets):
    said = "  frequency: 50 Hz\n  study_temperature: {} °C\n"
    warm, hot = (OTHER.replace("  frequency: 50 Hz\n", said.format(t)) for t in (75, 85))
    assert read(*sheets(SHEET, hot)).system.study_temperature == 85.0
    first = warm.replace("T2", "T3")
    assert messages(sheets(first, hot)) == [
        "b.yaml:5: system.study_temperature: read '85 °C'; expected 75 °C as in a.yaml:5; "
        "or give --temperature"
    ]
    assert read(*sheets(first, hot), temperature=20.0).system.study_temperature == 20.0


def test_points_of_the_regulation_table_must_agree(sheets):
    said = "  frequency: 50 Hz\n  load_fractions: [{}]\n"
    half, full = (
        text.replace("  frequency: 50 Hz\n", said.format(points))
        for text, points in ((SHEET, "50 %"), (OTHER, "100 %"))
    )
    assert messages(sheets(half, full)) == [
        "b.yaml:5: system.load_fractions: read '100 %'; expected 50 % as in the first sheet"
    ]
    assert read(*sheets(half, OTHER)).system.load_fractions == (0.5,)


def test_the_same_points_may_be_written_in_two_ways(sheets):
    said = "  frequency: 50 Hz\n  load_fractions: [{}]\n"
    percent = SHEET.replace("  frequency: 50 Hz\n", said.format("50 %"))
    unit = OTHER.replace("  frequency: 50 Hz\n", said.format("0.5 pu"))
    assert read(*sheets(percent, unit)).system.load_fractions == (0.5,)


def test_faults_of_all_sheets_are_told_in_the_order_of_the_sheets(sheets):
    slips = [
        SHEET.replace("YNd11", "YNd0").replace("100 MVA", "100"),
        OTHER.replace("busbar: Mill 11", "busbar: Mil 11"),
        "",
    ]
    said = [line.partition(": read")[0] for line in messages(sheets(*slips))]
    assert said == [
        "a.yaml:3: system.base_power",
        "a.yaml:11: transformers.T1.vector_group",
        "b.yaml:15: transformers.T2.lv.busbar",
        "c.yaml:1",
    ]


def test_a_sheet_that_cannot_be_read_does_not_hide_the_faults_of_the_others(sheets):
    (path,) = sheets(SHEET.replace("YNd11", "YNd0"))
    said = messages([path, path.parent / "none.yaml"])
    assert [line.partition(":")[0] for line in said] == ["a.yaml", "none.yaml"]


def test_the_stage_of_an_option_is_used_for_every_unit_with_stages(sheets):
    plain = OTHER.replace(
        "    cooling_stages: {ONAN: 15 MVA, ONAF: 20 MVA}\n    study_stage: ONAF\n",
        "    rated_power: 20 MVA\n",
    )
    plant = read(*sheets(SHEET, plain), stage="ONAN")
    assert list(plant.transformers.text["study_stage"]) == ["ONAN", ""]


def test_a_stage_of_an_option_that_a_unit_lacks_is_not_said_to_be_in_the_sheet(sheets):
    (said,) = messages(sheets(SHEET), stage="OFAF")
    assert "--stage" in said
    assert "ONAN, ONAF" in said


def test_near_names_are_looked_for_a_bounded_number_of_times(sheets, monkeypatch):
    # a renamed list of busbars must not be compared, name by name, with every unit of a register
    asked = []
    real = relations.get_close_matches
    monkeypatch.setattr(
        relations, "get_close_matches", lambda *args, **more: asked.append(1) or real(*args, **more)
    )
    head, _, unit = SHEET.partition("  T1:\n")
    units = (
        f"  T{n}:\n" + unit.replace("busbar: Mill 66", f"busbar: Mlil {n}") for n in range(200)
    )
    said = messages(sheets(head + "".join(units)))
    assert len(said) == 200
    assert len(asked) <= 100


def test_equal_rated_voltages_may_stand_on_either_side(sheets):
    even = SHEET.replace("rated_voltage: 66 kV", "rated_voltage: 11 kV")
    assert read(*sheets(even)).transformers["hv_rated_voltage"] == [11000.0]
