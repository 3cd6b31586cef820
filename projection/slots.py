"""Slots: the rows of numbers per policy that streams refer to, each worked out once per chunk.

Designs name columns, numbers and ages in many places. Each distinct one gets a row: money amounts, durations in whole
months, months between payments.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from portfolios.chunk import Chunk
from portfolios.designs import AtAge, Duration

from .streams import LONGEST

NOT_WHOLE = -1
"""Stands in the months matrix for a duration that is missing, negative, or not in whole months."""

_TOLERANCE = 1e-6

DurationKey = tuple[str, float | str | tuple[int, ...]]


@dataclass
class Slots:
    """The distinct amounts, durations and frequencies of all streams, in order of first use."""

    money: dict[str, int] = field(default_factory=dict)
    durations: dict[DurationKey, int] = field(default_factory=dict)
    frequencies: dict[int | str, int] = field(default_factory=dict)

    def amount(self, amount: float | str) -> tuple[int, float]:
        """Return row and factor of an amount: a column counts once, a number has no row."""
        if isinstance(amount, str):
            return self.money.setdefault(amount, len(self.money)), 1.0
        return -1, float(amount)

    def duration(self, duration: Duration) -> int:
        """Return the row of a duration from commencement."""
        if isinstance(duration, AtAge):
            return self._duration(("age", duration.age))
        if isinstance(duration, str):
            return self._duration(("column", duration))
        return self._duration(("years", float(duration)))

    def latest(self, rows: tuple[int, ...]) -> int:
        """Return the row that holds the largest of some durations."""
        return rows[0] if len(rows) == 1 else self._duration(("latest", rows))

    def frequency(self, a_year: int | str) -> int:
        """Return the row of a number of payments a year."""
        return self.frequencies.setdefault(a_year, len(self.frequencies))

    def _duration(self, key: DurationKey) -> int:
        return self.durations.setdefault(key, len(self.durations))

    def amounts_of(self, chunk: Chunk) -> NDArray[np.float64]:
        """Return the money matrix of a chunk: (amounts, policies), NaN where missing."""
        matrix = np.empty((len(self.money), chunk.n))
        for column, row in self.money.items():
            matrix[row] = chunk.number(column)
        return matrix

    def months_of(self, chunk: Chunk, months_to_age: AgeFinder) -> NDArray[np.int32]:
        """Return the months matrix of a chunk: (durations, policies), NOT_WHOLE where a duration is no good."""
        matrix = np.empty((len(self.durations), chunk.n), dtype=np.int32)
        for (kind, what), row in self.durations.items():
            if kind == "age":
                matrix[row] = months_to_age(int(what))  # type: ignore[arg-type]
            elif kind == "latest":
                matrix[row] = matrix[list(what)].max(axis=0)  # type: ignore[arg-type]
            elif kind == "column":
                matrix[row] = whole_months(chunk.number(str(what)))
            else:
                matrix[row] = whole_months(np.array([what], dtype=np.float64))[0]
        return matrix

    def periods_of(self, chunk: Chunk) -> NDArray[np.int32]:
        """Return the periods matrix of a chunk: (frequencies, policies), months between payments, 0 where none."""
        matrix = np.empty((len(self.frequencies), chunk.n), dtype=np.int32)
        for a_year, row in self.frequencies.items():
            if isinstance(a_year, str):
                number = np.nan_to_num(chunk.number(a_year))
                matrix[row] = _PERIODS[np.clip(number, 0, 13).astype(np.int64)]
            else:
                matrix[row] = 12 // a_year
        return matrix


class AgeFinder:
    """Gives, per policy of a chunk, the months from commencement to an age."""

    def __call__(self, age: int) -> NDArray[np.int32]:
        """Months to the first due date on or after the birthday."""
        raise NotImplementedError


_PERIODS = np.array([0, 12, 6, 0, 3, 0, 0, 0, 0, 0, 0, 0, 1, 0], dtype=np.int32)


def whole_months(years: NDArray[np.float64]) -> NDArray[np.int32]:
    """Return durations in years as whole months; NOT_WHOLE where that cannot be."""
    months = 12 * years
    nearest = np.rint(months)
    with np.errstate(invalid="ignore"):
        good = (np.abs(months - nearest) <= _TOLERANCE) & (nearest >= 0) & (nearest <= LONGEST)
    return np.where(good, nearest, NOT_WHOLE).astype(np.int32)
