"""Rows of amounts that grow by an index, from a calendar month, or from the valuation date on.

Such a row depends on the calendar month in which the clock of the stream starts, and on how many of its anniversaries
have passed at the valuation date. All policies that have these in common share it.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from assumptions.indices import Index
from portfolios.chunk import Chunk
from portfolios.designs import Design, Increase, Stream

from .cells import distinct
from .documents import DocumentError
from .relative import Pattern, pattern_of, shares
from .streams import WIDE

_MONTHS = np.arange(WIDE)
_SPAN = 1 << 12
"""More than the anniversaries that any policy has had."""


@dataclass(frozen=True)
class Growth:
    """What a row is made of; start: column of months to the start of the clock, -1 at commencement.

    listed: an index's first year, and its rates from then on, or nothing; rate: the yearly rate without an index, or
    the column that holds it; month: calendar month of the increases, 0 for the anniversaries of the clock; current:
    whether increases up to the valuation date are in the amount already; today: its calendar month, from year 0.
    """

    pattern: Pattern
    rate: float | str
    listed: tuple[int, tuple[float, ...]] | None
    share: float
    plus: float
    floor: float
    cap: float
    simple: bool
    month: int
    current: bool
    start: int
    today: int

    lasts: ClassVar[bool] = False

    def places(
        self,
        place: Callable[[Hashable, Callable[[], NDArray[np.float64]]], int],
        chunk: Chunk,
        whole: NDArray[np.int32],
        order: NDArray[np.int64],
        policies: NDArray[np.int64],
        passed: NDArray[np.int32],
    ) -> NDArray[np.int32]:
        """Return the place of the row for each of some policies, as RelativeRows.places_of."""
        rows = order[policies]
        start = np.maximum(whole[self.start, policies].astype(np.int64), 0) if self.start >= 0 else 0
        days = chunk.day("commencement_date")[rows].astype("datetime64[D]")
        began = days.astype("datetime64[M]").astype(np.int64) + 12 * 1970 + start
        had = np.maximum((passed[rows].astype(np.int64) - start) // 12, 0) * int(self.current)
        # By anniversaries the month does not matter, by calendar months the anniversaries passed.
        codes = began * _SPAN if self.month else began // 12 * 12 * _SPAN + had
        rates: list[float] = [0.0 if isinstance(self.rate, str) else self.rate]
        if isinstance(self.rate, str):
            found, own = np.unique(chunk.number(self.rate)[rows], return_inverse=True)
            rates, codes = found.tolist(), codes * len(found) + own
        keys, inverse = distinct(codes)
        made = []
        for key in keys.tolist():
            rest, number = divmod(key, len(rates))
            known = (*divmod(rest, _SPAN), rates[number])
            made.append(place((self, *known), lambda known=known: self.row(*known)))  # type: ignore[misc]
        return np.array(made, dtype=np.int32)[inverse]

    def row(self, began: int, had: int, rate: float) -> NDArray[np.float64]:
        """Relative amounts by months of the clock.

        began: calendar month of the clock's start, from year 0; had: anniversaries that do not count any more.
        """
        calendar = began + _MONTHS
        if self.month:
            takes = (calendar % 12 == self.month - 1) & (_MONTHS > 0)
            if self.current:
                takes &= calendar > self.today
        else:
            takes = (_MONTHS % 12 == 0) & (had < _MONTHS // 12)
        steps = np.where(takes, self._rates(calendar // 12, rate), 0.0)
        grown: NDArray[np.float64] = 1 + np.cumsum(steps) if self.simple else np.cumprod(1 + steps)
        return grown * shares(self.pattern, _MONTHS // 12)

    def _rates(self, years: NDArray[np.int64], rate: float) -> NDArray[np.float64]:
        if self.listed is None:
            return np.full(len(years), rate)
        first, rates = self.listed
        by_year = np.array(rates)[np.clip(years - first, 0, len(rates) - 1)]
        return np.clip(self.share * by_year + self.plus, self.floor, self.cap)


def growth_of(stream: Stream, indices: list[Index], start: int, today: int) -> Growth | None:
    """Return how a stream grows where that is more than a yearly rate on its own clock; start: column of months.

    today: the calendar month of the valuation date, from year 0.
    """
    increase = stream.increase
    if increase is None or not increase.needs_calendar:
        return None
    index = next((one for one in indices if one.name == increase.index), None)
    return Growth(
        pattern=pattern_of(stream.pattern),
        rate=0.0 if increase.rate is None else increase.rate,
        listed=None if index is None else index.listed,
        share=increase.share,
        plus=increase.plus,
        floor=-1.0 if increase.floor is None else increase.floor,
        cap=float("inf") if increase.cap is None else increase.cap,
        simple=increase.kind == "simple",
        month=increase.month or 0,
        current=increase.current,
        start=-1 if stream.clock == "commencement" else start,
        today=today,
    )


def check_indices(designs: list[Design], indices: list[Index]) -> None:
    """Raise DocumentError where a stream follows an index that the basis does not hold."""
    known = {index.name for index in indices}
    for design in designs:
        for stream in design.stream:
            increase = stream.increase or Increase(rate=0.0)
            if increase.index is not None and increase.index not in known:
                there = ", ".join(f"'{name}'" for name in sorted(known)) or "none"
                raise DocumentError(
                    f"design {design.code}: stream '{stream.name}' increases by the index '{increase.index}', which "
                    f"the basis does not hold; it holds {there}: add an [[index]] of that name to the basis"
                )
