"""Station sheets -> Plant: quantities read, relations between keys checked, all faults at once."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from ..errors import BranchwrightError
from ..plant import InputFile, Plant, Status, System, Table
from ..quantity import Quantity, QuantityError, parse, show
from .document import Document, Place, load
from .fields import Field, layout
from .relations import Row, check_names, check_unit, unique_busbars

_OPTIONS = {"base_power": "--base-power", "frequency": "--frequency",
            "study_temperature": "--temperature"}  # fmt: skip
TABLES = ("busbars", "transformers", "stages", "open_circuit", "short_circuit", "resistance")


def read(
    *paths: str | Path,
    base_power: float | None = None,
    frequency: float | None = None,
    temperature: float | None = None,
    stage: str | None = None,
) -> Plant:
    """Read station sheets into one Plant.

    Parameters
    ----------
    *paths : str or Path
        Station sheets; names of transformers are unique over all.
    base_power, frequency, temperature : float, optional
        System base power [VA], frequency [Hz] and study temperature [°C] in place of the sheets'.
    stage : str, optional
        Cooling stage that the study uses, for every unit that has stages.

    Returns
    -------
    Plant

    Raises
    ------
    BranchwrightError
        With every fault of every sheet, a line each.
    """
    _check_options(base_power, frequency, temperature)
    documents = [load(Path(path)) for path in paths]
    rows: dict[str, list[Row]] = {name: [] for name in (*TABLES, "system", "station")}
    for document in documents:
        if isinstance(document.tree, dict):
            _collect(document, document.tree, (), (), None, rows)
    options = System()
    for column, value in (
        ("base_power", base_power),
        ("frequency", frequency),
        ("study_temperature", temperature),
    ):
        if value is not None:
            setattr(options, column, value)
    system = _system(rows["system"], options)
    busbars = unique_busbars(rows["busbars"])
    check_names(rows["transformers"])
    nested: list[dict[str, list[Row]]] = [
        {name: [] for name in TABLES[2:]} for _ in rows["transformers"]
    ]
    for name in TABLES[2:]:
        for row in rows[name]:
            nested[row.unit][name].append(row)
    names = [row.name for row in busbars]
    for unit, tests in zip(rows["transformers"], nested, strict=True):
        check_unit(unit, names, tests, stage)
    problems = [problem for document in documents for problem in document.problems]
    if stage is not None and not problems and not rows["stages"]:
        text = f"option --stage: read {stage!r}; expected a unit with cooling stages"
        raise BranchwrightError([text])
    if problems:
        order = {str(path): at for at, path in enumerate(paths)}
        problems.sort(key=lambda p: (order.get(p.file, 0), p.line or 0))
        raise BranchwrightError(list(dict.fromkeys(problems)))
    return _plant(documents, system, rows, busbars)


def _check_options(base_power: float | None, *others: float | None) -> None:
    """Hold options to the limits of the keys that they stand for."""
    for (column, option), value in zip(_OPTIONS.items(), (base_power, *others), strict=True):
        spec = layout().fields[("system", column)]
        low = -math.inf if spec.above is None else spec.above
        high = math.inf if spec.below is None else spec.below
        if value is not None and not low < value < high:
            assert spec.dimension is not None
            limits = [f"more than {show(low, spec.dimension)}"]
            limits += [f"less than {show(high, spec.dimension)}"] if math.isfinite(high) else []
            read = show(value, spec.dimension)
            raise BranchwrightError(
                [f"option {option}: read {read!r}; expected {' and '.join(limits)}"]
            )


def _collect(
    document: Document,
    tree: Any,
    place: Place,
    generic: tuple[str, ...],
    row: Row | None,
    rows: dict[str, list[Row]],
) -> None:
    """Walk the tree; begin a row where the schema says so and read every field on the way."""
    shape = layout()
    if generic in shape.rows:
        table = shape.rows[generic]
        row = Row(document, place, str(place[-1]), len(rows["transformers"]) - 1)
        rows[table].append(row)
    if generic in shape.fields and row is not None:
        _read_field(document, tree, place, shape.fields[generic], row)
    elif isinstance(tree, dict):
        for key, child in tree.items():
            for part in (key, "*"):
                if (*generic, part) in shape.known:
                    _collect(document, child, (*place, key), (*generic, part), row, rows)
                    break
    elif isinstance(tree, list):
        for at, child in enumerate(tree):
            _collect(document, child, (*place, at), (*generic, "[]"), row, rows)


def _read_field(document: Document, tree: Any, place: Place, spec: Field, row: Row) -> None:
    parts = tree if isinstance(tree, list) else [tree]
    if spec.dimension:  # a reading broken over two lines is still one
        parts = [" ".join(part.split()) if isinstance(part, str) else part for part in parts]
    row.places[spec.column] = place
    if not all(isinstance(part, (str, int)) for part in parts):
        return  # the schema has said so
    row.text[spec.column] = ", ".join(map(str, parts))
    row.readings[spec.column] = len(parts)
    if spec.dimension is None:
        if spec.integer and isinstance(tree, int):
            row.number[spec.column] = Quantity(float(tree), 0.0)
        return
    read: list[Quantity] = []
    for at, part in enumerate(parts):
        here = (*place, at) if isinstance(tree, list) else place
        try:
            quantity = parse(str(part), spec.dimension)
        except QuantityError as error:
            what = "nothing" if part == "" else repr(str(part)[:60])
            document.report(here, what, error.expected, error.mend)
            continue
        if _within(quantity, spec, document, here, str(part)):
            read.append(quantity)
    if read and len(read) == len(parts):
        row.number[spec.column] = _combine(read, spec.combine)
        mean = sum(q.value for q in read) / len(read)
        row.spread[spec.column] = (
            (max(q.value for q in read) - min(q.value for q in read)) / mean if mean else 0.0
        )


def _within(quantity: Quantity, spec: Field, document: Document, place: Place, text: str) -> bool:
    assert spec.dimension is not None
    mend = ""
    if spec.above is not None and quantity.value <= spec.above:
        expected = f"more than {show(spec.above, spec.dimension)}"
    elif spec.below is not None and quantity.value >= spec.below:
        expected = f"less than {show(spec.below, spec.dimension)}"
        if "M" in text:
            mend = f"M is mega: did you mean {text.replace('M', 'm')} (milli)?"
    else:
        return True
    document.report(place, repr(text), expected, mend)
    return False


def _combine(read: Sequence[Quantity], how: str) -> Quantity:
    if len(read) == 1:
        return read[0]
    share = 1.0 if how == "sum" else 1.0 / len(read)
    return Quantity(share * sum(q.value for q in read), share * sum(q.half_digit for q in read))


def _system(rows: Sequence[Row], options: System) -> System:
    """Join the sheets' systems; a difference is a fault unless the option decides it."""
    for column in ("base_power", "frequency", "study_temperature"):
        given = [row for row in rows if column in row.number]
        if column == "frequency":
            options.written_frequencies = tuple({row.number[column].value: 0 for row in given})
        if not math.isnan(getattr(options, column)) or not given:
            continue
        first = given[0]
        for other in given[1:]:
            if other.number[column].value != first.number[column].value:
                where = f"{first.document.name}:{first.document.line(first.places[column])}"
                other.report(
                    column, f"{first.text[column]} as in {where}", f"or give {_OPTIONS[column]}"
                )
        setattr(options, column, first.number[column].value)
    for column in ("load_fractions", "power_factors"):
        lists = {_points(column, row.text[column]): row for row in rows if row.text.get(column)}
        for points in list(lists)[1:]:
            said = next(iter(lists.values())).text[column]
            lists[points].report(column, f"{said} as in the first sheet")
        for points in list(lists)[:1]:
            setattr(options, column, points)
    return options


