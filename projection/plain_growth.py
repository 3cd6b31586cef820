"""How an amount grows by an index, from a calendar month, or from the valuation date on, in ordinary Python."""

from __future__ import annotations

from datetime import date

from assumptions.indices import Index
from portfolios.designs import Increase

from .plain_dates import month_after
from .plain_occasions import Course


class Growth:
    """The relative amounts of one stream, worked out month by month of its clock.

    increase: the document's; rate: the yearly rate where no index is named; clock: months from commencement to
    the start of the clock.
    """

    def __init__(self, increase: Increase, rate: float, commencement: date, clock: int, course: Course) -> None:
        self._increase, self._rate, self._clock, self._course = increase, rate, clock, course
        self._commencement = commencement
        self._index: Index | None = None
        if increase.index is not None:
            self._index = next(index for index in course.indices if index.name == increase.index)
        self._amounts = [1.0]

    def at(self, month: int) -> float:
        """Return the amount at a month from commencement."""
        passed = max(0, month - self._clock)
        while len(self._amounts) <= passed:
            point = self._clock + len(self._amounts)
            step = self._step(point) if self._takes_place(point) else 0.0
            last = self._amounts[-1]
            self._amounts.append(last + step if self._increase.kind == "simple" else last * (1 + step))
        return self._amounts[passed]

    def _takes_place(self, point: int) -> bool:
        """Whether there is an increase at a point that the amount does not hold already."""
        if self._increase.month is None:
            return (point - self._clock) % 12 == 0 and not (self._increase.current and point <= self._course.u)
        year, month = month_after(self._commencement, point)
        today = self._course.today
        past = self._increase.current and today is not None and (year, month) <= (today.year, today.month)
        return month == self._increase.month and not past

    def _step(self, point: int) -> float:
        """Return the rate of the increase at a point."""
        if self._index is None:
            return self._rate
        increase, (year, _) = self._increase, month_after(self._commencement, point)
        rate = increase.share * self._index.rate(year) + increase.plus
        if increase.floor is not None:
            rate = max(rate, increase.floor)
        return rate if increase.cap is None else min(rate, increase.cap)
