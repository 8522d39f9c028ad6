"""The tables that carry a study: columns of SI floats, each value with its status and its origin.

One unit is a column of length one; a register of 100,000 is the same code.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]


class Status(IntEnum):
    """What a value rests on, from best to worst; a result is as good as its worst argument.

    MEASURED is a reading, or the plate's own definition of the unit (rated volts and power).
    """

    ABSENT = 0
    MEASURED = 1
    GIVEN = 2
    CORRECTED = 3
    DERIVED = 4
    ASSUMED = 5


@dataclass(frozen=True)
class Step:
    """One formula applied to columns: logged once, however many rows it served."""

    out: str
    formula: Callable[..., Any]
    columns: tuple[tuple[str, str], ...]


@dataclass
class Table:
    """N rows of named columns.

    Attributes
    ----------
    n : int
        Number of rows.
    values : dict of (n,) float64 or complex128 arrays
        SI values (temperatures in °C, ratios as fractions); NaN where absent.
    status : dict of (n,) uint8 arrays
        Status of each value.
    line : dict of (n,) int32 arrays
        Line or row of the source where the value stands; 0 where unknown.
    half_digit : dict of (n,) float64 arrays
        Half the last printed digit of a reading, SI.
    text : dict of (n,) object arrays
        Names, words and readings as printed; empty text where absent.
    heading : dict of str
        The key of a column as the planner wrote it, for messages.
    steps : list of Step
        The formulas that made the columns, each that served a row once.
    """

    n: int
    values: dict[str, NDArray[Any]] = field(default_factory=dict)
    status: dict[str, NDArray[np.uint8]] = field(default_factory=dict)
    line: dict[str, NDArray[np.int32]] = field(default_factory=dict)
    half_digit: dict[str, Floats] = field(default_factory=dict)
    text: dict[str, NDArray[np.object_]] = field(default_factory=dict)
    heading: dict[str, str] = field(default_factory=dict)
    steps: list[Step] = field(default_factory=list)

    def __getitem__(self, column: str) -> NDArray[Any]:
        return self.values[column]

    def has(self, column: str) -> Mask:
        """Return (n,) bool: which rows hold a value in this column."""
        if column not in self.values:
            return np.zeros(self.n, dtype=np.bool_)
        return np.not_equal(self.status[column], int(Status.ABSENT))

    def word(self, column: str) -> NDArray[np.object_]:
        """Return (n,) text of a column, empty where the column or the cell is absent."""
        if column not in self.text:
            return np.full(self.n, "", dtype=object)
        return self.text[column]

    def set(self, column: str, value: Any, status: Any = Status.MEASURED) -> None:
        """Write a whole column; `value` and `status` are scalars or (n,) arrays.

        A NaN is absent, whatever the status.
        """
        array = np.array(np.broadcast_to(np.asarray(value), (self.n,)))
        array = array.astype(np.complex128 if np.iscomplexobj(array) else np.float64)
        given = np.broadcast_to(np.asarray(status, dtype=np.uint8), (self.n,))
        self.values[column] = array
        self.status[column] = np.where(np.isnan(array), Status.ABSENT, given).astype(np.uint8)

    def fill(self, column: str, where: Mask, value: Any, status: Status) -> None:
        """Write a column where `where` holds, keeping the rest."""
        if column not in self.values:
            self.set(column, np.nan)
        filled = np.where(where, value, self.values[column])
        self.set(column, filled, np.where(where, np.uint8(status), self.status[column]))

    def overwrite(self, column: str, other: str, where: Mask) -> None:
        """Replace values and status of a column by another's where `where` holds."""
        self.values[column] = np.where(where, self.values[other], self.values[column])
        status = np.where(where, self.status[other], self.status[column])
        self.status[column] = status.astype(np.uint8)

    def put(
        self,
        out: str,
        formula: Callable[..., Any],
        *,
        where: Mask | None = None,
        at_least: Any = Status.ABSENT,
        **columns: str,
    ) -> None:
        """Compute a column from columns and log the step.

        Parameters
        ----------
        out : str
            Column written.
        formula : callable
            Called with the columns named in `columns`.
        where : (n,) bool, optional
            Rows written; the others keep what they had.
        at_least : Status or (n,) of it
            The result's status is the worst of the arguments' and this; absent if one is absent.
        **columns : str
            Argument of the formula -> column.
        """
        with np.errstate(all="ignore"):
            value = formula(**{name: self.values[column] for name, column in columns.items()})
        states = [self.status[column] for column in columns.values()]
        worst = np.maximum.reduce([*states, np.full(self.n, at_least, dtype=np.uint8)])
        worst = np.where(np.minimum.reduce(states) == Status.ABSENT, Status.ABSENT, worst)
        if where is not None and out in self.values:
            value = np.where(where, value, self.values[out])
            worst = np.where(where, worst, self.status[out])
        elif where is not None:
            value = np.where(where, value, np.nan)
        self.set(out, value, worst)
        served = self.has(out) if where is None else self.has(out) & where
        if served.any():
            self.log(Step(out, formula, tuple(columns.items())))

    def log(self, *steps: Step) -> None:
        """Note steps, each once."""
        self.steps.extend(step for step in steps if step not in self.steps)

    def take(self, rows: NDArray[np.intp]) -> Table:
        """Return a new table of these rows, in this order."""
        return Table(
            len(rows),
            {name: column[rows] for name, column in self.values.items()},
            {name: column[rows] for name, column in self.status.items()},
            {name: column[rows] for name, column in self.line.items()},
            {name: column[rows] for name, column in self.half_digit.items()},
            {name: column[rows] for name, column in self.text.items()},
            dict(self.heading),
            list(self.steps),
        )

    def worst(self, columns: Iterable[str]) -> NDArray[np.uint8]:
        """Return (n,) uint8: the worst status over the named columns."""
        stacked = np.array([self.status[column] for column in columns], dtype=np.uint8)
        worst: NDArray[np.uint8] = stacked.max(axis=0)
        return worst


@dataclass(frozen=True)
class InputFile:
    """A file that was read: its name as given and the SHA-256 of its bytes."""

    name: str
    sha256: str


@dataclass
class System:
    """What holds for the whole study; NaN where the sheet does not say.

    base_power [VA], frequency [Hz], study_temperature [°C]; load_fractions (1 = rated) and
    power_factors (cosφ, `lagging`, `leading` or `unity`) are the points of the regulation table.
    written_frequencies [Hz] are the sheets' own, where an option says another.
    """

    base_power: float = np.nan
    frequency: float = np.nan
    study_temperature: float = np.nan
    load_fractions: tuple[float, ...] = (0.25, 0.5, 0.75, 1.0)
    power_factors: tuple[tuple[float, str], ...] = (
        (0.8, "lagging"),
        (0.9, "lagging"),
        (1.0, "unity"),
        (0.9, "leading"),
    )
    written_frequencies: tuple[float, ...] = ()


@dataclass
class Plant:
    """What was written: one row a unit in `transformers`, many rows a unit in the test tables.

    Every table but `busbars` and `transformers` has a column `unit`: the row of its transformer.
    """

    sources: list[InputFile]
    system: System
    busbars: Table
    transformers: Table
    stages: Table
    open_circuit: Table
    short_circuit: Table
    resistance: Table
