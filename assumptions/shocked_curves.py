"""Yield curves made from another one by a change of its spot rates or of its yearly forward rates.

Both leave the base curve as it is and add to its integral H(t), so that a change of nothing is nothing:

    spot      H'(t) = t ln(1 + s(t) + c(t)),                        s(t) = exp(H(t)/t) - 1
    forward   H'(t) = H(t) + sum over years n of o_n(t) ln((1 + f_n + c_n) / (1 + f_n)),

where c is the change at a maturity, f_n = v(n-1)/v(n) - 1 the forward rate of the n-th year, c_n the change at maturity
n, and o_n(t) the part of the n-th year that lies before t.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from .adjustments import ALWAYS, How, Span
from .interest import YieldCurve

Years = NDArray[np.float64]

HORIZON = 155
"""Years for which rates are checked, and for which forward rates are changed; later ones are as in the last year."""


@dataclass(frozen=True)
class Move:
    """A change of rates r by maturity.

    amounts: by maturity, linear between the maturities and held outside; one amount stands for all. 'relative' is a
    share of r, and of nothing where r is negative. least: the change is at least this (never a fall); maturities:
    where it holds.
    """

    how: How
    amounts: tuple[tuple[float, float], ...]
    maturities: Span = ALWAYS
    least: float | None = None

    def amount(self, t: float) -> float:
        """Return the amount at one maturity."""
        if t <= self.amounts[0][0]:
            return self.amounts[0][1]
        for (t0, a0), (t1, a1) in zip(self.amounts, self.amounts[1:], strict=False):
            if t <= t1:
                weight = (t - t0) / (t1 - t0)
                return (1 - weight) * a0 + weight * a1
        return self.amounts[-1][1]

    def change(self, rate: float, t: float) -> float:
        """Return the change of a rate at one maturity."""
        if not self.maturities[0] <= t < self.maturities[1]:
            return 0.0
        amount = self.amount(t)
        if self.how == "replaced":
            return amount - rate
        moved = amount * max(rate, 0.0) if self.how == "relative" else amount
        return moved if self.least is None else max(moved, self.least)

    def changes(self, rates: Years, t: Years) -> Years:
        """Return the changes of many rates at their maturities."""
        at, amounts = np.array(self.amounts).T
        amount = np.interp(t, at, amounts)
        if self.how == "replaced":
            moved = amount - rates
        elif self.how == "relative":
            moved = np.where(rates > 0, amount * rates, 0.0)
        else:
            moved = amount
        if self.least is not None:
            moved = np.maximum(moved, self.least)
        return np.where((t >= self.maturities[0]) & (t < self.maturities[1]), moved, 0.0)


@dataclass(frozen=True)
class SpotMoved:
    """A curve whose spot rates are those of ``base`` and a change, at every maturity."""

    base: YieldCurve
    move: Move
    flat = False

    def spot(self, t: float) -> float:
        """Spot rate at a maturity t > 0."""
        rate = math.expm1(self.base.integral(t) / t)
        return rate + self.move.change(rate, t)

    def integral(self, t: float) -> float:
        """H'(t)."""
        if t <= 0:
            return 0.0
        held = self.base.integral(t)
        rate = math.expm1(held / t)
        return held + t * math.log1p(self.move.change(rate, t) / (1 + rate))

    def factor(self, t: float) -> float:
        """Discount factor v'(t), term by term."""
        return math.exp(-self.integral(t))

    def factors(self, years: Years) -> Years:
        """Discount factors for many t: v(t) times (1 + c(t) v(t)^(1/t))^-t."""
        factors = self.base.factors(years)
        later = years > 0
        t, v = years[later], factors[later]
        per_year = v ** (1 / t)
        made = factors.copy()
        made[later] = v * (1 + self.move.changes(1 / per_year - 1, t) * per_year) ** -t
        return made


@dataclass(frozen=True)
class ForwardMoved:
    """A curve whose forward rates of whole years are those of ``base`` and a change."""

    base: YieldCurve
    move: Move
    flat = False

    def forward(self, year: int) -> float:
        """Forward rate of the n-th year, n from 1."""
        rate = self._rate(year)
        return rate + self.move.change(rate, float(year))

    def _rate(self, year: int) -> float:
        return math.expm1(self.base.integral(year) - self.base.integral(year - 1))

    @cached_property
    def _added(self) -> list[float]:
        """What is added to H at 0, 1, 2 ... years."""
        total = [0.0]
        for year in range(1, HORIZON + 1):
            rate = self._rate(year)
            total.append(total[-1] + math.log1p(self.move.change(rate, float(year)) / (1 + rate)))
        return total

    def integral(self, t: float) -> float:
        """H'(t)."""
        year = min(int(t), HORIZON - 1)
        before, after = self._added[year], self._added[year + 1]
        return self.base.integral(t) + before + (t - year) * (after - before)

    def factor(self, t: float) -> float:
        """Discount factor v'(t)."""
        return math.exp(-self.integral(t))

    def factors(self, years: Years) -> Years:
        """Discount factors for many t, from the discount factors of whole years."""
        n = np.arange(HORIZON + 1.0)
        whole = self.base.factors(n)
        growth = whole[:-1] / whole[1:]
        steps = np.log(1 + self.move.changes(growth - 1, n[1:]) / growth)
        added = np.interp(years, n, np.concatenate(([0.0], np.cumsum(steps))))
        added = added + np.maximum(years - HORIZON, 0) * steps[-1]
        return np.asarray(self.base.factors(years) * np.exp(-added))


def check_curve(curve: SpotMoved | ForwardMoved) -> None:
    """Raise ValueError where a changed rate does not lie above -0.5, up to 1, as all rates of a basis must.

    Spot rates are looked at by quarters, forward rates by years.
    """
    if isinstance(curve, SpotMoved):
        rates = [(n / 4, curve.spot(n / 4), "spot rate at maturity") for n in range(1, 4 * HORIZON)]
    else:
        rates = [(float(n), curve.forward(n), "forward rate of year") for n in range(1, HORIZON)]
    for place, rate, what in rates:
        if not -0.5 < rate <= 1:
            raise ValueError(
                f"the {what} {place:g} becomes {rate:g}; it must lie above -0.5, up to 1: take a smaller amount"
            )
