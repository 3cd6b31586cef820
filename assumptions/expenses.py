"""The expense part of a basis: what it costs the office to run the policies."""

from __future__ import annotations

from datetime import date
from typing import Literal

from pydantic import Field, model_validator

from .items import Item, Sourced
from .rules import Rule


class Inflation(Item):
    """Yearly growth of a money amount from a stated date, by whole calendar months."""

    rate: float = Field(gt=-0.5, le=1, description="yearly rate of growth")
    from_: date = Field(alias="from", description="date of the prices in which the amount is stated")

    def factor(self, year: int, month: int) -> float:
        """Growth up to a calendar month: (1 + rate)^(n / 12), n months after ``from``, 1 before it."""
        months = 12 * (year - self.from_.year) + month - self.from_.month
        return float((1 + self.rate) ** (max(0, months) / 12))


class ExpenseRule(Rule):
    """What the policies that fit cost, in the first policy year and later."""

    first_year: float = Field(ge=0, description="amount or share in the first policy year")
    later_years: float = Field(ge=0, description="amount or share in later policy years")


class Expense(Sourced):
    """One item of expense. Every item counts; within one, the first rule that fits."""

    name: str = Field(min_length=1, description="name in cash flows and reports")
    per: Literal["policy", "premium", "benefit", "claim"] = Field(
        description="'policy': a yearly amount while the contract runs; 'premium', 'benefit': a share of each payment; "
        "'claim': an amount for each benefit paid on death or once"
    )
    a_year: Literal[1, 2, 4, 12] = Field(12, description="how often a year a 'policy' amount falls due, in advance")
    inflation: Inflation | None = Field(None, description="growth of the amounts ('policy' and 'claim')")
    rule: list[ExpenseRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")

    @model_validator(mode="after")
    def _sensible(self) -> Expense:
        if self.inflation is not None and self.per in ("premium", "benefit"):
            raise ValueError(f"a share per {self.per} does not inflate; the {self.per} itself may")
        return self
