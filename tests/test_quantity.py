"""Text with a unit: what is read, to which digit, and what is refused with which help."""

import math
import string

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from convert.quantity import FAMILIES, QuantityError, factor, last_digit, parse, show

FAST = settings(derandomize=True, deadline=None, max_examples=300)
DIMENSIONS = sorted(FAMILIES)

# SI prefixes as the SI brochure gives them; % and pu are fractions of one
FACTORS = {
    "V": 1, "kV": 1e3, "mV": 1e-3, "MV": 1e6, "A": 1, "kA": 1e3, "mA": 1e-3, "W": 1, "kW": 1e3,
    "MW": 1e6, "VA": 1, "kVA": 1e3, "MVA": 1e6, "GVA": 1e9, "ohm": 1, "Ω": 1, "mohm": 1e-3,
    "mΩ": 1e-3, "µohm": 1e-6, "µΩ": 1e-6, "kohm": 1e3, "kΩ": 1e3, "Mohm": 1e6, "MΩ": 1e6, "Hz": 1,
    "°C": 1, "degC": 1, "%": 0.01, "pu": 1,
}  # fmt: skip


def refusal(text, dimension="voltage"):
    with pytest.raises(QuantityError) as caught:
        parse(text, dimension)
    return caught.value


def test_every_unit_word_has_its_si_factor():
    words = [word for family in FAMILIES.values() for word in family[0]]
    assert {word: factor(word) for word in words} == pytest.approx(FACTORS, rel=1e-15)


def test_no_unit_word_stands_in_two_families():
    words = [word for family in FAMILIES.values() for word in family[0]]
    assert len(words) == len(set(words))


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("66 kV", "voltage", 66000.0),
        ("66kV", "voltage", 66000.0),
        ("  +66.0  kV ", "voltage", 66000.0),
        ("66\u00a0kV", "voltage", 66000.0),  # no-break space, as copied from a document
        (".5 pu", "ratio", 0.5),
        ("5. A", "current", 5.0),
        ("1.5e3 V", "voltage", 1500.0),
        ("15E-1 kV", "voltage", 1500.0),
        ("9.85 %", "ratio", 0.0985),
        ("-5 °C", "temperature", -5.0),
        ("−5 °C", "temperature", -5.0),  # U+2212, the typographic minus
        ("21.5degC", "temperature", 21.5),
        ("12.5 m\u03a9", "resistance", 0.0125),  # Greek omega
        ("12.5 m\u2126", "resistance", 0.0125),  # ohm sign
        ("12500 \u00b5\u03a9", "resistance", 0.0125),  # micro sign
        ("12500 \u03bc\u2126", "resistance", 0.0125),  # Greek mu
        ("12500 \u03bcohm", "resistance", 0.0125),
    ],
)
def test_the_ways_to_write_a_quantity(text, dimension, value):
    assert parse(text, dimension).value == pytest.approx(value, rel=1e-15)


# 66 kV / 1.7320508075688772 by hand, to the volt's eighth figure
@pytest.mark.parametrize(
    "text", ["66/√3 kV", "66/sqrt(3) kV", "66 / √ 3 kV", "66/√3kV", "6.6e1/√3 kV"]
)
def test_volts_over_root_three_are_phase_volts(text):
    assert parse(text, "voltage").value == pytest.approx(38105.118, abs=0.0005)


@pytest.mark.parametrize("dimension", [d for d in DIMENSIONS if d != "voltage"])
def test_only_volts_stand_over_root_three(dimension):
    word = FAMILIES[dimension][0][0]
    assert "√3" in refusal(f"10/√3 {word}", dimension).mend


@pytest.mark.parametrize(
    ("number", "place"),
    [("5", 1), ("5.", 1), ("5.20", 0.01), (".125", 1e-3), ("1.5e3", 100), ("2e-3", 1e-3)],
)
def test_the_last_printed_digit_has_its_place(number, place):
    assert last_digit(number) == pytest.approx(place, rel=1e-15)


@pytest.mark.parametrize(
    ("text", "dimension", "half"),
    [
        ("5.20 A", "current", 0.005),
        ("5 kA", "current", 500.0),
        ("9.85 %", "ratio", 0.00005),
        ("20.8 mohm", "resistance", 0.00005),
        ("1.5e3 V", "voltage", 50.0),
        ("66/√3 kV", "voltage", 288.675),  # 500 V / √3
        ("21.5 °C", "temperature", 0.05),
    ],
)
def test_half_of_the_last_printed_digit_is_kept_in_si(text, dimension, half):
    assert parse(text, dimension).half_digit == pytest.approx(half, rel=1e-6)


