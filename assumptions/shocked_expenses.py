"""Items of expense after a change of their amounts, or of inflation from the valuation date on."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from .expenses import Expense, ExpenseRule
from .inflation import HIGHEST, LOWEST, Prices
from .shocks import Change
from .split_rules import split

LONGEST = 2400
"""Months from the date of the prices for which changed rates are looked at."""


@dataclass(frozen=True)
class InflationMove:
    """A change of yearly rates of inflation in the months from ``first`` up to ``end`` (12 * year + month - 1)."""

    how: str
    amount: float
    first: int
    end: float

    def rate(self, rate: float, month: int) -> float:
        """Return the rate of a month after the change."""
        if not self.first <= month < self.end:
            return rate
        return {"absolute": rate + self.amount, "relative": rate * (1 + self.amount)}.get(self.how, self.amount)


@dataclass(frozen=True)
class MovedPrices(Prices):
    """Prices whose growth changes: moves one after the other, month by month."""

    moves: tuple[InflationMove, ...] = ()

    def rate(self, n: int) -> float:
        """Return the yearly rate that holds in the month that begins n months after the date."""
        rate, month = super().rate(n), 12 * self.year + self.month - 1 + n
        for move in self.moves:
            rate = move.rate(rate, month)
        return rate

    def level(self, n: int) -> float:
        """Return the level n months after the date, n < 0 before it, month by month."""
        months = range(n) if n >= 0 else range(n, 0)
        level = math.prod((1 + self.rate(month)) ** (1 / 12) for month in months)
        return float(level if n >= 0 else 1 / level)

    def levels(self, n: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the levels of many months, shape of ``n``."""
        low, high = min(0, int(n.min())), max(0, int(n.max()))
        forces = np.log1p(np.array([self.rate(month) for month in range(low, high)])) / 12
        grown = np.concatenate(([0.0], np.cumsum(forces)))
        return np.asarray(np.exp(grown[n - low] - grown[-low]))


def changed_rule(rule: ExpenseRule, change: Change) -> ExpenseRule:
    """Return a rule with both amounts changed, never below 0."""
    amount = change.amount or 0.0
    how: Callable[[float], float] = {
        "absolute": lambda held: max(0.0, held + amount),
        "relative": lambda held: held * (1 + amount),
    }.get(change.how, lambda _: amount)
    return rule.model_copy(update={"first_year": how(rule.first_year), "later_years": how(rule.later_years)})


def changed_item(item: Expense, change: Change) -> Expense:
    """Return an item with its amounts changed for the policies that the change is for."""
    rules, pieces = split(item.rule, change.for_)
    made = [changed_rule(rule, change) if piece.changes else rule for rule, piece in zip(rules, pieces, strict=True)]
    return item.model_copy(update={"rule": made})


def inflated(item: Expense, prices: Prices | None, change: Change, day: date) -> Prices | None:
    """Return the level of prices of an item with its growth changed; day: the one after the valuation date.

    An item of amounts without inflation grows at 0. Raises ValueError where a rate is none any more.
    """
    if item.per in ("premium", "benefit") or (prices is None and change.how == "relative"):
        return prices
    held = prices or Prices((0.0,), day.year, day.month)
    first = 12 * day.year + day.month - 1 + change.from_months
    end = math.inf if change.for_months is None else first + change.for_months
    move = InflationMove(change.how, change.amount or 0.0, first, end)
    moves = (*(held.moves if isinstance(held, MovedPrices) else ()), move)
    made = MovedPrices(held.rates, held.year, held.month, held.first_year, moves)
    for n in range(LONGEST):
        rate = made.rate(n)
        if not LOWEST < rate <= HIGHEST:
            raise ValueError(
                f"expense '{item.name}': inflation becomes {rate:g}; it must lie above {LOWEST:g}, up to {HIGHEST:g}"
            )
    return made
