"""What is done to the yearly rates of one rule, of death or of lapse, by age, duration and calendar time.

An adjustment is a list of steps. Each changes the rate that the steps before it have left; at the end the rate is
brought into 0 to 1. The rate that it starts from is the one that counts under the rule: after multiple, improvement
and extra. The closing rate of a table, 1, is not adjusted.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

How = Literal["absolute", "relative", "replaced"]

Span = tuple[float, float]
"""From the first number, which belongs to it, to the second, which does not."""

ALWAYS: Span = (-np.inf, np.inf)


@dataclass(frozen=True)
class Window:
    """Calendar months from ``first`` to ``end`` (excluded) that begin at or after ``today``, or all of them.

    Months are 12 * year + month - 1; today is the calendar month of the day after the valuation date. A year of the
    rates that lies partly in the window is changed in part: by the share of its months from ``today`` on that lie
    in the window. The months before ``today`` do not matter to a value.
    """

    first: int
    end: float
    today: int
    grain: int = 1
    """Months within which years that begin count as beginning in the middle one: 1, 3 or 12."""

    def share(self, begins: int) -> float:
        """Return the share of a year that begins in a month, one year at a time."""
        left = [month for month in range(begins, begins + 12) if month >= self.today]
        return sum(self.first <= month < self.end for month in left) / max(1, len(left))

    def shares(self, begins: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the shares of years that begin in given months."""
        starts = np.maximum(begins, self.today)
        ends = begins + 12.0
        inside = np.minimum(ends, self.end) - np.maximum(starts, self.first)
        return np.asarray(np.maximum(inside, 0) / np.maximum(ends - starts, 1))


@dataclass(frozen=True)
class Step:
    """One change of a rate q: by an amount, by a share of q, or to an amount; and where it holds.

    ages: the whole age at which a table is entered plus the years since, as for improvement; durations: completed
    years of the rates since commencement; years: the calendar year in which a year of the rates begins; most: how far
    q may move.
    """

    how: How
    amount: float
    ages: Span = ALWAYS
    durations: Span = ALWAYS
    years: Span = ALWAYS
    window: Window | None = None
    most: float = np.inf


@dataclass(frozen=True)
class Adjustment:
    """Steps one after the other. ``month`` below is that in which the year of duration 0 begins."""

    steps: tuple[Step, ...]

    @cached_property
    def dated(self) -> bool:
        """Whether calendar time matters, so that rates differ between policies of different dates."""
        return any(step.window is not None or step.years != ALWAYS for step in self.steps)

    @cached_property
    def grain(self) -> int:
        """Months within which it does not matter when a year of the rates begins."""
        return min((step.window.grain for step in self.steps if step.window is not None), default=12)

    def counted(self, month: int) -> int:
        """Return the month in which a year of the rates counts as beginning."""
        return month - month % self.grain + self.grain // 2

    def rate(self, q: float, age: int, duration: int, month: int) -> float:
        """Return one adjusted rate: at an age, in the year of a duration."""
        begins = month + 12 * duration
        for step in self.steps:
            places = ((age, step.ages), (duration, step.durations), (begins // 12, step.years))
            if not all(low <= place < high for place, (low, high) in places):
                continue
            if step.how == "absolute":
                change = step.amount
            elif step.how == "relative":
                change = step.amount * q
            else:
                change = step.amount - q
            change = max(-step.most, min(step.most, change))
            q += change if step.window is None else change * step.window.share(begins)
        return min(1.0, max(0.0, q))

    def rates(self, q: NDArray[np.float64], age: int, month: int) -> NDArray[np.float64]:
        """Return the adjusted rates of durations 0, 1 ..., the first at an age."""
        durations = np.arange(len(q))
        begins = month + 12 * durations
        for step in self.steps:
            target = {"absolute": q + step.amount, "relative": q * (1 + step.amount)}.get(
                step.how, np.full(len(q), step.amount)
            )
            moved = np.clip(target - q, -step.most, step.most)
            where = np.ones(len(q), dtype=bool)
            for places, (low, high) in (
                (age + durations, step.ages), (durations, step.durations), (begins // 12, step.years)
            ):  # fmt: skip
                where &= (places >= low) & (places < high)
            share = where * (1.0 if step.window is None else step.window.shares(begins))
            # Where all of it counts, the target itself: no rounding from adding a difference.
            whole = (share == 1) & (np.abs(target - q) <= step.most)
            q = np.where(whole, target, q + share * moved)
        return np.clip(q, 0.0, 1.0)
