"""The station schema, flattened once: which key is which column, of what dimension, in which words.

A path names the place of a key: a name of the planner's choice stands as `*`, a row of a list as
`[]`, so `transformers.*.tests.open_circuit.[].volts` is the column `volts` of `open_circuit`.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

Path_ = tuple[str, ...]


@dataclass(frozen=True)
class Field:
    """One key of the schema and the column it fills.

    `dimension` is a family of `quantity`, or None for text and whole numbers; `above` and `below`
    are exclusive limits in SI; `combine` says how three readings become one.
    """

    path: Path_
    table: str
    column: str
    dimension: str | None
    integer: bool
    combine: str
    above: float | None
    below: float | None
    description: str
    example: Any


@dataclass(frozen=True)
class Layout:
    """Every field by its path, the places where a row of a table begins, and all their prefixes."""

    fields: dict[Path_, Field]
    rows: dict[Path_, str]
    known: frozenset[Path_]


def resource(*parts: str) -> Path:
    """Return a file shipped with the package: in the wheel inside it, in a checkout beside it."""
    inside = Path(__file__).parents[1].joinpath(*parts)
    return inside if inside.exists() else inside.parents[len(parts)].joinpath(*parts)


@cache
def schema() -> dict[str, Any]:
    """Return schemas/station.schema.json."""
    text = resource("schemas", "station.schema.json").read_text(encoding="utf-8")
    loaded: dict[str, Any] = json.loads(text)
    return loaded


def resolve(node: dict[str, Any]) -> dict[str, Any]:
    """Return a schema node with its $ref followed; keys beside the $ref win."""
    while "$ref" in node:
        target = schema()["$defs"][node["$ref"].rsplit("/", 1)[1]]
        node = {**target, **{key: value for key, value in node.items() if key != "$ref"}}
    return node


def node_at(path: tuple[str | int, ...]) -> dict[str, Any]:
    """Return the schema node for a path into a sheet (names and list positions as they stand)."""
    node = resolve(schema())
    for part in path:
        child = node.get("properties", {}).get(part)
        if child is None:
            child = node.get("items" if isinstance(part, int) else "additionalProperties") or {}
        node = resolve(child) if isinstance(child, dict) else {}
    return node


def _walk(node: dict[str, Any], path: Path_, table: str, prefix: Path_) -> Iterator[Any]:
    node = resolve(node)
    named = node.get("additionalProperties")
    if isinstance(named, dict):
        place = (*path, "*")
        yield place, node["x-table"]
        yield from _walk(named, place, node["x-table"], ())
    elif "properties" in node:
        if "x-table" in node:
            table, prefix = node["x-table"], ()
            yield path, table
        for key, child in node["properties"].items():
            yield from _walk(child, (*path, key), table, (*prefix, key))
    elif "properties" in resolve(node.get("items", {})):
        yield from _walk(node["items"], (*path, "[]"), table, prefix)
    else:
        yield Field(
            path,
            table,
            node.get("x-column") or "_".join(prefix),
            node.get("x-dimension"),
            node.get("type") == "integer",
            node.get("x-combine", ""),
            node.get("x-above"),
            node.get("x-below"),
            node.get("description", ""),
            next(iter(node.get("examples", ())), None),
        )


@cache
def layout() -> Layout:
    """Flatten the schema."""
    fields: dict[Path_, Field] = {}
    rows: dict[Path_, str] = {}
    for item in _walk(schema(), (), "", ()):
        if isinstance(item, Field):
            fields[item.path] = item
        elif item[1]:
            rows[item[0]] = item[1]
    known = {path[:end] for path in (*fields, *rows) for end in range(len(path) + 1)}
    return Layout(fields, rows, frozenset(known))
