"""The expense part of a basis: what it costs the office to run the policies."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field, field_validator, model_validator

from .inflation import Inflation
from .items import Sourced
from .rules import Rule


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
    inflation: str | Inflation | None = Field(
        None, description="growth of the amounts ('policy' and 'claim'): the name of one of the basis, or its own"
    )
    rule: list[ExpenseRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")

    @field_validator("inflation", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        return Inflation.model_validate(value) if isinstance(value, dict) else value

    @model_validator(mode="after")
    def _sensible(self) -> Expense:
        if self.inflation is not None and self.per in ("premium", "benefit"):
            raise ValueError(f"a share per {self.per} does not inflate; the {self.per} itself may")
        return self
