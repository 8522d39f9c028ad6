"""Rows as read, and the relations that must hold between the keys of one sheet."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cache

from .. import vectorgroup
from ..quantity import Quantity
from .document import Document, Place

#: near names are looked for while a sheet has fewer problems than this: each look costs a pass
_MOST_NEAR = 50
#: a percentage and the key that names its base
_BASES = {
    "plate_impedance": "plate_impedance_base",
    "results_load_loss": "results_base",
    "results_no_load_current": "results_base",
    "assume_load_loss": "assume_base",
    "assume_no_load_current": "assume_base",
}


@dataclass
class Row:
    """One row of a table as read: where it stands, its texts and its numbers."""

    document: Document
    place: Place
    name: str = ""
    unit: int = -1
    text: dict[str, str] = field(default_factory=dict)
    number: dict[str, Quantity] = field(default_factory=dict)
    spread: dict[str, float] = field(default_factory=dict)
    places: dict[str, Place] = field(default_factory=dict)
    readings: dict[str, int] = field(default_factory=dict)

    def at(self, column: str) -> Place:
        """Return where a column stands, or would stand."""
        side, _, key = column.partition("_")
        nested = (side, key) if side in ("hv", "lv", "results", "assume") else (column,)
        return self.places.get(column, (*self.place, *nested))

    def faulty(self, *columns: str) -> bool:
        """Return whether one of these columns has a problem already."""
        return any(self.document.faulty(self.at(column)) for column in columns)

    def report(self, column: str, expected: str, mend: str = "") -> None:
        """Add a problem at a column of this row."""
        place = self.at(column)
        read = self.text.get(column) or "nothing"
        self.document.report(place, read if read == "nothing" else repr(read), expected, mend)


def unique_busbars(rows: Sequence[Row]) -> list[Row]:
    """Return busbars by name; the same busbar may stand in two sheets if they agree."""
    first: dict[str, Row] = {}
    for row in rows:
        known = first.setdefault(row.name, row)
        if known is not row:
            for column in ("nominal_voltage", "source_voltage"):
                mine, theirs = row.number.get(column), known.number.get(column)
                if mine and theirs and mine.value != theirs.value:
                    where = f"{known.document.name}:{known.document.line(known.place)}"
                    row.report(column, f"{known.text[column]} as in {where}")
                elif mine and column not in known.number:
                    known.number[column], known.text[column] = mine, row.text[column]
                    known.places[column] = row.places[column]
    return list(first.values())


def check_names(rows: Sequence[Row]) -> None:
    """Refuse a transformer's name that another sheet has too."""
    first: dict[str, Row] = {}
    for row in rows:
        known = first.setdefault(row.name, row)
        if known.document is not row.document:
            where = f"{known.document.name}:{known.document.line(known.place)}"
            row.document.report(
                row.place, f"the name {row.name!r} again (first in {where})", "names used once"
            )


def check_unit(
    unit: Row, busbars: Sequence[str], nested: dict[str, list[Row]], stage: str | None
) -> None:
    """Check the relations between the keys of one transformer, as far as these can be read."""
    if unit.document.faulty(unit.place):
        return
    three = {"3": True, "1": False}.get(unit.text.get("phases", ""))
    _check_sides(unit, busbars, three)
    _check_group(unit, three)
    _check_rating(unit, nested["stages"], stage)
    for row in itertools.chain(nested["open_circuit"], nested["short_circuit"]):
        _check_test(row, three)
    sides = [row.text.get("side", "") for row in nested["resistance"]]
    for row, side in zip(nested["resistance"], sides, strict=True):
        if three is True and "between" not in row.text:
            row.report("between", "line and line, or winding: what the ohms were read across")
        if three is False and "between" in row.text:
            row.report("between", "no such key on a single-phase unit: the ohms are the winding's")
        if three is False and row.readings.get("ohms", 1) > 1:
            row.report("ohms", "one reading on a single-phase unit")
        if side and sides.count(side) > 1:
            row.report("side", "each side once")


@cache
def _near(name: str, names: tuple[str, ...]) -> str:
    """Return the advice for a busbar that is not listed."""
    near = get_close_matches(name, names, 1, 0.5)
    return f"did you mean {near[0]}?" if near else "list it under busbars"


