"""Rules: which policies an assumption is meant for, read top to bottom, first fit wins.

A rule's ``for`` table names extract columns and the values that fit. All named columns must fit. A value
stands for itself, a list for any of its members, and ``{ from = a, to = b }`` for a <= value < b.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from datetime import date
from typing import Any, TypeVar

from pydantic import Field, field_validator, model_validator

from .items import Item, Sourced

Scalar = bool | int | float | date | str


class Band(Item):
    """A half-open band of values: ``from`` belongs to it, ``to`` does not."""

    from_: int | float | date | None = Field(None, alias="from", description="lowest value that fits")
    to: int | float | date | None = Field(None, description="first value above that no longer fits")

    @model_validator(mode="after")
    def _ordered(self) -> Band:
        if self.from_ is None and self.to is None:
            raise ValueError("a band needs 'from', 'to' or both")
        return self

    def holds(self, value: Any) -> bool:
        """Say whether a value of the extract lies in the band; a missing value does not."""
        if value is None:
            return False
        above = self.from_ is None or value >= self.from_
        below = self.to is None or value < self.to
        return bool(above and below)


Condition = Band | list[Scalar] | Scalar


class Rule(Sourced):
    """The common part of every rule: the policies that it is for."""

    for_: dict[str, Condition] = Field(
        default_factory=dict,
        alias="for",
        description="extract columns and the values that fit: a value, a list, or { from, to }; absent: every policy",
    )

    @field_validator("for_", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        # A table can only be a band; saying so gives one plain error in place of one for each kind of value.
        if not isinstance(value, dict):
            return value
        return {key: Band.model_validate(part) if isinstance(part, dict) else part for key, part in value.items()}

    def fits(self, policy: Mapping[str, Any]) -> bool:
        """Say whether the rule is for this policy, a mapping of extract column to value."""
        return all(holds(condition, policy.get(column)) for column, condition in self.for_.items())


def holds(condition: Condition, value: Any) -> bool:
    """Say whether a value of the extract fits a condition."""
    if isinstance(condition, Band):
        return condition.holds(value)
    if isinstance(condition, list):
        return any(_same(member, value) for member in condition)
    return _same(condition, value)


def _same(wanted: Scalar, value: Any) -> bool:
    # True == 1 in Python, but a rule that says true is not meant for a frequency of 1.
    if isinstance(wanted, bool) != isinstance(value, bool):
        return False
    return bool(wanted == value)


AnyRule = TypeVar("AnyRule", bound=Rule)


def first_fit(rules: Sequence[AnyRule], policy: Mapping[str, Any]) -> int | None:
    """Return the position of the first rule that fits the policy, or None where no rule does."""
    for position, rule in enumerate(rules):
        if rule.fits(policy):
            return position
    return None


def columns_of(rules: Iterable[Rule]) -> list[str]:
    """Return the extract columns that the rules look at, in order of first mention."""
    return list(dict.fromkeys(column for rule in rules for column in rule.for_))
