"""Rules over columns -> findings."""

from __future__ import annotations

from ..errors import Finding, Severity
from ..plant import Plant, Table
from . import assumptions, identities, ranges

_ORDER = {Severity.ERROR: 0, Severity.CAUTION: 1, Severity.NOTE: 2}


def run(plant: Plant, units: Table, model: str) -> list[Finding]:
    """Return the findings on the reduced units, in input order, the worst first within a unit."""
    findings = [
        *identities.rules(plant, units),
        *ranges.rules(units),
        *assumptions.rules(plant, units, model),
    ]
    position = {name: at for at, name in enumerate(plant.transformers.text["name"])}
    last = len(position)
    return sorted(findings, key=lambda f: (position.get(f.subject, last), _ORDER[f.severity]))
