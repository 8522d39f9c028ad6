"""Text with a unit -> SI float and back. The only user of pint, which sees only the unit word.

Electrical quantities are held in V, A, W, VA, ohm, Hz; temperatures in degrees Celsius; ratios as
fractions. Each dimension has its own family of words, so that VA is never taken for W.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from functools import cache
from typing import Any

#: dimension -> (words in print order, an example for messages, what it is called)
FAMILIES: dict[str, tuple[tuple[str, ...], str, str]] = {
    "voltage": (("V", "kV", "mV", "MV"), "11 kV", "a voltage"),
    "current": (("A", "kA", "mA"), "105 A", "a current"),
    "active_power": (("W", "kW", "MW"), "8.4 kW", "a power in watts"),
    "apparent_power": (("VA", "kVA", "MVA", "GVA"), "20 MVA", "a rating in volt-amperes"),
    "resistance": (
        ("ohm", "Ω", "mohm", "mΩ", "µohm", "µΩ", "kohm", "kΩ", "Mohm", "MΩ"),
        "12.5 mΩ",
        "a resistance",
    ),
    "frequency": (("Hz",), "50 Hz", "a frequency"),
    "temperature": (("°C", "degC"), "75 °C", "a temperature"),
    "ratio": (("%", "pu"), "9.85 %", "a ratio in % or pu"),
}
_DEFINITIONS = """
milli- = 1e-3 = m-
micro- = 1e-6 = u-
kilo- = 1e3 = k-
mega- = 1e6 = M-
giga- = 1e9 = G-
volt = [voltage] = V
ampere = [current] = A
watt = [active_power] = W
volt_ampere = [apparent_power] = VA
ohm = [resistance]
hertz = [frequency] = Hz
degC = [temperature]
pu = [ratio]
percent = 0.01 * pu
"""
#: pint rewrites these signs before it looks a unit up; it is given plain letters instead
_PLAIN = str.maketrans({"Ω": "ohm", "µ": "u", "°": "deg", "%": "percent"})
NUMBER = r"[+-]?(?:[0-9]{1,30}(?:\.[0-9]{0,30})?|\.[0-9]{1,30})(?:[eE][+-]?[0-9]{1,2})?"
ROOT_THREE = r"\s*/\s*(?:√\s*3|sqrt\(3\))"
_TEXT = re.compile(rf"({NUMBER})({ROOT_THREE})?\s*([^\s\d.,+\-/*^()]*)")
_COMMA = re.compile(r"[+-]?\d+,\d+")
_HUGE = re.compile(r"[+-]?(?:[\d.]+[eE][+-]?\d{3,}|[\d.]{31,})")
_SPACED = re.compile(r"\d[\s'_]+\d")
#: both code points of micro and of ohm are read
_SAME = str.maketrans({"μ": "µ", "\u2126": "Ω", "−": "-", "\u00a0": " "})


@dataclass(frozen=True)
class Quantity:
    """A number read from text: SI value and half its last printed digit (same unit)."""

    value: float
    half_digit: float


class QuantityError(ValueError):
    """Text that is not the quantity asked for: what was expected, and how to mend it."""

    def __init__(self, expected: str, mend: str = "") -> None:
        super().__init__(expected)
        self.expected, self.mend = expected, mend


@cache
def _registry() -> Any:
    import pint

    registry: Any = pint.UnitRegistry(None)
    for line in _DEFINITIONS.split("\n"):
        if line:
            registry.define(line)
    return registry


@cache
def factor(word: str) -> float:
    """Return the SI value of one `word` (kV -> 1000.0); the word must stand in FAMILIES."""
    return float(_registry().Quantity(1.0, word.translate(_PLAIN)).to_base_units().magnitude)


def expectation(dimension: str) -> str:
    """Return what a message says was expected: `a voltage such as 11 kV`."""
    _, example, name = FAMILIES[dimension]
    return f"{name} such as {example}"


def parse(text: str, dimension: str) -> Quantity:
    """Read one number with its unit.

    Parameters
    ----------
    text : str
        For instance `66 kV`, `66/√3 kV`, `66/sqrt(3) kV`, `9.85 %`, `-5 °C`.
    dimension : str
        A key of FAMILIES.

    Returns
    -------
    Quantity
        Value and half of the last printed digit, both in SI (temperature: °C, ratio: fraction).

    Raises
    ------
    QuantityError
        The text is not a number with a unit of this family, or a magnitude is negative.
    """
    expected = expectation(dimension)
    words = FAMILIES[dimension][0]
    clean = text.translate(_SAME).strip()
    match = _TEXT.fullmatch(clean)
    if match is None:
        raise QuantityError(expected, _mend_number(clean, words))
    number, root, word = match.groups()
    if word not in words:
        raise QuantityError(expected, _mend_unit(number, word, words))
    if root and dimension != "voltage":
        raise QuantityError(expected, "only volts may be written over √3")
    scale = factor(word) / (math.sqrt(3.0) if root else 1.0)
    value = float(number) * scale
    if not math.isfinite(value):
        raise QuantityError(expected, "the number is too large to be held")
    if number.startswith("-") and dimension != "temperature":
        raise QuantityError(expected, "a magnitude is written without a minus sign")
    return Quantity(value, 0.5 * last_digit(number) * scale)


def last_digit(number: str) -> float:
    """Return the place value of the last printed digit: `5.20` -> 0.01, `1.5e3` -> 100.0."""
    mantissa, _, exponent = number.lower().partition("e")
    decimals = len(mantissa.partition(".")[2])
    return float(f"1e{int(exponent or 0) - decimals}")


def _mend_number(text: str, words: tuple[str, ...]) -> str:
    if _COMMA.match(text):
        return f"write a decimal point, {text.replace(',', '.', 1)}, and no thousands separator"
    if _HUGE.match(text):
        return "the number is too large or too small to be held"
    if _SPACED.search(text):
        return "write the number without spaces between its digits"
    if text.lower().lstrip("+-.").partition(" ")[0] in {"nan", "inf", "infinity"}:
        return "a reading is a finite number; leave the key out if there is none"
    if text.lower() in {"true", "false", "yes", "no", "on", "off"}:
        return "a truth value is no reading"
    return "write one number, a space and the unit"


def _mend_unit(number: str, word: str, words: tuple[str, ...]) -> str:
    choice = ", ".join(words)
    if not word:
        return f"a bare number has no unit: write {number} and one of {choice}"
    for other in FAMILIES.values():
        if word in other[0]:
            return f"{word} is the unit of {other[2]}: write one of {choice}"
    near = [w for w in words if w.lower().lstrip("°") == word.lower()]
    hint = f"did you mean {' or '.join(near)}?" if near else f"the units read here are {choice}"
    prefixes = "; m is milli, M is mega" if words[0] in ("V", "A", "W", "VA", "ohm") else ""
    return f"unit {word!r} is not known ({hint}){prefixes}"


def show(value: float, dimension: str, digits: int = 6) -> str:
    """Return a value as text with the unit word that keeps it between 1 and 1000.

    >>> show(11000.0, "voltage")
    '11 kV'
    """
    if dimension == "temperature":
        return f"{value:.{digits}g} °C"
    if dimension == "ratio":
        return f"{100.0 * value:.{digits}g} %"
    usable = [w for w in FAMILIES[dimension][0] if not w.endswith("ohm")]
    scaled = sorted((factor(w), w) for w in usable)
    best = next((p for p in reversed(scaled) if abs(value) >= p[0]), None)
    size, word = best if best and value else (1.0, FAMILIES[dimension][0][0])
    return f"{value / size:.{digits}g} {word}"
