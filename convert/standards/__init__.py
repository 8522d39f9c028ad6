"""Limits and constants of standards (the CSV files beside this one), and the mark of a formula."""

from __future__ import annotations

import ast
import csv
import inspect
import textwrap
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any, TypeVar

import numpy as np

HERE = Path(__file__).parent
COMMON_PRACTICE = "common practice, no source"
STANDARDS = ("IEC 60076-1", "IEEE C57.12.00")
Formula = TypeVar("Formula", bound=Callable[..., Any])


@dataclass(frozen=True)
class Source:
    """Where a formula comes from; `status` is `read`, `from memory` or `derived here`."""

    document: str
    clause: str
    status: str

    def __str__(self) -> str:
        return ", ".join(part for part in (self.document, self.clause, self.status) if part)


def source(document: str, clause: str, status: str) -> Callable[[Formula], Formula]:
    """Mark a pure function as a formula of the calculation, with its source.

    The body of a formula is assignments and one return, with + - * / ** and numpy's sqrt, abs and
    hypot: one text serves a number, a column and the printed calculation.
    """

    def mark(function: Formula) -> Formula:
        function.source = Source(document, clause, status)  # type: ignore[attr-defined]
        return function

    return mark


@cache
def formula_text(formula: Callable[..., Any]) -> str:
    """Return the body of a formula as one line, without its docstring."""
    function = ast.parse(textwrap.dedent(inspect.getsource(formula))).body[0]
    assert isinstance(function, ast.FunctionDef)
    text = "; ".join(ast.unparse(statement) for statement in function.body[1:])
    return text.replace("return ", "")


@cache
def table(name: str) -> tuple[dict[str, str], ...]:
    """Return the rows of one CSV file of this folder; lines that open with # are comments."""
    with (HERE / f"{name}.csv").open(encoding="utf-8", newline="") as handle:
        return tuple(csv.DictReader(line for line in handle if not line.startswith("#")))


def winding_constant(standard: str, metal: str) -> float:
    """Return K [°C] of a metal (`copper`, `aluminium` or `mixed`) by a standard's practice."""
    rows = table("winding_constants")
    return float(
        next(r["constant_degc"] for r in rows if r["standard"] == standard and r["metal"] == metal)
    )


def impedance_tolerance(standard: str, stated: Any) -> Any:
    """Return the tolerance (fraction) of a stated short-circuit impedance (fraction), by column."""
    percent = 100.0 * np.asarray(stated, dtype=float)
    result = np.full(percent.shape, np.nan)
    for row in table("impedance_tolerance"):
        if row["standard"] == standard:
            limit = float(row["to_percent"])
            held = (percent <= limit) if row["to_included"] == "yes" else (percent < limit)
            tolerance = float(row["tolerance_percent"]) / 100.0
            result = np.where(np.isnan(result) & held, tolerance, result)
    return result
