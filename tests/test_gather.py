"""What is brought into one row of a unit: the chosen test, stage and base, by hand."""

import numpy as np
import pytest
from drafts import NO_TESTS, plant, sheet, unit

from convert.gather import gather
from convert.plant import Status

STAGES = (
    ("    rated_power: 20 MVA\n",
     "    cooling_stages: {ONAN: 15 MVA, ONAF: 20 MVA}\n    study_stage: ONAN\n"),
    ("    plate_impedance: 10.00 %\n", ""),
)  # fmt: skip
RESULTS = """\
    results:
      load_loss: 96.0 kW
      impedance_voltage: 10.0 %
      temperature: 75 °C
      no_load_loss: 14.0 kW
      no_load_current: 0.30 %
"""


def test_the_study_s_stage_gives_the_rating_and_its_amps(tmp_path):
    units = gather(plant(tmp_path, sheet(unit(*STAGES))))
    assert units["s"].tolist() == [15e6]
    # 15 MVA/(√3·66 kV) and 15 MVA/(√3·11 kV)
    assert units["i_hv"] == pytest.approx([131.216], abs=5e-4)
    assert units["i_lv"] == pytest.approx([787.296], abs=5e-4)


def test_a_test_keeps_its_reading_its_side_its_line_and_its_print(tmp_path):
    text = sheet(unit())
    units = gather(plant(tmp_path, text))
    assert units["sc_volts"].tolist() == [6600.0]
    assert units["sc_from"].tolist() == [1.0]
    assert units["oc_from"].tolist() == [0.0]
    assert units.text["sc_volts"].tolist() == ["6.600 kV"]
    assert units.half_digit["sc_volts"] == pytest.approx([0.5])
    line = units.line["sc_volts"][0]
    assert "6.600 kV" in text.splitlines()[line - 1]


def test_a_result_stands_in_as_the_reading_that_would_give_it(tmp_path):
    units = gather(plant(tmp_path, sheet(unit(NO_TESTS) + RESULTS)))
    # 0.30 % of 1049.73 A at 11 kV; 10 % of 66 kV at 174.95 A
    assert units["oc_amps"] == pytest.approx([3.149], abs=5e-4)
    assert units["oc_volts"].tolist() == [11e3]
    assert units["sc_volts"] == pytest.approx([6600.0], rel=1e-12)
    assert units["sc_amps"] == pytest.approx([174.955], abs=5e-4)
    assert set(units.status["sc_watts"]) == {Status.GIVEN}
    assert units.text["sc_watts"].tolist() == ["96.0 kW"]


def test_a_unit_without_a_test_has_absent_readings(tmp_path):
    units = gather(plant(tmp_path, sheet(unit(NO_TESTS))))
    for column in ("oc_watts", "sc_watts", "sc_temperature"):
        assert units.has(column).tolist() == [False]
        assert np.isnan(units[column]).all()
