"""Relative amounts: rows by months of a stream's clock, shared by all policies that follow the same pattern."""

from __future__ import annotations

from collections.abc import Callable, Hashable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from assumptions.expenses import Inflation
from portfolios.chunk import Chunk
from portfolios.designs import Increase, Loan, Share, Stream

from .cells import distinct
from .pool import ONES, Pool
from .streams import LONGEST, WIDE

Pattern = tuple[tuple[int | None, float], ...]
"""Pieces of a pattern: years (None for ever) and share."""

_MONTHS = np.arange(WIDE)
_WIDE = LONGEST + 1


@dataclass(frozen=True)
class Shape:
    """What a row of relative amounts is made of, besides figures of the policy.

    rate: the yearly increase, or the column that holds it; by: step in months of a decrease to nothing, 0 for
    none; loan: yearly rate of the loan whose balance it follows, or the column of it, none for equal steps;
    from_commencement: whether the clock of pattern and increase starts at commencement.
    """

    pattern: Pattern = ()
    rate: float | str = 0.0
    simple: bool = False
    by: int = 0
    from_commencement: bool = False
    loan: float | str | None = None

    @property
    def changing(self) -> bool:
        """Whether the row depends on figures of the policy."""
        return isinstance(self.rate, str) or self.by > 0

    def row(self, rate: float, start: int, length: int, loan: float | None = None) -> NDArray[np.float64]:
        """Relative amounts at months 0, 1 ... of the clock, to LONGEST + 1.

        rate: yearly increase; start: months from the clock's start to the stream's; length: of the stream in
        months; loan: yearly rate of the loan, none for a fall in equal steps.
        """
        years = _MONTHS // 12
        amounts = shares(self.pattern, years)
        if rate:
            amounts = amounts * (1 + rate * years if self.simple else (1 + rate) ** years)
        if self.by:
            gone = np.clip(_MONTHS - start, 0, None) // self.by * self.by
            amounts = amounts * np.clip(_left(gone, max(length, 1), loan), 0, None)
        return amounts


def _left(gone: NDArray[np.int64], length: int, loan: float | None) -> NDArray[np.float64]:
    """Share of a loan that is left: the debt with interest less the instalments with interest; or equal steps.

    With force d a month the instalments come to (e^(d gone) - 1) / (e^(d length) - 1) of the debt with interest.
    """
    force = 0.0 if loan is None else float(np.log1p(loan)) / 12
    if not force:
        return 1 - gone / length
    left: NDArray[np.float64] = np.exp(force * gone) * np.expm1(force * (length - gone)) / np.expm1(force * length)
    return left


