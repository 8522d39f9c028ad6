"""A commented station sheet, drafted from the schema, that builds as it stands."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterator
from typing import Any

from .fields import resolve, schema

WIDTH = 96


def station() -> str:
    """Return a station sheet as text: every key with its meaning, optional ones as comments.

    The values are invented; the planner replaces them.
    """
    head = (
        "Station sheet for branchwright. Every value below is invented: replace it.",
        "Keys behind a # are optional. Every quantity is a number, a space and a unit.",
    )
    lines = [f"# {line}" for line in head]
    root = schema()
    for key, node in root["properties"].items():
        lines += ["", *_entry(key, node, 0, key in root["required"])]
    return "\n".join(lines) + "\n"


def _entry(key: str, node: dict[str, Any], depth: int, required: bool) -> Iterator[str]:
    node = resolve(node)
    pad = "  " * depth
    yield from _comment(node, pad, required)
    example = next(iter(node.get("examples", ())), None)
    if example is not None and (required or node.get("x-start", True)):
        yield from _inner(node, pad)
        yield from _value(key, example, pad)
    elif "properties" in node and node.get("x-start", True):
        yield f"{pad}{key}:"
        for name, child in node["properties"].items():
            yield from _entry(name, child, depth + 1, name in node.get("required", ()))
    elif isinstance(node.get("additionalProperties"), dict) and "x-example-name" in node:
        yield f"{pad}{key}:"
        yield f"{pad}  {node['x-example-name']}:"
        child = resolve(node["additionalProperties"])
        for name, below in child["properties"].items():
            yield from _entry(name, below, depth + 2, name in child.get("required", ()))
    elif "properties" in resolve(node.get("items", {})):
        yield f"{pad}{key}:"
        item = resolve(node["items"])
        lines = [
            line
            for name, below in item["properties"].items()
            for line in _entry(name, below, depth + 2, name in item.get("required", ()))
        ]
        first = next(at for at, line in enumerate(lines) if not line.lstrip().startswith("#"))
        lines[first] = f"{pad}  - {lines[first].strip()}"
        yield from lines
    else:
        yield from _inner(node, pad)
        yield f"{pad}# {key}: {_hint(node)}"
        for name, below in node.get("properties", {}).items():
            yield f"{pad}#   {name}: {_hint(resolve(below))}"


def _inner(node: dict[str, Any], pad: str) -> Iterator[str]:
    """Explain the keys below a key whose example is written in one piece."""
    named = node.get("additionalProperties")
    below = resolve(named) if isinstance(named, dict) else node
    below = resolve(node["items"]) if "items" in node else below
    if below is not node and "properties" not in below and "x-dimension" not in node:
        yield from _comment(below, pad, True)
    for name, child in below.get("properties", {}).items():
        text = f"{name}: {resolve(child).get('description', '')}"
        lines = textwrap.wrap(text, WIDTH - len(pad) - 4)
        yield from (f"{pad}#   {line}" for line in lines)


def _comment(node: dict[str, Any], pad: str, required: bool) -> Iterator[str]:
    text = node.get("description", "") + ("" if required else " (optional)")
    yield from (f"{pad}# {line}" for line in textwrap.wrap(text, WIDTH - len(pad)))


def _hint(node: dict[str, Any]) -> str:
    """Return what may stand behind an optional key."""
    if "enum" in node:
        return " | ".join(map(str, node["enum"]))
    example = next(iter(node.get("examples", ())), None)
    return "" if example is None else _flow(example)


def _value(key: str, example: Any, pad: str) -> Iterator[str]:
    if isinstance(example, dict):
        yield f"{pad}{key}:"
        yield from (f"{pad}  {name}: {_flow(value)}" for name, value in example.items())
    elif isinstance(example, list) and example and isinstance(example[0], dict):
        yield f"{pad}{key}:"
        yield from (f"{pad}  - {_flow(item)}" for item in example)
    else:
        yield f"{pad}{key}: {_flow(example)}"


def _flow(value: Any) -> str:
    if isinstance(value, dict):
        return "{" + ", ".join(f"{name}: {_flow(item)}" for name, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(_flow, value)) + "]"
    text = str(value)
    return json.dumps(text) if text[:1] in "&*!%@`'\"[]{}#" else text
