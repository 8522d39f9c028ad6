"""Winding-resistance readings -> star ohms and I²R loss, against networks of windings."""

from dataclasses import replace

import forward
import numpy as np
import pytest
from hypothesis import given, settings
from strategies import reduced, stations

from convert.reduction import resistance

CLOSE = 1e-12
#: temperature coefficient of annealed copper at 20 °C and its last printed digit (IEC 60028:1925,
#: from memory)
COPPER_PER_KELVIN, DIGIT = 0.00393, 1e-5


def unit(connection: str, clock: int) -> forward.Unit:
    """Invented: 1 MVA, 11/0.4 kV, both sides connected alike or against a star."""
    hv = forward.Side(11e3, connection, 1.7 if connection[0] == "D" else 0.6)
    lv = forward.Side(400.0, "YN", 0.8e-3)
    return forward.Unit(hv, lv, 1e6, 0.2, 6.8, 1e-5, 8e-5, clock=clock)


@pytest.mark.parametrize("between", ["line and line", "winding"])
@pytest.mark.parametrize(("connection", "clock"), [("D", 11), ("Y", 0), ("YN", 0), ("ZN", 1)])
def test_star_ohms_lose_what_the_windings_lose(connection, clock, between):
    bay = forward.Test(unit(connection, clock), ohms_between=(between, "winding"))
    table = reduced([bay])
    line_amps = 100.0
    winding_amps = line_amps / np.sqrt(3) if connection == "D" else line_amps
    lost = 3 * winding_amps**2 * bay.unit.hv.ohms
    assert resistance.ohmic_loss(line_amps, table["r_star_hv"][0], 3) == pytest.approx(
        lost, rel=CLOSE, abs=0
    )


def test_a_single_phase_winding_is_its_own_star():
    one = replace(unit("Y", 0), phases=1)
    one = replace(one, hv=replace(one.hv, connection="I"), lv=replace(one.lv, connection="I"))
    table = reduced([forward.Test(one)])
    assert table["r_star_hv"][0] == pytest.approx(one.hv.ohms, rel=CLOSE, abs=0)
    assert table["p_hv_tested"][0] == pytest.approx(
        (1e6 / 11e3) ** 2 * one.hv.ohms, rel=CLOSE, abs=0
    )


@pytest.mark.parametrize("ends", [forward.DELTA, forward.STAR], ids=["delta", "star"])
def test_loss_is_one_and_a_half_line_amps_squared_ohms_between_lines(ends):
    # of star and delta alike: C57.12.90, 9.4 (from memory)
    between = forward.ohms_between(ends, 0.37)
    star = resistance.star_resistance(between, 1 / 2)
    assert resistance.ohmic_loss(70.0, star, 3) == pytest.approx(
        1.5 * 70.0**2 * between, rel=CLOSE, abs=0
    )


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations())
def test_ohmic_loss_is_that_of_the_windings_at_the_temperature_of_the_test(tests):
    table = reduced(tests)
    for side in ("hv", "lv"):
        lost = [
            test.unit.phases
            * test.unit.rated_amps("hv") ** 2
            * test.unit.ohmic(side, test.temperature)
            for test in tests
        ]
        np.testing.assert_allclose(table[f"p_{side}_tested"], lost, rtol=CLOSE)


@settings(derandomize=True, deadline=None, max_examples=10)
@given(stations(split="resistances"))
def test_split_by_resistances_is_the_known_share(tests):
    known = [test.unit.r_share(test.temperature) for test in tests]
    table = reduced(tests)
    np.testing.assert_allclose(table["r_share_from"], known, rtol=CLOSE)
    np.testing.assert_allclose(table["r_share_to"], 1 - np.array(known), rtol=CLOSE)


def test_copper_rises_by_its_published_temperature_coefficient():
    rise = resistance.resistance_at_temperature(1.0, 20.0, 21.0, 234.5) - 1
    assert rise == pytest.approx(COPPER_PER_KELVIN, abs=DIGIT / 2)


def test_a_resistance_goes_to_another_temperature_and_back():
    there = resistance.resistance_at_temperature(0.8, 21.5, 95.0, 225.0)
    assert there > 0.8
    back = resistance.resistance_at_temperature(there, 95.0, 21.5, 225.0)
    assert back == pytest.approx(0.8, rel=4e-16, abs=0)


def test_resistance_is_proportional_to_the_rise_above_minus_k():
    # at θ = -K the law has no resistance left: half way there, half of it
    assert resistance.resistance_at_temperature(3.0, 65.0, -85.0, 235.0) == pytest.approx(1.5)
