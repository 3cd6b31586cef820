"""Slots: the rows of numbers per policy that streams refer to, each worked out once per chunk.

Designs name columns, numbers and ages in many places. Each distinct one gets a row: money amounts, durations
in whole months, months between payments.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from portfolios.chunk import Chunk
from portfolios.designs import AtAge, Duration

from . import loops
from .streams import LONGEST

NOT_WHOLE = -1
"""Stands in the months matrix for a duration that is missing, negative, or not in whole months."""

Key = tuple[str, float | int | str | tuple[int, ...]]


@dataclass
class Slots:
    """The distinct amounts and whole numbers of all streams, in order of first use.

    An amount is a column of the money matrix (policy, amount); durations in months, months between payments
    and places of rows that depend on the policy are columns of the whole-number matrix (policy, number).
    """

    money: dict[str, int] = field(default_factory=dict)
    whole: dict[Key, int] = field(default_factory=dict)

    def amount(self, amount: float | str) -> tuple[int, float]:
        """Return column and factor of an amount: a column of the extract counts once, a number has no column."""
        if isinstance(amount, str):
            return self.money.setdefault(amount, len(self.money)), 1.0
        return -1, float(amount)

    def duration(self, duration: Duration) -> int:
        """Return the column of a duration from commencement."""
        if isinstance(duration, AtAge):
            return self._column(("age", duration.age))
        if isinstance(duration, str):
            return self._column(("duration", duration))
        return self._column(("years", float(duration)))

    def latest(self, columns: tuple[int, ...]) -> int:
        """Return the column that holds the largest of some durations."""
        return columns[0] if len(columns) == 1 else self._column(("latest", columns))

    def frequency(self, a_year: int | str) -> int:
        """Return the column of the months between payments for a number of payments a year."""
        return self._column(("frequency", a_year) if isinstance(a_year, str) else ("period", 12 // a_year))

    def changing(self, number: int) -> int:
        """Return the column with the places of rows of relative amounts that depend on the policy."""
        return self._column(("changing", number))

    def named(self, column: int) -> str:
        """Return the extract column behind a whole number, or nothing."""
        kind, what = list(self.whole)[column]
        return str(what) if kind in ("duration", "frequency") else ""

    def _column(self, key: Key) -> int:
        return self.whole.setdefault(key, len(self.whole))

    def amounts_of(self, chunk: Chunk) -> NDArray[np.float64]:
        """Return the money matrix of a chunk, NaN where an amount is missing."""
        matrix = np.empty((chunk.n, len(self.money)))
        for name, column in self.money.items():
            matrix[:, column] = chunk.number(name)
        return matrix

    def numbers_of(self, chunk: Chunk, months_to_age: Callable[[int, int], NDArray[np.int32]]) -> NDArray[np.int32]:
        """Return the whole-number matrix of a chunk: NOT_WHOLE for a duration that is no good, 0 for no frequency.

        months_to_age: gives the months from commencement to an age per policy, told age and column. Places of
        rows are left at 0.
        """
        matrix = np.zeros((chunk.n, len(self.whole)), dtype=np.int32)
        for (kind, what), column in self.whole.items():
            if kind == "age":
                matrix[:, column] = months_to_age(int(what), column)  # type: ignore[arg-type]
            elif kind == "latest":
                matrix[:, column] = matrix[:, list(what)].max(axis=1)  # type: ignore[arg-type, index]
            elif kind == "duration":
                matrix[:, column] = whole_months(chunk.number(str(what)))
            elif kind == "years":
                matrix[:, column] = whole_months(np.array([what], dtype=np.float64))[0]
            elif kind == "period":
                matrix[:, column] = int(what)  # type: ignore[arg-type]
            elif kind == "frequency":
                number = np.nan_to_num(chunk.number(str(what)))
                matrix[:, column] = _PERIODS[np.clip(number, 0, 13).astype(np.int64)]
        return matrix


_PERIODS = np.array([0, 12, 6, 0, 3, 0, 0, 0, 0, 0, 0, 0, 1, 0], dtype=np.int32)


def whole_months(years: NDArray[np.float64]) -> NDArray[np.int32]:
    """Return durations in years as whole months; NOT_WHOLE where that cannot be."""
    months = np.empty(len(years), dtype=np.int32)
    loops.whole_months(years, float(LONGEST), months)
    return months
