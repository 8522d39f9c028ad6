"""The sheet that `start` drafts builds as it stands and shows every key."""

import re

import pytest

from convert import chain
from convert.errors import Severity
from convert.intake import template
from convert.intake.fields import layout
from convert.intake.sheet import read

TEXT = template.station()


@pytest.fixture
def drafted(tmp_path):
    """Write a text as a sheet and return its path."""

    def write(text):
        path = tmp_path / "station.yaml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


def test_the_draft_is_read_and_reduced_without_an_error(drafted):
    plant = read(drafted(TEXT))
    units, findings = chain.run(plant)
    assert [f for f in findings if f.severity is Severity.ERROR] == []
    assert units.n == plant.transformers.n == 1


def shown_keys():
    """Every key of the draft with the keys above it, told by its column; marks are passed over."""
    above, found = [], set()
    for line in TEXT.splitlines():
        indent, mark, rest = re.match(r"( *)(# *)?(?:- )?(.*)", line).groups()
        keys = re.findall(r"(?:^|[{,] ?)([a-z_]+|[A-Z][\w ]*):(?= |$)", rest)
        if not keys:
            continue
        # behind a mark, a key stands as deep as the mark, and a key below it two deeper
        column = len(indent) + (max(len(mark) - 2, 0) if mark else 0)
        if rest.startswith("{"):
            found |= {(*(key for _, key in above), key) for key in keys}
            continue
        above = [(at, key) for at, key in above if at < column] + [(column, keys[0])]
        found |= {(*(key for _, key in above), *keys[1:2])}
        found |= {(*(key for _, key in above), key) for key in ("", *keys[1:])}
    return {tuple(key for key in keys if key) for keys in found}


@pytest.mark.parametrize("path", layout().fields, ids=".".join)
def test_every_key_is_shown_under_the_keys_above_it(path):
    wanted = [part for part in path if part not in ("*", "[]")]
    # names of the planner's choice stand in the draft too, and are passed over
    shown = [[part for part in keys if part in wanted] for keys in shown_keys()]
    assert wanted in shown


@pytest.mark.parametrize("path", layout().fields, ids=".".join)
def test_every_key_is_explained(path):
    said = re.sub(r"\s*\n[ #]*", " ", TEXT)
    assert layout().fields[path].description in said


def test_the_draft_says_that_its_values_are_invented():
    assert "invented" in TEXT.splitlines()[0]


@pytest.mark.parametrize("block", ["results", "assume"])
def test_a_block_behind_marks_is_read_when_they_are_taken_away(drafted, block):
    lines = TEXT.splitlines()
    start = next(at for at, line in enumerate(lines) if line.strip() == f"# {block}:")
    end = start + 1
    while end < len(lines) and lines[end].startswith("    #   "):
        end += 1
    for at in range(start, end):
        lines[at] = lines[at].replace("# ", "", 1).replace("copper | aluminium", "copper")
    assert end - start > 5
    plant = read(drafted("\n".join(lines)))
    assert plant.transformers[f"{block}_load_loss"] > 0


def test_no_line_is_wider_than_a_screen():
    assert max(map(len, TEXT.splitlines())) <= 100