def shape_of(stream: Stream) -> Shape:
    """Return the shape of a stream's relative amounts."""
    increase, falls = stream.increase or Increase(rate=0.0), stream.decrease
    return Shape(
        pattern_of(stream.pattern),
        0.0 if increase.rate is None else increase.rate,
        increase.kind == "simple",
        {None: 0, "yearly": 12, "monthly": 1}[falls.instalments if isinstance(falls, Loan) else falls],
        stream.clock == "commencement",
        falls.loan if isinstance(falls, Loan) else None,
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


class PerPolicy(Protocol):
    """Rows of another kind that depend on figures of the policy.

    lasts: whether it is 1 for as long as there is something to pay, then 0.
    """

    @property
    def lasts(self) -> bool:
        """Whether the row says how long there is something to pay."""
        ...

    def places(
        self,
        place: Callable[[Hashable, Callable[[], NDArray[np.float64]]], int],
        chunk: Chunk,
        whole: NDArray[np.int32],
        order: NDArray[np.int64],
        policies: NDArray[np.int64],
        passed: NDArray[np.int32],
    ) -> NDArray[np.int32]:
        """Return the place of the row for each of some policies, as RelativeRows.places_of; place: makes new ones."""
        ...


class RelativeRows:
    """The rows of relative amounts met so far, by their place in the pool.

    year, month: of the valuation date, from which rows by calendar month start.
    """

    def __init__(self, pool: Pool, year: int, month: int) -> None:
        self.pool, self.year, self.month = pool, year, month
        self.known: dict[Hashable, int] = {}
        self.changing: dict[tuple[Shape, int, int] | PerPolicy, int] = {}
        """Numbers of the shapes that depend on the policy, with the columns of months of start and end (-1: none)."""

    def fixed(self, shape: Shape) -> int:
        """Return the place of the row of a shape that is the same for all policies."""
        if not shape.rate and not shape.pattern:
            return ONES
        return self._place(shape, lambda: shape.row(float(shape.rate), 0, 0))

    def inflating(self, inflation: Inflation) -> int:
        """Return the place of the row by calendar month, the first the month of the valuation date."""

        def build() -> NDArray[np.float64]:
            months = 12 * self.year + self.month - 1 + _MONTHS
            return np.array([inflation.factor(int(m) // 12, int(m) % 12 + 1) for m in months])

        return self._place((inflation.rate, inflation.from_), build)

    def largest(self, place: int) -> float:
        """Return the largest amount of a row; 1 where there is none."""
        return 1.0 if place in (-1, ONES) else float(self.pool.numbers[place - 1])

    def per_policy(self, shape: Shape, start: int, end: int) -> int:
        """Return the number of a shape whose row depends on the policy; start, end: columns of months."""
        return self.changing.setdefault((shape, start, end), len(self.changing))

    def of_kind(self, kind: PerPolicy) -> int:
        """Return the number of rows of another kind."""
        return self.changing.setdefault(kind, len(self.changing))

    @property
    def until(self) -> list[int]:
        """Numbers of the rows that say how long there is something to pay."""
        return [number for kind, number in self.changing.items() if not isinstance(kind, tuple) and kind.lasts]

    def places_of(
        self,
        number: int,
        chunk: Chunk,
        whole: NDArray[np.int32],
        order: NDArray[np.int64],
        policies: NDArray[np.int64],
        passed: NDArray[np.int32],
    ) -> NDArray[np.int32]:
        """Return the place of the row of relative amounts for each of some policies of a chunk.

        policies: places in the order of calculation, whose policies of the extract are ``order``; whole: the
        whole-number matrix; passed: months passed at the valuation date, in the order of the extract.
        """
        known = list(self.changing)[number]
        if not isinstance(known, tuple):
            return known.places(self._place, chunk, whole, order, policies, passed)
        shape, start, end = known
        rates: list[float] = [0.0 if isinstance(shape.rate, str) else shape.rate]
        codes = np.zeros(len(policies), dtype=np.int64)
        if isinstance(shape.rate, str):
            found, codes = np.unique(chunk.number(shape.rate)[order[policies]], return_inverse=True)
            rates = found.tolist()
        loans: list[float | None] = [None if isinstance(shape.loan, str) else shape.loan]
        if isinstance(shape.loan, str):
            lent, own = np.unique(chunk.number(shape.loan)[order[policies]], return_inverse=True)
            loans, codes = lent.tolist(), codes * len(lent) + own
        if shape.by:
            begin = whole[start, policies].astype(np.int64)
            length = np.maximum(whole[end, policies] - begin, 0)
            begin = np.maximum(begin, 0) if shape.from_commencement else np.zeros_like(begin)
            codes = (codes * _WIDE + begin) * _WIDE + length
        keys, inverse = distinct(codes)
        places = []
        for code in keys.tolist():
            rest, span = divmod(code, _WIDE) if shape.by else (code, 0)
            rate, first = divmod(rest, _WIDE) if shape.by else (rest, 0)
            rate, loan = divmod(rate, len(loans))
            places.append(self._changing(shape, rates[rate], first, span, loans[loan]))
        return np.array(places, dtype=np.int32)[inverse]

    def _changing(self, shape: Shape, rate: float, begin: int, length: int, loan: float | None) -> int:
        return self._place((shape, rate, begin, length, loan), lambda: shape.row(rate, begin, length, loan))

    def _place(self, key: Hashable, build: Callable[[], NDArray[np.float64]]) -> int:
        if key not in self.known:
            row = build()
            # The largest amount stands in front of its row, the largest so far of every month behind it.
            so_far = np.maximum.accumulate(np.abs(row))
            self.known[key] = self.pool.add(np.concatenate((so_far[-1:], row, so_far))) + 1
        return self.known[key]
