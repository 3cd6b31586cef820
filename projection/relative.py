"""Relative amounts: rows by months of a stream's clock, shared by all policies that follow the same pattern."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from assumptions.expenses import Inflation
from portfolios.chunk import Chunk
from portfolios.designs import Increase, Share, Stream

from .streams import LONGEST

Pattern = tuple[tuple[int | None, float], ...]
"""Pieces of a pattern: years (None for ever) and share."""

_MONTHS = np.arange(LONGEST + 1)


@dataclass(frozen=True)
class Shape:
    """What a row of relative amounts is made of, besides figures of the policy.

    rate: the yearly increase, or the column that holds it; by: step in months of a decrease to nothing, 0 for none; from_commencement:
    whether the clock of pattern and increase starts at commencement.
    """

    pattern: Pattern = ()
    rate: float | str = 0.0
    simple: bool = False
    by: int = 0
    from_commencement: bool = False

    @property
    def changing(self) -> bool:
        """Whether the row depends on figures of the policy."""
        return isinstance(self.rate, str) or self.by > 0

    def row(self, rate: float, start: int, length: int) -> NDArray[np.float64]:
        """Relative amounts at months 0, 1 ... of the clock, LONGEST + 1 of them.

        rate: yearly increase; start: months from the clock's start to the stream's; length: of the stream in months.
        """
        years = _MONTHS // 12
        amounts = shares(self.pattern, years)
        if rate:
            amounts = amounts * (1 + rate * years if self.simple else (1 + rate) ** years)
        if self.by:
            gone = np.clip(_MONTHS - start, 0, None) // self.by * self.by
            amounts = amounts * np.clip(1 - gone / max(length, 1), 0, None)
        return amounts


def shape_of(stream: Stream) -> Shape:
    """Return the shape of a stream's relative amounts."""
    increase = stream.increase or Increase(rate=0.0)
    return Shape(
        pattern_of(stream.pattern),
        increase.rate,
        increase.kind == "simple",
        {None: 0, "yearly": 12, "monthly": 1}[stream.decrease],
        stream.clock == "commencement",
    )


def pattern_of(pieces: list[Share] | None) -> Pattern:
    """Return the pieces of a document's pattern; none for a level one."""
    return tuple((piece.years, piece.share) for piece in pieces or ())


def shares(pattern: Pattern, years: NDArray[np.int64]) -> NDArray[np.float64]:
    """Share of a pattern in each of these years, from 0; nothing after the last piece that ends."""
    if not pattern:
        return np.ones(len(years))
    amounts = np.zeros(len(years))
    begin = 0
    for length, share in pattern:
        end = int(years[-1]) + 1 if length is None else begin + length
        amounts[(years >= begin) & (years < end)] = share
        begin = end
    return amounts


class RelativeRows:
    """All rows of relative amounts met so far, in one array that the loops read.

    Rows by calendar month lie in the same array, from the month of the valuation date.
    """

    def __init__(self, year: int, month: int) -> None:
        self.year, self.month = year, month
        self.rows = np.ones((1, LONGEST + 1))
        self.used = 1
        self._known: dict[object, int] = {}
        self.changing: dict[tuple[Shape, int, int], int] = {}
        """Rows of the matrix with the row per policy: shape, row of months of start and of end (-1: none)."""

    def fixed(self, shape: Shape) -> int:
        """Return the row of a shape that is the same for all policies; -1 for a level one."""
        if not shape.rate and not shape.pattern:
            return -1
        return self._row(shape, lambda: shape.row(float(shape.rate), 0, 0))

    def inflating(self, inflation: Inflation) -> int:
        """Return the row by calendar month, the first the month of the valuation date."""

        def build() -> NDArray[np.float64]:
            months = 12 * self.year + self.month - 1 + _MONTHS
            return np.array([inflation.factor(int(m) // 12, int(m) % 12 + 1) for m in months])

        return self._row((inflation.rate, inflation.from_), build)

    def per_policy(self, shape: Shape, start: int, end: int) -> int:
        """Return the number of a shape whose row depends on the policy; start, end: rows of months."""
        return self.changing.setdefault((shape, start, end), len(self.changing))

    def rows_of(
        self, number: int, chunk: Chunk, months: NDArray[np.int32], policies: NDArray[np.int64]
    ) -> NDArray[np.int32]:
        """Return the row of relative amounts for each of some policies of a chunk."""
        shape, start, end = list(self.changing)[number]
        keys = np.zeros((3, len(policies)))
        if isinstance(shape.rate, str):
            keys[0] = chunk.number(shape.rate)[policies]
        if shape.by:
            keys[1] = months[start, policies] if shape.from_commencement else 0
            keys[2] = months[end, policies] - months[start, policies]
        distinct, inverse = np.unique(keys, axis=1, return_inverse=True)
        fixed = 0.0 if isinstance(shape.rate, str) else float(shape.rate)
        found = []
        for rate, begin, length in distinct.T.tolist():
            yearly = rate if isinstance(shape.rate, str) else fixed
            if np.isnan(yearly):  # a policy that the checks have already listed
                found.append(0)
                continue
            found.append(self._row((shape, yearly, begin, length), lambda y=yearly, b=begin, n=length: shape.row(y, int(b), int(n))))  # type: ignore[misc]
        return np.array(found, dtype=np.int32)[inverse.reshape(-1)]

    def _row(self, key: object, build: object) -> int:
        if key not in self._known:
            if self.used == len(self.rows):
                # A new array: a loop that runs in another thread keeps the one it was given.
                self.rows = np.concatenate((self.rows, np.ones((max(8, self.used), LONGEST + 1))))
            self.rows[self.used] = build()  # type: ignore[operator]
            self._known[key] = self.used
            self.used += 1
        return self._known[key]
