"""One YAML file -> its tree of text, the line of every key, and what is wrong with its form.

Scalars stay text: the schema gives the type, so that a serial number 012345 or a reading 5.20
keeps its digits, and `off` is no truth value.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Hashable, Iterator, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from functools import cache
from pathlib import Path
from typing import Any

import yaml

from ..errors import Problem, printable
from .fields import layout, node_at, schema

MAX_BYTES = 8_000_000
MAX_DEPTH = 12
MAX_NODES = 400_000
#: YAML's own printable characters, less line ends that it would not count
_UNPRINTABLE = re.compile(
    "[^\\t\\n\\r\\x20-\\x7e\\xa0-\\u2027\\u202f-\\ud7ff\\ue000-\\ufefe\\uff00-\\ufffd\\U00010000-\\U0010ffff]"
)
_INTEGER = re.compile(r"[+-]?[0-9]{1,9}")
Place = tuple[str | int, ...]
_Loader: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)


@dataclass
class Document:
    """A sheet as text: nested dicts and lists of strings (whole numbers where the schema wants)."""

    name: str
    sha256: str = ""
    tree: Any = None
    lines: dict[Place, int] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)
    faults: set[Place] = field(default_factory=set)

    def line(self, place: Place) -> int | None:
        """Return the line of a key, or of the nearest one above it."""
        while place and place not in self.lines:
            place = place[:-1]
        return self.lines.get(place)

    def faulty(self, place: Place) -> bool:
        """Return whether a problem stands at a place or above it: what follows from it is noise."""
        return any(place[:end] in self.faults for end in range(1, len(place) + 1))

    def report(
        self, place: Place, read: str, expected: str, mend: str = "", line: int | None = None
    ) -> None:
        """Add a problem at a place of the tree."""
        self.faults.add(place)
        parts = (str(part + 1) if isinstance(part, int) else _short(part) for part in place)
        key = ".".join(parts)
        line = line or self.line(place)
        self.problems.append(Problem(self.name, line, key, read, expected, mend))


def load(path: Path) -> Document:
    """Read one file; every fault of its form is a problem of the document, none is raised."""
    document = Document(str(path))
    try:
        with path.open("rb") as handle:
            data = handle.read(MAX_BYTES + 1)
    except (OSError, ValueError) as error:  # a name with a nul byte is a ValueError
        reason = (getattr(error, "strerror", None) or str(error)).lower()
        document.problems.append(
            Problem(document.name, None, "", reason, "a station sheet that can be read")
        )
        return document
    document.sha256 = hashlib.sha256(data).hexdigest()
    if len(data) > MAX_BYTES:
        document.report((), f"more than {MAX_BYTES} bytes", f"a sheet of at most {MAX_BYTES} bytes")
        return document
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        at = data.count(b"\n", 0, error.start) + 1
        document.problems.append(
            Problem(
                document.name, at, "", "bytes that are not UTF-8", "UTF-8 text", "save as UTF-8"
            )
        )
        return document
    odd = _UNPRINTABLE.search(text)
    if odd:
        at = text.count("\n", 0, odd.start()) + 1
        read = f"the control character U+{ord(odd.group()):04X}"
        document.problems.append(Problem(document.name, at, "", read, "printable text"))
        return document
    try:
        if _check_events(text, document):
            node = yaml.compose(text, Loader=_Loader)
            document.tree = "" if node is None else _plain(node, (), (), document)
            document.lines.setdefault((), 1)
    except (yaml.YAMLError, RecursionError) as error:
        document.problems.append(_yaml_problem(document.name, error))
    if document.tree is not None:
        _check_structure(document)
    return document


def _yaml_problem(name: str, error: Exception) -> Problem:
    mark = getattr(error, "problem_mark", None)
    if "quoted scalar" in str(getattr(error, "context", "")):
        mark = getattr(error, "context_mark", mark)  # where the quotation begins, not the end
    what = getattr(error, "problem", None) or str(error).splitlines()[0]
    if "another document" in what and mark:
        one = "one sheet in a file"
        return Problem(name, mark.line + 1, "", "a second document", one, "make a file of each")
    return Problem(
        name,
        mark.line + 1 if mark else None,
        "",
        what,
        "YAML: `key: value` lines, deeper levels indented by two spaces",
        "check indentation, colons and quotes on this line and the one above",
    )


def _check_events(text: str, document: Document) -> bool:
    """Refuse anchors, aliases and tags, and bound depth and size before a tree is made.

    Returns whether a tree may be made: aliases could make it grow without end.
    """
    depth = 0
    safe = True
    events: Iterator[Any] = yaml.parse(text, Loader=_Loader)
    for count, event in enumerate(events):
        line = event.start_mark.line + 1
        refused = ""
        if isinstance(event, yaml.AliasEvent):
            refused = f"the alias *{event.anchor}"
            safe = False
        elif getattr(event, "anchor", None):
            refused = f"the anchor &{event.anchor}"
        elif getattr(event, "tag", None):
            refused = f"the tag {event.tag}"
        if refused:
            problem = Problem(document.name, line, "", refused, "plain text", "write the value out")
            document.problems.append(problem)
        if isinstance(event, yaml.CollectionStartEvent):
            depth += 1
        elif isinstance(event, yaml.CollectionEndEvent):
            depth -= 1
        if depth > MAX_DEPTH or count > MAX_NODES:
            over = f"more than {MAX_DEPTH} levels" if depth > MAX_DEPTH else "too many entries"
            limit = f"at most {MAX_DEPTH} levels and {MAX_NODES} entries"
            document.problems.append(Problem(document.name, line, "", over, limit))
            return False
    return safe


def _plain(node: yaml.Node, place: Place, generic: tuple[str, ...], document: Document) -> Any:
    """Turn a YAML node into text, dict or list, noting lines and keys given twice."""
    document.lines.setdefault(place, node.start_mark.line + 1)
    known = layout().known
    if isinstance(node, yaml.SequenceNode):
        return [
            _plain(child, (*place, at), (*generic, "[]"), document)
            for at, child in enumerate(node.value)
        ]
    if isinstance(node, yaml.MappingNode):
        tree: dict[str, Any] = {}
        for key_node, child in node.value:
            key = key_node.value if isinstance(key_node, yaml.ScalarNode) else None
            line = key_node.start_mark.line + 1
            if key is None:
                read, hint = "a list or mapping as a key", "write a name before the colon"
                document.problems.append(
                    Problem(document.name, line, ".".join(map(str, place)), read, "a name", hint)
                )
                continue
            below = (*place, key)
            if key in tree:
                again = f"the key again (first on line {document.lines[below]})"
                document.report(below, again, "each key once", "keep one of the two", line)
                continue
            document.lines[below] = line
            named = (*generic, key) if (*generic, key) in known else (*generic, "*")
            tree[key] = _plain(child, below, named, document)
        return tree
    text = str(node.value)
    if _UNPRINTABLE.search(text):
        document.report(place, "a value with a control character", "printable text")
        text = printable(text)
    found = layout().fields.get(generic)
    return int(text) if found and found.integer and _INTEGER.fullmatch(text) else text


@cache
def _validator() -> Any:
    import jsonschema

    return jsonschema.Draft202012Validator(schema())


def _check_structure(document: Document) -> None:
    """Hold the tree against the schema: keys, words, lists. Quantities are read elsewhere."""
    for error in _validator().iter_errors(document.tree):
        place: Place = tuple(error.absolute_path)
        if error.validator == "pattern" and "x-dimension" in error.schema:
            continue  # the reader of quantities says more
        _STRUCTURE.get(str(error.validator), _other)(document, place, error)


def _unknown(document: Document, place: Place, error: Any) -> None:
    words = list(error.schema["properties"])
    for key in error.instance:
        if key not in words:
            near = get_close_matches(key, words, 1, 0.6)
            mend = f"did you mean {near[0]}?" if near else ""
            if key[:1].isdigit():
                mend = "a decimal comma inside { } ends the value: write a decimal point"
            expected = "one of " + ", ".join(words)
            document.report((*place, key), f"the unknown key {_short(key)!r}", expected, mend)


def _missing(document: Document, place: Place, error: Any) -> None:
    for key in error.validator_value:
        if key not in error.instance:
            about = node_at((*place, key)).get("description", "")
            document.report((*place, key), "nothing", f"this key: {_lower(about)}")


def _dependent(document: Document, place: Place, error: Any) -> None:
    for key, needed in error.validator_value.items():
        for other in needed:
            if key in error.instance and other not in error.instance:
                about = node_at((*place, other)).get("description", "")
                document.report(
                    (*place, other), f"nothing beside {key}", f"this key: {_lower(about)}"
                )


def _type(document: Document, place: Place, error: Any) -> None:
    wanted = error.validator_value
    kinds = [wanted] if isinstance(wanted, str) else list(wanted)
    names = {"object": "keys and values under it", "array": "a list", "string": "one value",
             "integer": "a whole number"}  # fmt: skip
    about = error.schema.get("description", "")
    expected = " or ".join(names[kind] for kind in kinds)
    document.report(
        place, _what(error.instance), expected + (f": {_lower(about)}" if about else "")
    )


def _enum(document: Document, place: Place, error: Any) -> None:
    if error.schema.get("type") == "integer" and not isinstance(error.instance, int):
        return  # told as a matter of type
    words = [str(word) for word in error.validator_value]
    given = str(error.instance)
    near = [w for w in words if w.lower() == given.lower()]
    near = near or get_close_matches(given, words, 1, 0.6)
    mend = f"did you mean {near[0]}?" if near else ""
    about = _lower(error.schema.get("description", ""))
    expected = f"one of {', '.join(words)}" if len(words) > 1 else f"{words[0]}: {about}"
    document.report(place, _what(error.instance), expected, mend)


def _count(document: Document, place: Place, error: Any) -> None:
    """Lists, mappings and texts of the wrong length."""
    kind = re.sub("min|max", "", str(error.validator))
    low, high = error.schema.get(f"min{kind}", 0), error.schema.get(f"max{kind}")
    span = f"{low}" if low == high else f"{low} to {high}"
    size = len(error.instance)
    words = {"Items": "entries", "Properties": "entries", "Length": "characters"}
    read = f"{size} {words[kind]}" if size or kind != "Length" else "nothing"
    of = "a list of " if kind == "Items" else ""
    document.report(place, read, of + (span if kind == "Items" else f"{span} {words[kind]}"))


def _range(document: Document, place: Place, error: Any) -> None:
    low, high = error.schema.get("minimum"), error.schema.get("maximum")
    document.report(place, _what(error.instance), f"a whole number from {low} to {high}")


def _pattern(document: Document, place: Place, error: Any) -> None:
    if not isinstance(error.instance, str):
        return
    expected = error.schema.get("x-expected", error.schema.get("description", "other text"))
    if error.parent is None and "propertyNames" in map(str, error.absolute_schema_path):
        place = (*place, error.instance)
    document.report(place, _what(error.instance), expected)


def _other(document: Document, place: Place, error: Any) -> None:
    limit = f"{error.validator} {error.validator_value}"
    document.report(place, _what(error.instance), f"a value within the limit {limit}")


_STRUCTURE: Mapping[str, Any] = {
    "additionalProperties": _unknown,
    "required": _missing,
    "dependentRequired": _dependent,
    "type": _type,
    "enum": _enum,
    "minItems": _count,
    "maxItems": _count,
    "minProperties": _count,
    "maxProperties": _count,
    "minLength": _count,
    "maxLength": _count,
    "minimum": _range,
    "maximum": _range,
    "pattern": _pattern,
}


def _what(value: Hashable | list[Any] | dict[str, Any]) -> str:
    if isinstance(value, dict):
        return "keys and values"
    if isinstance(value, list):
        return "a list"
    return "nothing" if value == "" else repr(str(value)[:60])


def _short(text: str) -> str:
    return text if len(text) <= 64 else text[:63] + "…"


def _lower(text: str) -> str:
    return text[:1].lower() + text[1:] if text[1:2].islower() else text
