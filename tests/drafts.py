"""Station sheets as text, for tests that change one thing in them. Every value is invented.

`unit()` is a clean 20 MVA, 66/11 kV unit: tested at 75 °C, the study's temperature, its readings
from a circuit with uk = 10 %, Pk = 96 kW, P0 = 14 kW and i0 = 0.3 % by the definitions of these.
A slip is made by an edit of the text, so that the line of the slip is known.
"""

from __future__ import annotations

import ast
import re
from pathlib import Path

import convert
from convert.errors import Finding
from convert.intake.sheet import read
from convert.plant import Plant
from convert.study import examine

#: what every unit of an exact T has
ALWAYS = {"exact-circuit"}

HEAD = """\
station: {name: Reed Mill (invented)}
system:
  base_power: 100 MVA
  frequency: 50 Hz
  study_temperature: 75 °C
busbars:
  Reed Mill 66: {nominal_voltage: 66 kV, source_voltage: 66 kV}
  Reed Mill 11: {nominal_voltage: 11 kV}
transformers:
"""

# rated amps 174.95 A and 1049.7 A; uk 10 % is 6600 V, i0 0.3 % is 3.149 A
UNIT = """\
  T1:
    certificate: {standard: IEC 60076-1}
    phases: 3
    vector_group: YNd11
    rated_power: 20 MVA
    hv:
      busbar: Reed Mill 66
      rated_voltage: 66 kV
      metal: copper
    lv:
      busbar: Reed Mill 11
      rated_voltage: 11 kV
      metal: copper
    plate_impedance: 10.00 %
    reference_temperature: 75 °C
    tests:
      open_circuit:
        - energised: lv
          volts: 11.000 kV
          amps: 3.149 A
          watts: 14.00 kW
      short_circuit:
        - fed: hv
          volts: 6.600 kV
          amps: 174.95 A
          watts: 96.00 kW
          temperature: 75 °C
"""

# I²R at 75 °C from these: HV 3·174.95²·0.52 Ω = 47.7 kW, LV 3·1049.7²·10 mΩ = 33.1 kW: stray 16 %
RESISTANCE = """\
      resistance:
        - side: hv
          between: line and line
          ohms: 1.040 ohm
          temperature: 75.0 °C
        - side: lv
          between: line and line
          ohms: 20.00 mohm
          temperature: 75.0 °C
"""


def without(first: str, last: str = "") -> tuple[str, str]:
    """Return the change that cuts the clean unit from one text to before another, or to its end."""
    start = UNIT.index(first)
    return (UNIT[start : UNIT.index(last) if last else len(UNIT)], "")


NO_OPEN_CIRCUIT = without("      open_circuit", "      short_circuit")
NO_SHORT_CIRCUIT = without("      short_circuit")
NO_TESTS = without("    tests:")
NO_HV_METAL = ("      metal: copper\n    lv:", "    lv:")
NO_LV_METAL = ("      metal: copper\n    plate", "    plate")
NO_STANDARD = without("    certificate", "    phases")
TESTED_AT = "          temperature: 75 °C\n"


def edit(text: str, *changes: tuple[str, str]) -> str:
    """Return the text with each (old, new) put in; an old one that is not there once is a fault."""
    for old, new in changes:
        assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times"
        text = text.replace(old, new)
    return text


def unit(*changes: tuple[str, str], name: str = "T1", resistance: bool = False) -> str:
    """Return the clean unit's text with changes."""
    text = UNIT + RESISTANCE if resistance else UNIT
    return edit(text, *changes).replace("  T1:", f"  {name}:", 1)


def sheet(*units: str, changes: tuple[tuple[str, str], ...] = ()) -> str:
    """Return a sheet with these units, the clean one alone if there are none."""
    return edit(HEAD, *changes) + "".join(units or (unit(),))


def write(folder: Path, text: str, name: str = "mill.yaml") -> Path:
    """Write a sheet and return its path."""
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def plant(folder: Path, text: str, **options: float | str) -> Plant:
    """Return a sheet as read."""
    return read(write(folder, text), **options)  # type: ignore[arg-type]


def findings(folder: Path, text: str, model: str = "T", **options: float | str) -> list[Finding]:
    """Return what is found in a sheet."""
    return examine(plant(folder, text, **options), model)[1]


def rules(found: list[Finding]) -> set[str]:
    """Return the names of the rules that fired, but for what every unit has."""
    return {finding.rule for finding in found} - ALWAYS


def only(found: list[Finding], rule: str) -> Finding:
    """Return the one finding of a rule; more or none is a fault."""
    (one,) = [finding for finding in found if finding.rule == rule]
    return one


def stands_at(finding: Finding, text: str, part: str) -> bool:
    """Say whether a finding names the sheet and the line on which a part of it begins."""
    return f"mill.yaml:{line_of(text, part)} " in f"{finding.reading} "


def rule_names(file: str) -> set[str]:
    """Return the rules that a file of convert can report, by their look; or the start of one."""
    tree = ast.parse((Path(convert.__file__).parent / file).read_text(encoding="utf-8"))
    words = {node.value for node in ast.walk(tree) if isinstance(node, ast.Constant)}
    return {word for word in words if re.fullmatch("[a-z]+(-[a-z]+)+", str(word))}


def line_of(text: str, part: str) -> int:
    """Return the line of a text on which a part of it, there once, begins."""
    assert text.count(part) == 1, f"{part!r} stands {text.count(part)} times"
    return text[: text.index(part)].count("\n") + 1
