"""Rows as read, and the relations that must hold between the keys of one sheet."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches

from .. import vectorgroup
from ..quantity import Quantity
from .document import Document, Place

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

    def report(self, column: str, expected: str, mend: str = "") -> None:
        """Add a problem at a column of this row."""
        place = self.places.get(column, (*self.place, column))
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
    """Check the relations between the keys of one transformer."""
    three = unit.text.get("phases") == "3"
    _check_sides(unit, busbars, three)
    _check_group(unit, three)
    _check_rating(unit, nested["stages"], stage)
    for row in itertools.chain(nested["open_circuit"], nested["short_circuit"]):
        _check_test(row, three)
    sides = [row.text.get("side", "") for row in nested["resistance"]]
    for row, side in zip(nested["resistance"], sides, strict=True):
        if three and "between" not in row.text:
            row.report("between", "line and line, or winding: what the ohms were read across")
        if not three and "between" in row.text:
            row.report("between", "no such key on a single-phase unit: the ohms are the winding's")
        if "," in row.text.get("ohms", "") and not three:
            row.report("ohms", "one reading on a single-phase unit")
        if sides.count(side) > 1:
            row.report("side", "each side once")


def _check_sides(unit: Row, names: Sequence[str], three: bool) -> None:
    for side in ("hv", "lv"):
        bus = unit.text.get(f"{side}_busbar")
        if bus is not None and bus not in names:
            near = get_close_matches(bus, names, 1, 0.5)
            mend = f"did you mean {near[0]}?" if near else "list it under busbars"
            unit.report(f"{side}_busbar", "the name of a busbar", mend)
        across, connection = f"{side}_across", f"{side}_connection"
        if three and across in unit.text:
            unit.report(across, "no such key on a three-phase unit")
        if not three and unit.text.get("phases") == "1":
            if across not in unit.text:
                unit.places.setdefault(across, (*unit.place, side, "across"))
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


def _check_group(unit: Row, three: bool) -> None:
    parts = [unit.text.get(key) for key in ("hv_connection", "lv_connection")]
    clock = unit.number.get("clock")
    try:
        if "vector_group" in unit.text:
            group = vectorgroup.parse(unit.text["vector_group"])
            for column, value in (("hv_connection", group.hv), ("lv_connection", group.lv),
                                  ("clock", str(group.clock))):  # fmt: skip
                if unit.text.get(column, value) != value:
                    line = unit.document.line(unit.places["vector_group"])
                    unit.report(column, f"{value}, as vector_group says on line {line}")
        elif three and parts[0] and parts[1] and clock:
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
    if (group.hv == "I") is three and unit.text.get("phases"):
        unit.report("vector_group", "YNd11 or the like" if three else "Ii0 or Ii6, single-phase")
    unit.text.update(hv_connection=group.hv, lv_connection=group.lv, vector_group=str(group))
    unit.number["clock"] = Quantity(float(group.clock), 0.0)


def _check_rating(unit: Row, stages: Sequence[Row], stage: str | None) -> None:
    names = [row.name for row in stages]
    both = bool(stages) and "rated_power" in unit.text
    if both or not (stages or "rated_power" in unit.text):
        expected = "rated_power, or cooling_stages and study_stage" + (", not both" * both)
        unit.report("rated_power", expected)
    if not stages:
        if "study_stage" in unit.text:
            unit.report("study_stage", "no such key on a unit with one rating")
        return
    if stage is not None:
        unit.text["study_stage"] = stage
    if unit.text.get("study_stage") not in names:
        unit.report("study_stage", "one of the cooling stages " + ", ".join(names))
    if len(stages) < 2:
        return
    for key, base in _BASES.items():
        if key in unit.text and base not in unit.text:
            block, _, name = base.partition("_")
            path = (base,) if block == "plate" else (block, name)
            unit.places.setdefault(base, (*unit.place, *path))
            unit.report(base, f"the rated power of {key}", "the unit has several ratings")


def _check_test(row: Row, three: bool) -> None:
    if not three:
        for column in ("between", "watts_are"):
            if column in row.text:
                row.report(column, "no such key on a single-phase unit: readings are its winding's")
        for column in ("volts", "amps", "watts"):
            if "," in row.text.get(column, ""):
                row.report(column, "one reading on a single-phase unit, not three")
    elif "," in row.text.get("watts", "") and "watts_are" in row.text:
        row.report("watts_are", "no such key beside three watts, which are summed")