def _check_sides(unit: Row, names: Sequence[str], three: bool | None) -> None:
    for side in ("hv", "lv"):
        bus = unit.text.get(f"{side}_busbar")
        if bus is not None and bus not in names and not unit.faulty(f"{side}_busbar"):
            few = len(unit.document.problems) < _MOST_NEAR
            mend = _near(bus, tuple(names)) if few else "list it under busbars"
            unit.report(f"{side}_busbar", "the name of a busbar", mend)
        across, connection = f"{side}_across", f"{side}_connection"
        if three is True and across in unit.text:
            unit.report(across, "no such key on a three-phase unit")
        if three is False:
            if across not in unit.text and not unit.faulty(across):
                unit.report(across, "line and line, or line and neutral, on a single-phase unit")
            if connection in unit.text:
                unit.report(connection, "no such key on a single-phase unit")
    if unit.text.get("hv_busbar") and unit.text.get("hv_busbar") == unit.text.get("lv_busbar"):
        unit.report("lv_busbar", "another busbar than hv is connected to")
    hv, lv = unit.number.get("hv_rated_voltage"), unit.number.get("lv_rated_voltage")
    if hv and lv and hv.value < lv.value:
        unit.report(
            "hv_rated_voltage",
            f"at least the {unit.text['lv_rated_voltage']} of lv",
            "hv is the side with the higher rated voltage: swap hv and lv",
        )


def _check_group(unit: Row, three: bool | None) -> None:
    pieces = ("hv_connection", "lv_connection", "clock")
    if "vector_group" not in unit.text and unit.faulty(*pieces):
        return
    parts = [unit.text.get(key) for key in pieces[:2]]
    clock = unit.number.get("clock")
    try:
        if "vector_group" in unit.text:
            group = vectorgroup.parse(unit.text["vector_group"])
            said = {"clock": str(group.clock)}
            if group.hv != "I":
                said |= {"hv_connection": group.hv, "lv_connection": group.lv}
            for column, value in said.items():
                if unit.text.get(column, value) != value:
                    line = unit.document.line(unit.places["vector_group"])
                    unit.report(column, f"{value}, as vector_group says on line {line}")
        elif three is not False and parts[0] and parts[1] and clock:
            group = vectorgroup.make(parts[0], parts[1], int(clock.value))
        else:
            wanted = (
                "such as YNd11, or connection of hv and lv and clock" if three else "Ii0 or Ii6"
            )
            unit.report("vector_group", f"a vector group {wanted}")
            return
    except ValueError as error:
        unit.report("vector_group" if "vector_group" in unit.text else "clock", str(error))
        return
    if three is not None and (group.hv == "I") is three:
        unit.report("vector_group", "YNd11 or the like" if three else "Ii0 or Ii6, single-phase")
    unit.text.update(hv_connection=group.hv, lv_connection=group.lv, vector_group=str(group))
    unit.number["clock"] = Quantity(float(group.clock), 0.0)


def _check_rating(unit: Row, stages: Sequence[Row], stage: str | None) -> None:
    names = [row.name for row in stages]
    if unit.faulty("cooling_stages"):
        return
    both = bool(stages) and "rated_power" in unit.text
    if both or not (stages or "rated_power" in unit.text):
        expected = "rated_power, or cooling_stages and study_stage" + (", not both" * both)
        unit.report("rated_power", expected)
    if not stages:
        if "study_stage" in unit.text:
            unit.report("study_stage", "no such key on a unit with one rating")
        return
    expected = "one of the cooling stages " + ", ".join(names)
    if stage is not None and stage not in names:
        read = f"{stage!r} from the option --stage"
        unit.document.report(unit.at("study_stage"), read, expected)
    elif stage is None and unit.text.get("study_stage") not in names:
        unit.report("study_stage", expected)
    if stage is not None:
        unit.text["study_stage"] = stage
    if len(stages) < 2:
        return
    for key, base in _BASES.items():
        if key in unit.text and base not in unit.text:
            fact = key.removeprefix("results_").removeprefix("assume_")
            unit.report(base, f"the rated power of {fact}", "the unit has several ratings")


def _check_test(row: Row, three: bool | None) -> None:
    if three is False:
        for column in ("between", "watts_are"):
            if column in row.text:
                row.report(column, "no such key on a single-phase unit: readings are its winding's")
        for column in ("volts", "amps", "watts"):
            if row.readings.get(column, 1) > 1:
                row.report(column, "one reading on a single-phase unit, not three")
    elif three and row.readings.get("watts", 1) > 1 and "watts_are" in row.text:
        row.report("watts_are", "no such key beside three watts, which are summed")
