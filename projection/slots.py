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
from portfolios.designs import AfterGuarantee, AtAge, Design, Duration, Stream

from . import loops
from .streams import LONGEST

NOT_WHOLE = -1
"""Stands in the months matrix for a duration that is missing, negative, or not in whole months."""

Order = NDArray[np.int64]
AgeFinder = Callable[[int, int], NDArray[np.int32]]
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
        """Return row and factor of an amount: a column of the extract counts once, a number has no row."""
        if isinstance(amount, str):
            return self.money.setdefault(amount, len(self.money)), 1.0
        return -1, float(amount)

    def duration(self, duration: Duration) -> int:
        """Return the row of a duration from commencement."""
        if isinstance(duration, AtAge):
            return self._row(("age", duration.age))
        if isinstance(duration, str):
            return self._row(("duration", duration))
        return self._row(("years", float(duration)))

    def start(self, design: Design, stream: Stream) -> int:
        """Return the row of a stream's start, which may be the end of another one's guarantee."""
        if not isinstance(stream.from_, AfterGuarantee):
            return self.duration(stream.from_)
        base = design.named(stream.from_.after)
        return self._row(("sum", (self.duration(base.from_), self.duration(base.guarantee or 0.0))))  # type: ignore[arg-type]

    def latest(self, rows: tuple[int, ...]) -> int:
        """Return the row that holds the largest of some durations."""
        return rows[0] if len(rows) == 1 else self._row(("latest", rows))

    def frequency(self, a_year: int | str) -> int:
        """Return the row of the months between payments for a number of payments a year."""
        return self._row(("frequency", a_year) if isinstance(a_year, str) else ("period", 12 // a_year))

    def changing(self, number: int) -> int:
        """Return the row with the places of rows of relative amounts that depend on the policy."""
        return self._row(("changing", number))

    def named(self, row: int) -> str:
        """Return the extract column behind a whole number, or nothing."""
        kind, what = list(self.whole)[row]
        return str(what) if kind in ("duration", "frequency") else ""

    def _row(self, key: Key) -> int:
        return self.whole.setdefault(key, len(self.whole))

    def amounts_of(self, chunk: Chunk, order: Order) -> NDArray[np.float64]:
        """Return the money matrix (amount, policy) of a chunk in the order of calculation, NaN where missing."""
        matrix = np.empty((len(self.money), chunk.n))
        for name, row in self.money.items():
            np.take(chunk.number(name), order, out=matrix[row], mode="clip")
        return matrix

    def numbers_of(self, chunk: Chunk, order: Order, months_to_age: AgeFinder) -> NDArray[np.int32]:
        """Return the whole-number matrix (number, policy) of a chunk in the order of calculation.

        It holds NOT_WHOLE for a duration that is no good, and 0 for no frequency. months_to_age: gives the
        months from commencement to an age per policy of the extract's order, told age and row. Places of rows are
        left at 0.
        """
        matrix = np.zeros((len(self.whole), chunk.n), dtype=np.int32)
        for (kind, what), row in self.whole.items():
            if kind == "age":
                matrix[row] = months_to_age(int(what), row)[order]  # type: ignore[arg-type]
            elif kind == "latest":
                np.max(matrix[list(what)], axis=0, out=matrix[row])  # type: ignore[arg-type, index]
            elif kind == "sum":
                parts = matrix[list(what)]  # type: ignore[arg-type, index]
                whole = np.minimum(parts.sum(axis=0), LONGEST)
                matrix[row] = np.where((parts < 0).any(axis=0), NOT_WHOLE, whole)
            elif kind == "duration":
                loops.whole_months(chunk.number(str(what)), order, float(LONGEST), matrix[row])
            elif kind == "years":
                matrix[row] = whole_months(np.array([what], dtype=np.float64))[0]
            elif kind == "period":
                matrix[row] = int(what)  # type: ignore[arg-type]
            elif kind == "frequency":
                number = np.nan_to_num(np.take(chunk.number(str(what)), order, mode="clip"))
                matrix[row] = _PERIODS[np.clip(number, 0, 13).astype(np.int64)]
        return matrix


_PERIODS = np.array([0, 12, 6, 0, 3, 0, 0, 0, 0, 0, 0, 0, 1, 0], dtype=np.int32)


def whole_months(years: NDArray[np.float64]) -> NDArray[np.int32]:
    """Return durations in years as whole months; NOT_WHOLE where that cannot be."""
    months = np.empty(len(years), dtype=np.int32)
    loops.whole_months(years, np.arange(len(years)), float(LONGEST), months)
    return months
