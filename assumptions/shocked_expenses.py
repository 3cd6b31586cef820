"""Items of expense after a change of their amounts, or of inflation from the valuation date on."""

from __future__ import annotations

from collections.abc import Callable
from datetime import date

from pydantic import Field

from .expenses import Expense, ExpenseRule, Inflation
from .shocks import Change
from .split_rules import split


class SteppedInflation(Inflation):
    """Inflation whose rate changes with calendar time: ``rate`` until the first of ``later``."""

    later: tuple[tuple[int, float], ...] = Field(description="month (12 * year + month - 1) and rate from it on")

    def factor(self, year: int, month: int) -> float:
        """Growth up to a calendar month: the product of (1 + rate)^(n / 12) over the n months at each rate."""
        start, until = 12 * self.from_.year + self.from_.month - 1, 12 * year + month - 1
        grown, begin, rate = 1.0, start, self.rate
        for turn, next_rate in (*self.later, (until, self.rate)):
            end = min(max(turn, start), until)
            grown *= (1 + rate) ** (max(0, end - begin) / 12)
            begin, rate = max(begin, end), next_rate
        return float(grown)

    def rate_at(self, month: int) -> float:
        """Rate of the month that begins with month ``month``."""
        return next((rate for turn, rate in reversed(self.later) if turn <= month), self.rate)


def changed_rule(rule: ExpenseRule, change: Change) -> ExpenseRule:
    """Return a rule with both amounts changed, never below 0."""
    amount = change.amount or 0.0
    how: Callable[[float], float] = {
        "absolute": lambda held: max(0.0, held + amount),
        "relative": lambda held: held * (1 + amount),
    }.get(change.how, lambda _: amount)
    return rule.model_copy(
        update={"first_year": how(rule.first_year), "later_years": how(rule.later_years)}
    )


def changed_item(item: Expense, change: Change) -> Expense:
    """Return an item with its amounts changed for the policies that the change is for."""
    rules, pieces = split(item.rule, change.for_)
    made = [
        changed_rule(rule, change) if piece.changes else rule for rule, piece in zip(rules, pieces, strict=True)
    ]
    return item.model_copy(update={"rule": made})


def inflated_item(item: Expense, change: Change, today: int, day: date) -> Expense:
    """Return an item with its inflation changed; today: the month of ``day``, the day after the valuation date.

    An item of amounts without inflation grows at 0. Raises ValueError where the rate is none any more.
    """
    if item.per in ("premium", "benefit") or (item.inflation is None and change.how == "relative"):
        return item
    held = item.inflation or Inflation.model_validate({"rate": 0.0, "from": day.replace(day=1)})
    before = held if isinstance(held, SteppedInflation) else None
    first = today + change.from_months
    turns = {first, *(turn for turn, _ in (before.later if before else ()))}
    end = None if change.for_months is None else first + change.for_months
    if end is not None:
        turns.add(end)
    amount = change.amount or 0.0

    def rate_of(month: int) -> float:
        rate = before.rate_at(month) if before else held.rate
        if month < first or (end is not None and month >= end):
            return rate
        rate = {"absolute": rate + amount, "relative": rate * (1 + amount)}.get(change.how, amount)
        if not -0.5 < rate <= 1:
            raise ValueError(f"expense '{item.name}': inflation becomes {rate:g}; it must lie above -0.5, up to 1")
        return rate

    later = tuple((turn, rate_of(turn)) for turn in sorted(turns))
    made = SteppedInflation.model_validate({"rate": held.rate, "from": held.from_, "later": later})
    return item.model_copy(update={"inflation": made})