@FAST
@given(st.floats(0, 1e6), st.integers(0, 6), st.sampled_from(["V", "kV", "mV"]))
def test_a_rounded_reading_lies_within_half_its_last_digit(x, decimals, word):
    read = parse(f"{x:.{decimals}f} {word}", "voltage")
    size = FACTORS[word]
    # the parts of 1e-12 are the rounding of floats, which half a digit need not hold
    assert abs(read.value - x * size) <= read.half_digit * (1 + 1e-9) + 1e-12 * x * size


@FAST
@given(st.sampled_from([d for d in DIMENSIONS if d != "temperature"]), st.floats(1e-12, 1e15))
def test_what_is_shown_is_read_back(dimension, value):
    # six figures are shown, so half a unit of the sixth may go
    assert parse(show(value, dimension), dimension).value == pytest.approx(value, rel=5.1e-6)
    assert parse(show(value, dimension, 17), dimension).value == pytest.approx(value, rel=4e-16)


@FAST
@given(st.floats(-60, 400).map(lambda value: round(value, 9)))
def test_a_temperature_that_is_shown_is_read_back(value):
    assert parse(show(value, "temperature", 17), "temperature").value == value


@pytest.mark.parametrize(
    ("value", "dimension", "text"),
    [
        (11000.0, "voltage", "11 kV"),
        (20e6, "apparent_power", "20 MVA"),
        (0.0208, "resistance", "20.8 mΩ"),
        (0.0, "voltage", "0 V"),
        (0.0985, "ratio", "9.85 %"),
        (-5.0, "temperature", "-5 °C"),
    ],
)
def test_the_unit_word_shown_suits_the_size(value, dimension, text):
    assert show(value, dimension) == text


@pytest.mark.parametrize(
    ("text", "dimension", "help_"),
    [
        ("100", "apparent_power", "no unit"),
        ("100", "apparent_power", "MVA"),
        ("66,0 kV", "voltage", "66.0 kV"),
        ("66 000 V", "voltage", "spaces"),
        ("66'000 V", "voltage", "spaces"),
        ("66_000 V", "voltage", "spaces"),
        ("nan", "voltage", "finite"),
        ("NaN kV", "voltage", "finite"),
        (".inf", "voltage", "finite"),
        ("-inf kV", "voltage", "finite"),
        ("infinity", "temperature", "finite"),
        ("true", "voltage", "truth value"),
        ("Off", "voltage", "truth value"),
        ("1e400 V", "voltage", "too large"),
        ("-66 kV", "voltage", "minus"),
        ("-0 V", "voltage", "minus"),
        ("−66 kV", "voltage", "minus"),
        ("66 kv", "voltage", "kV"),
        ("66 KV", "voltage", "kV"),
        ("20 kva", "apparent_power", "kVA"),
        ("20 MW", "apparent_power", "power in watts"),
        ("8.4 kVA", "active_power", "rating in volt-amperes"),
        ("12.5 mOhm", "resistance", "m is milli, M is mega"),
    ],
)
def test_a_refusal_says_how_to_mend(text, dimension, help_):
    assert help_ in refusal(text, dimension).mend


def test_a_bare_number_is_given_no_unit_by_the_message():
    # 0.099 for 9.9 % must not be mended to 0.099 %, nor 100 for 100 MVA to 100 VA
    assert "0.099 %" not in refusal("0.099", "ratio").mend
    assert "100 VA" not in refusal("100", "apparent_power").mend


@pytest.mark.parametrize(
    "text",
    [
        "", " ", "kV", "66 kV 1", "66 kV.", "66 kV/√3", "0x10 V", "5**2 V", "9**9**9 V", "1/2 V",
        "(66) kV", "66 kV kV", "१२ V", "1e V", "1e5.5 V", "--5 V", "6 6 kV", "66 k V",
        "66/√2 kV", "66√3 kV", "10.9-11.1 kV", "≈66 kV", "66 kΩ", "66 MVAr", "66 \u2103",
    ],
)  # fmt: skip
def test_other_text_is_no_voltage(text):
    assert "voltage" in refusal(text).expected


LIKELY = st.text(string.digits + "+-−.,eE/√sqrt(3) \u00a0" + "kMmµμΩ\u2126VAWHz°C%pu", max_size=24)


@settings(derandomize=True, deadline=None, max_examples=600)
@given(st.one_of(st.text(), LIKELY), st.sampled_from(DIMENSIONS))
@example("0e400 V", "voltage")
@example("0e-400 V", "voltage")
@example("1e-" + "9" * 5000 + " V", "voltage")
@example("0e" + "9" * 5000 + " V", "voltage")
@example("9" * 5000 + " V", "voltage")
@example("1e308 MV", "voltage")
@example("-1e-400 V", "voltage")
def test_any_text_is_a_finite_quantity_or_a_refusal(text, dimension):
    try:
        read = parse(text, dimension)
    except QuantityError:
        return
    assert math.isfinite(read.value)
    assert math.isfinite(read.half_digit)
    assert read.half_digit >= 0
    assert dimension == "temperature" or math.copysign(1, read.value) > 0
