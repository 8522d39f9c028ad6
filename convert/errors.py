"""What can be wrong: a problem in an input, a finding about a unit, and the one exception."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum


class Severity(StrEnum):
    """How much a finding weighs: an error leaves the unit out, a caution asks for a look."""

    ERROR = "error"
    CAUTION = "caution"
    NOTE = "note"


def printable(text: str) -> str:
    """Return text whose control characters are written out, so that none reaches a terminal."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


@dataclass(frozen=True)
class Problem:
    """One fault of an input: where it stands, what was read, what was expected, how to mend it."""

    file: str
    line: int | None
    key: str
    read: str
    expected: str
    mend: str = ""

    def __str__(self) -> str:
        """Return the one line that a planner reads."""
        where = self.file if self.line is None else f"{self.file}:{self.line}"
        parts = [where]
        if self.key:
            parts.append(self.key)
        text = ": ".join(parts) + f": read {self.read}; expected {self.expected}"
        return printable(f"{text}; {self.mend}" if self.mend else text)


@dataclass(frozen=True)
class Finding:
    """One row of findings.csv: a fact about a unit that the planner must know.

    Attributes
    ----------
    severity : Severity
        `error` (the unit is left out), `caution` or `note`.
    subject : str
        The unit, busbar or file concerned.
    rule : str
        The rule's short name, the same for every unit.
    reading : str
        Where the reading stands: file, line and key.
    found, expected, effect, likely_cause : str
        What was found, what was expected, what it does to the result, and what may explain it.
    source : str
        Standard and clause, or `common practice, no source`.
    units : int
        How many units the row speaks for.
    """

    severity: Severity
    subject: str
    rule: str
    reading: str = ""
    found: str = ""
    expected: str = ""
    effect: str = ""
    likely_cause: str = ""
    source: str = ""
    units: int = 1


class BranchwrightError(Exception):
    """Input that cannot be used; each line of `problems` says what to mend."""

    def __init__(self, problems: Sequence[Problem | str]) -> None:
        super().__init__("\n".join(str(problem) for problem in problems))
        self.problems = tuple(problems)
