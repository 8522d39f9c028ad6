"""Vector groups: spellings, and the clock numbers that windings on three limbs can make."""

import cmath
import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from convert.vectorgroup import HV_CONNECTIONS, LV_CONNECTIONS, make, parse

ALL = [(hv, lv, clock) for hv in HV_CONNECTIONS for lv in LV_CONNECTIONS for clock in range(-1, 14)]
LIMBS = [cmath.exp(-2j * math.pi * limb / 3) for limb in range(3)]


def terminals(letter, sign, step):
    """Volts to neutral of three terminals from the volts that the three limbs induce.

    `sign` turns every winding round, `step` (1 or 2) says which limb is joined next.
    """
    e = [sign * v for v in LIMBS]
    match letter.upper()[0]:
        case "Y":
            return e
        case "Z":
            return [e[k] - e[(k + step) % 3] for k in range(3)]
        case _:  # delta: e[k] lies between terminal k and terminal k + step, the sum is zero
            return [(e[k] - e[(k - step) % 3]) / 3 for k in range(3)]


def windings(letter):
    return [terminals(letter, sign, step) for sign in (1, -1) for step in (1, 2)]


def possible_clocks(hv, lv):
    """Hours by which any low-voltage terminal may lag, over every way to join the windings."""
    hours = set()
    for high in windings(hv):
        for low in windings(lv):
            for name in range(3):  # the terminals may be named from any limb
                lag = math.degrees(cmath.phase(high[0] / low[name])) / 30
                assert lag == pytest.approx(round(lag), abs=1e-9)
                hours.add(round(lag) % 12)
    return hours


def test_a_delta_terminal_stands_between_its_two_windings():
    for step in (1, 2):
        v = terminals("D", 1, step)
        for k in range(3):
            assert v[k] - v[(k + step) % 3] == pytest.approx(LIMBS[k])


@pytest.mark.parametrize(("hv", "lv", "clock"), ALL)
def test_a_clock_is_taken_exactly_where_windings_can_make_it(hv, lv, clock):
    if clock in possible_clocks(hv, lv):
        group = make(hv, lv, clock)
        assert (group.letters, str(group)) == (hv + lv, f"{hv}{lv}{clock}")
    else:
        with pytest.raises(ValueError, match=f"{hv}{lv} can make"):
            make(hv, lv, clock)


@pytest.mark.parametrize("clock", range(13))
def test_one_winding_a_side_can_only_be_reversed(clock):
    if clock in (0, 6):
        assert str(make("I", "i", clock)) == f"Ii{clock}"
    else:
        with pytest.raises(ValueError, match="0, 6"):
            make("I", "i", clock)


@pytest.mark.parametrize(
    ("text", "group"),
    [
        ("YNd11", "YNd11"),
        ("Dyn 11", "Dyn11"),
        ("DYN-11", "Dyn11"),
        ("D,yn,1", "Dyn1"),
        ("Yy0", "Yy0"),
        ("YNyn0", "YNyn0"),
        ("YYN0", "Yyn0"),
        ("Dz6", "Dz6"),
        ("ZNyn5", "ZNyn5"),
        (" ynd5 ", "YNd5"),
        ("Ii0", "Ii0"),
        ("II6", "Ii6"),
    ],
)
def test_spellings_on_plates(text, group):
    assert str(parse(text)) == group


@given(st.sampled_from([g for g in ALL if g[2] in possible_clocks(*g[:2])]))
@settings(derandomize=True, deadline=None, max_examples=200)
def test_every_group_is_read_as_it_is_printed(group):
    text = "{}{}{}".format(*group)
    read = parse(text)
    assert (read.hv, read.lv, read.clock) == group
    assert parse(text.upper()) == read


@pytest.mark.parametrize("text", ["dYN11", "ynD11", "dY5", "yD1"])
def test_a_group_with_its_low_voltage_side_first_is_refused(text):
    # capitals are the high-voltage side: read in the order of writing, Dyn would become YNd
    with pytest.raises(ValueError, match="such as YNd11"):
        parse(text)


@pytest.mark.parametrize(
    "text", ["", "YNd", "11", "YN11", "Star-delta", "YNd11d1", "Dyn111", "Dyn1.5", "III0", "YNa0"]
)
def test_other_text_is_no_group(text):
    with pytest.raises(ValueError, match="such as YNd11"):
        parse(text)


@given(st.one_of(st.text(), st.text("DYNZIdynzi0123456789 -", max_size=8)))
@settings(derandomize=True, deadline=None, max_examples=500)
def test_any_text_is_a_group_or_a_refusal(text):
    try:
        group = parse(text)
    except ValueError:
        return
    assert 0 <= group.clock <= 11
