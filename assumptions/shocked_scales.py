"""Improvement of mortality made from another one by a change of the yearly improvements from some year on."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from .adjustments import ALWAYS, How, Span
from .improvement import LONGEST, OLDEST, Improvement, Scale


@dataclass(frozen=True)
class Turn:
    """A change of the yearly improvements f(x, y): by an amount, by a share of f, or to an amount; and where.

    years: calendar years y, as in f(x, y) from y - 1 to y.
    """

    how: How
    amount: float
    years: Span
    ages: Span = ALWAYS

    def of(self, f: float, age: int, year: int) -> float:
        """Return one changed improvement, at most 1."""
        if not (self.ages[0] <= age < self.ages[1] and self.years[0] <= year < self.years[1]):
            return f
        return min(1.0, {"absolute": f + self.amount, "relative": f * (1 + self.amount)}.get(self.how, self.amount))


@dataclass(frozen=True)
class TurnedScale(Scale):
    """A scale whose improvements are those of ``base`` with a change. Factors up to the change are those of base."""

    base: Scale = field(default_factory=lambda: Scale(Improvement(rate=0.0, base_year=2000)))
    turns: tuple[Turn, ...] = ()
    _known: dict[tuple[int, int], float] = field(default_factory=dict, compare=False, repr=False)

    def yearly(self, age: int, year: int) -> float:
        """Return f(x, y), changed."""
        f = self._of_base(age, year)
        for turn in self.turns:
            f = turn.of(f, age, year)
        return f

    def _of_base(self, age: int, year: int) -> float:
        if self.document.holds == "yearly improvements":
            return self.base.yearly(age, year)
        before = self.base.factor(age, year - 1)
        return 1 - self.base.factor(age, year) / before if before else 0.0

    def factor(self, age: int, year: int) -> float:
        """Return the share of the base year's rate that is left: of the year before, less its improvement."""
        first = self.document.base_year
        year = min(year, first + LONGEST)
        left, known = 1.0, first
        for earlier in range(year, first, -1):
            if (age, earlier) in self._known:
                left, known = self._known[age, earlier], earlier
                break
        for later in range(known + 1, year + 1):
            left *= 1 - self.yearly(age, later)
            self._known[age, later] = left
        return left

    def cohort(self, age: int, year: int, count: int) -> NDArray[np.float64]:
        """Return the factors of a life in the years of age from ``age``, the first of which begins in ``year``."""
        ages = np.clip(age + np.arange(count), 0, OLDEST)
        passed = np.clip(year + np.arange(count) - self.document.base_year, 0, LONGEST)
        return self._table[ages, passed]

    @cached_property
    def _table(self) -> NDArray[np.float64]:
        """Factors by age and years since the base year, from ratios of the base's."""
        first = self.document.base_year
        held = _by_age(self.base)
        before, after = held[:, :-1], held[:, 1:]
        f = 1 - np.divide(after, before, out=np.ones_like(after), where=before > 0)
        ages, years = np.arange(OLDEST + 1)[:, None], first + 1 + np.arange(LONGEST)[None, :]
        for turn in self.turns:
            where = (ages >= turn.ages[0]) & (ages < turn.ages[1])
            where = where & (years >= turn.years[0]) & (years < turn.years[1])
            changed = {"absolute": f + turn.amount, "relative": f * (1 + turn.amount)}.get(
                turn.how, np.full_like(f, turn.amount)
            )
            f = np.where(where, np.minimum(1.0, changed), f)
        return np.hstack((np.ones((OLDEST + 1, 1)), np.cumprod(1 - f, axis=1)))


def _by_age(base: Scale) -> NDArray[np.float64]:
    # A cohort walks along its diagonal; the square is put together from all diagonals that cross it.
    square = np.ones((OLDEST + 1, LONGEST + 1))
    first = base.document.base_year
    for start in range(-OLDEST, LONGEST + 1):
        age, passed = (0, start) if start >= 0 else (-start, 0)
        count = min(OLDEST + 1 - age, LONGEST + 1 - passed)
        steps = np.arange(count)
        square[age + steps, passed + steps] = base.cohort(age, first + passed, count)
    return square


def turned(scale: Scale | None, turn: Turn) -> Scale | None:
    """Return a scale with a change of its improvements; None stands for no improvement, of which a share is nothing.

    Without a scale, the base year is the year before the first one that changes.
    """
    if scale is None:
        if turn.how == "relative" or not turn.amount:
            return None
        scale = Scale(Improvement(rate=0.0, base_year=int(turn.years[0]) - 1))
    if isinstance(scale, TurnedScale):
        return replace(scale, turns=(*scale.turns, turn), _known={})
    return TurnedScale(scale.document, scale.first_age, scale.years, scale.values, scale, (turn,))