def _points(column: str, text: str) -> tuple[Any, ...]:
    points: list[Any] = []
    for part in text.split(", "):
        try:
            if column == "load_fractions":
                points.append(parse(part, "ratio").value)
            else:
                value, _, sense = part.partition(" ")
                points.append((float(value), sense or "unity"))
        except ValueError:
            continue  # the schema or the reader of quantities has said so
    return tuple(points)


def _plant(
    documents: Sequence[Document],
    system: System,
    rows: dict[str, list[Row]],
    busbars: Sequence[Row],
) -> Plant:
    tables = {name: _table(name, rows[name], documents) for name in TABLES[1:]}
    tables["busbars"] = _table("busbars", busbars, documents)
    units = tables["transformers"]
    position = {row.name: at for at, row in enumerate(busbars)}
    for side in ("hv", "lv"):
        at = [position[name] for name in units.text[f"{side}_busbar"]]
        units.set(f"{side}_bus", np.array(at, dtype=float))
    files = [InputFile(document.name, document.sha256) for document in documents]
    return Plant(files, system, **tables)


def _table(name: str, rows: Sequence[Row], documents: Sequence[Document]) -> Table:
    """Turn rows into columns; absent cells are NaN or empty text."""
    table = Table(len(rows))
    table.text["name"] = _texts(row.name for row in rows)
    table.text["file"] = _texts(row.document.name for row in rows)
    table.text["key"] = _texts(".".join(map(str, row.place)) for row in rows)
    table.line["row"] = _lines(row.document.line(row.place) for row in rows)
    if name not in ("busbars", "transformers"):
        table.set("unit", np.array([row.unit for row in rows], dtype=float))
    for spec in layout().fields.values():
        if spec.table != name:
            continue
        column = spec.column
        head = 2 if name == "transformers" else len(spec.path) - 1
        table.heading[column] = ".".join(spec.path[head:])
        table.text[column] = _texts(row.text.get(column, "") for row in rows)
        table.line[column] = _lines(
            row.document.line(row.places[column]) if column in row.places else 0 for row in rows
        )
        if spec.dimension or spec.integer:
            read = [row.number.get(column) for row in rows]
            table.set(column, np.array([q.value if q else np.nan for q in read], dtype=float))
            half = [q.half_digit if q else np.nan for q in read]
            table.half_digit[column] = np.array(half, dtype=float)
        if spec.combine:
            spread = [row.spread.get(column, np.nan) for row in rows]
            table.set(f"{column}_spread", np.array(spread, dtype=float))
        if column.startswith(("results_", "assume_")) and column in table.values:
            status = Status.GIVEN if column.startswith("results_") else Status.ASSUMED
            table.set(column, table.values[column], status)
    return table


def _texts(items: Iterable[str]) -> Any:
    listed = list(items)
    column = np.empty(len(listed), dtype=object)
    column[:] = listed
    return column


def _lines(items: Iterable[int | None]) -> Any:
    return np.array([line or 0 for line in items], dtype=np.int32)
