"""The schema says what the reader does: its keys, its patterns, what is accepted and refused."""

import copy
import json
import tempfile
from pathlib import Path

import pytest
import yaml
from hypothesis import example, given, settings
from hypothesis import strategies as st
from jsonschema import Draft202012Validator

from convert.errors import BranchwrightError
from convert.intake.fields import layout, node_at, resource, schema
from convert.intake.sheet import read
from convert.quantity import FAMILIES, QuantityError, parse

HERE = Path(__file__).parent
SCHEMA = json.loads((HERE.parent / "schemas" / "station.schema.json").read_text(encoding="utf-8"))
SHEETS = sorted((HERE / "sheets").glob("*/*.yaml"))
DIMENSIONS = sorted(FAMILIES)

#: bad sheets whose faults no JSON Schema can hold: limits of a quantity, a key given twice, marks
#: of YAML that leave no trace in the tree, and relations between keys
BEYOND = {
    "anchors_and_tags", "base_missing", "beyond_limits", "busbar_unknown", "group_contradicts",
    "group_missing", "group_unreadable", "key_twice", "mega_for_milli", "name_twice",
    "rating_twice_or_never", "resistance_side_twice", "sides_swapped",
    "single_phase_group", "single_phase_group_missing", "single_phase_keys", "single_phase_lists",
    "stage_missing", "three_phase_keys", "three_phase_watts",
}  # fmt: skip
#: keys that a relation to another key may speak of
RELATED = {
    "across", "amps", "base", "between", "busbar", "clock", "connection", "ohms",
    "plate_impedance_base", "rated_power", "rated_voltage", "side", "study_stage", "vector_group",
    "volts", "watts", "watts_are",
}  # fmt: skip


def leaves(node, path=()):
    """Every key of the schema that holds a value, by a walk of its own."""
    while "$ref" in node:
        node = SCHEMA["$defs"][node["$ref"].removeprefix("#/$defs/")] | {
            key: value for key, value in node.items() if key != "$ref"
        }
    below = {(*path, key): child for key, child in node.get("properties", {}).items()}
    if isinstance(node.get("additionalProperties"), dict):
        below[(*path, "*")] = node["additionalProperties"]
    if not below and "array" in node.get("type", ()):
        items = list(leaves(node["items"], (*path, "[]")))
        if len(items) > 1:  # rows with keys; a list of values is one leaf
            return items
    if not below:
        return [(path, node)]
    return [leaf for place, child in below.items() for leaf in leaves(child, place)]


LEAVES = dict(leaves(SCHEMA))


def test_the_schema_is_a_json_schema_and_the_one_that_is_shipped():
    Draft202012Validator.check_schema(SCHEMA)
    assert schema() == SCHEMA
    assert resource("schemas", "station.schema.json").is_file()


def test_every_key_of_the_schema_is_one_column():
    fields = layout().fields
    assert set(fields) == set(LEAVES)
    columns = [(field.table, field.column) for field in fields.values()]
    assert len(columns) == len(set(columns))


@pytest.mark.parametrize("path", LEAVES, ids=".".join)
def test_every_key_says_what_it_is(path):
    field, node = layout().fields[path], LEAVES[path]
    assert node["description"]
    assert field.description == node["description"]
    assert field.dimension is None or field.dimension in FAMILIES
    for text in [text for shown in node.get("examples", ()) for text in flat(shown)]:
        assert field.dimension is None or parse(text, field.dimension).value >= 0


def flat(shown):
    return shown if isinstance(shown, list) else [shown]


def test_a_key_is_found_by_its_place_in_a_sheet():
    place = ("transformers", "T1", "tests", "open_circuit", 0, "volts")
    assert node_at(place)["description"] == LEAVES[(
        "transformers", "*", "tests", "open_circuit", "[]", "volts"
    )]["description"]  # fmt: skip


def test_a_pattern_of_three_readings_is_that_of_one():
    for node in LEAVES.values():
        if "x-dimension" in node and "pattern" in node:
            assert node["pattern"] == SCHEMA["$defs"][node["x-dimension"]]["pattern"]


# quantities ---------------------------------------------------------------------------------------

PATTERNS = {
    dimension: Draft202012Validator({"$ref": f"#/$defs/{dimension}", "$defs": SCHEMA["$defs"]})
    for dimension in DIMENSIONS
}
WORDS = sorted({word for family in FAMILIES.values() for word in family[0]})
SIGNS = st.sampled_from(["", "", "", "+", "-", "\u2212", "--"])
DIGITS = st.one_of(
    st.from_regex(r"[0-9]{0,4}\.?[0-9]{0,3}", fullmatch=True),
    st.sampled_from(["0", "007", "1.", ".5", ".", "1,5", "1 000", "٣", "9" * 40, "9" * 320]),
)
POWERS = st.sampled_from(
    ["", "", "", "e3", "E-3", "e+02", "e99", "e305", "e400", "e-400", "e", "e-", "e1.5", "e\u22123"]
)
ROOTS = st.sampled_from(["", "", "", "/√3", " / √ 3", "/sqrt(3)", "/SQRT(3)", "/√2", "√3", "/3"])
SPACES = st.sampled_from(["", " ", " ", "  ", "\t", "\n", "\u00a0", "\u2009", "\u200b", "_"])
SPELLINGS = st.sampled_from(
    [*WORDS, "m\u2126", "\u03bc\u2126", "\u03bcohm", "kv", "KV", "Kv", "mva", "VAr", "kWh", "Ohm",
     "C", "K", "\u2103", "k V", "V.", ""]
)  # fmt: skip


