"""Which readings a sheet may hold: phase or line volts, total or one phase's watts, one or three.

One invented unit; each way of writing the same test must give the same circuit, and each slip
must not.
"""

import forward
import numpy as np
import pytest
from strategies import plant_of_text, reduced

from convert import chain
from convert.reduction import metering

HV, LV = forward.Side(33e3, "D", 3.1), forward.Side(11e3, "YN", 0.09)
UNIT = forward.Unit(HV, LV, 10e6, 0.15, 9.8, 2.2e-6, 1.9e-5, clock=11)
PLAIN = forward.Test(UNIT, oc_volts=10.7e3, sc_amps=101.0, temperature=23.0)
BETWEEN = ["", "line and line", "line and neutral"]
WATTS = ["", "total", "per phase"]
COLUMNS = ("y_oc", "z_sc_tested", "z_t_study", "y_m_study")


def circuit(test, study=75.0):
    table = reduced([test], study=study)
    return {name: table[name][0] for name in COLUMNS}


@pytest.mark.parametrize("fed", ["hv", "lv"])
@pytest.mark.parametrize("spread", [0.0, 0.006], ids=["one", "three"])
@pytest.mark.parametrize("watts", WATTS)
@pytest.mark.parametrize("between", BETWEEN)
def test_every_way_of_writing_a_test_gives_the_same_circuit(between, watts, spread, fed):
    amps = 101.0 if fed == "hv" else 303.0
    plain = PLAIN.at(fed=fed, energised=fed, oc_volts=0.0, sc_amps=amps)
    other = plain.at(
        oc_between=between, sc_between=between, oc_watts_are=watts, sc_watts_are=watts,
        spread=spread,
    )  # fmt: skip
    wanted, found = circuit(plain), circuit(other)
    for name in COLUMNS:
        np.testing.assert_allclose(found[name], wanted[name], rtol=1e-12)


@pytest.mark.parametrize("test", ["oc", "sc"])
def test_phase_volts_of_one_test_leave_the_other_alone(test):
    changed = circuit(PLAIN.at(**{f"{test}_between": "line and neutral"}))
    for name in COLUMNS:
        np.testing.assert_allclose(changed[name], circuit(PLAIN)[name], rtol=1e-12)


def slipped(old, new):
    """y_oc and z_sc of the plain sheet with a key of both tests written otherwise."""
    lines = "line and line"
    text = forward.sheet(
        [PLAIN.at(oc_between=lines, sc_between=lines, oc_watts_are="total", sc_watts_are="total",
                  ohms_between=("winding", "winding"))]
    )  # fmt: skip
    assert text.count(old) == 2
    units, findings = chain.run(plant_of_text(text.replace(old, new)))
    assert not findings
    return units["y_oc"][0], units["z_sc_tested"][0]


def test_line_volts_taken_for_phase_volts_move_the_impedance_by_root_three():
    y, z = slipped("between: line and line", "between: line and neutral")
    assert abs(z) == pytest.approx(np.sqrt(3) * abs(circuit(PLAIN)["z_sc_tested"]))
    assert abs(y) == pytest.approx(abs(circuit(PLAIN)["y_oc"]) / np.sqrt(3))


def test_total_watts_taken_for_one_phases_treble_the_loss():
    y, z = slipped("watts_are: total", "watts_are: per phase")
    assert z.real == pytest.approx(3 * circuit(PLAIN)["z_sc_tested"].real)
    assert y.real == pytest.approx(3 * circuit(PLAIN)["y_oc"].real)


def test_line_volts_and_phase_volts_of_three_equal_phases():
    # 6350.85 V to neutral is 11 kV between lines (hand)
    assert metering.line_volts(6350.853) == pytest.approx(11e3, abs=1e-3)
    assert metering.total_watts(4.2e3) == pytest.approx(12.6e3)