@st.composite
def quantity_texts(draw):
    """A dimension, and text that is nearly or wholly a quantity of it."""
    dimension = draw(st.sampled_from(DIMENSIONS))
    own = st.sampled_from(FAMILIES[dimension][0])
    parts = [SPACES, SIGNS, DIGITS, POWERS, ROOTS, SPACES, st.one_of(own, own, SPELLINGS), SPACES]
    text = "".join(draw(part) for part in parts)
    if draw(st.integers(0, 3)) == 0 and text:
        at = draw(st.integers(0, len(text) - 1))
        text = text[:at] + draw(st.sampled_from(["", "0", "-", ".", "k", " "])) + text[at + 1 :]
    return dimension, text


@settings(derandomize=True, deadline=None, max_examples=800)
@given(quantity_texts())
@example(("voltage", "-0 V"))
@example(("temperature", "\u22125 °C"))
@example(("current", "1e\u22123 A"))
@example(("voltage", "1e400 V"))
@example(("voltage", "0e400 V"))
@example(("frequency", "9" * 320 + " Hz"))
@example(("ratio", "0." + "0" * 320 + "1 %"))
@example(("resistance", "12.5 m\u2126"))
@example(("resistance", "12.5 \u03bc\u03a9"))
def test_the_schema_takes_exactly_the_quantities_that_are_read(case):
    dimension, text = case
    try:
        parse(text, dimension)
        is_read = True
    except QuantityError:
        is_read = False
    assert PATTERNS[dimension].is_valid(text) == is_read, text


# sheets -------------------------------------------------------------------------------------------


def tree_of(text):
    """Read YAML with every scalar as text, then whole numbers where the schema wants them."""
    return whole_numbers(yaml.load(text, yaml.BaseLoader), ())


def whole_numbers(node, path):
    if isinstance(node, dict):
        return {key: whole_numbers(child, below(path, key)) for key, child in node.items()}
    if isinstance(node, list):
        return [whole_numbers(child, (*path, "[]")) for child in node]
    if LEAVES.get(path, {}).get("type") == "integer" and node.lstrip("+-").isdecimal():
        return int(node)
    return node


def below(path, key):
    named = {("busbars",), ("transformers",), ("transformers", "*", "cooling_stages")}
    return (*path, "*" if path in named else key)


def refusal(path):
    """The problems that reading a sheet raises, none for a good one."""
    try:
        read(path)
    except BranchwrightError as error:
        return error.problems
    return ()


@pytest.mark.parametrize("path", SHEETS, ids=lambda path: f"{path.parent.name}-{path.stem}")
def test_schema_and_reader_refuse_the_same_sheets(path):
    try:
        tree = tree_of(path.read_text(encoding="utf-8-sig"))
    except yaml.YAMLError:
        assert refusal(path)
        return
    taken = Draft202012Validator(SCHEMA).is_valid(tree)
    assert taken == (path.parent.name == "good" or path.stem in BEYOND)
    assert bool(refusal(path)) == (path.parent.name == "bad")


def test_the_list_of_faults_beyond_the_schema_names_only_sheets():
    assert {path.stem for path in SHEETS if path.parent.name == "bad"} >= BEYOND


STEMS = ("three_phase", "single_phase", "cooling_stages", "connection_and_clock", "results_only")
GOOD = [tree_of((HERE / "sheets" / "good" / f"{stem}.yaml").read_text("utf-8")) for stem in STEMS]
VALUES = st.sampled_from(
    ["", "hv", "lv", "copper", "3", "1", "5", "11 kV", "66000 V", "3.3 A", "14 kW", "20 MVA",
     "9.9 %", "75 °C", "0.7 ohm", "50 Hz", "-11 kV", "11", "principal", "Mill 11", "Dyn11", [], {},
     ["11 kV"] * 3, ["3.3 A", "3.2 A", "3.4 A"], ["0.7 ohm", "0.7 ohm"], {"a": "b"}]
)  # fmt: skip


def places(node, path=()):
    children = node.items() if isinstance(node, dict) else enumerate(node)
    for key, child in children:
        yield (*path, key)
        if isinstance(child, (dict, list)):
            yield from places(child, (*path, key))


@st.composite
def changed_sheets(draw):
    """A good sheet in which one place is left out, renamed, given another value, or doubled."""
    tree = copy.deepcopy(draw(st.sampled_from(GOOD)))
    place = draw(st.sampled_from(list(places(tree))))
    parent = tree
    for part in place[:-1]:
        parent = parent[part]
    last = place[-1]
    change = draw(st.sampled_from(["drop", "value", "value", "rename", "wrap"]))
    if change == "drop":
        del parent[last]
    elif change == "value":
        parent[last] = draw(VALUES)
    elif change == "wrap":
        parent[last] = [parent[last]]
    elif isinstance(parent, dict):
        parent[draw(st.sampled_from(sorted({p[-1] for p in LEAVES})))] = parent.pop(last)
    return tree


@settings(derandomize=True, deadline=None, max_examples=150)
@given(changed_sheets())
def test_a_changed_sheet_is_refused_by_both_or_for_a_relation(tree):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "sheet.yaml"
        text = json.dumps(tree, ensure_ascii=False)  # JSON is YAML
        path.write_text(text, encoding="utf-8")
        said = refusal(path)
    taken = Draft202012Validator(SCHEMA).is_valid(tree_of(text))
    if not taken:
        assert said
    for problem in said if taken else ():
        limit = "more than" in problem.expected or "less than" in problem.expected
        assert limit or problem.key.rpartition(".")[2] in RELATED, problem
