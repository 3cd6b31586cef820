"""The extract's columns: one registry that reads, checks and documents them.

A column is required only where something in the run looks at it: ``policy_id``, ``product``, ``status``,
``birth_date`` and ``commencement_date`` always, the others where a design, a rule or a grouping names them.
Columns that are not listed here are allowed; they serve as groups and in rules.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Kind = Literal["text", "date", "years", "money", "count", "rate", "share"]


@dataclass(frozen=True)
class Column:
    """One column of the extract: what it holds and which values make sense."""

    name: str
    kind: Kind
    unit: str
    meaning: str
    low: float | None = None
    high: float | None = None
    always: bool = False


LARGEST_AMOUNT = 1e10

COLUMNS: tuple[Column, ...] = (
    Column("policy_id", "text", "", "identifier of the policy, unique in the extract", always=True),
    Column("product", "text", "", "code of the product design", always=True),
    Column("status", "text", "", "state of the policy; 'in force' is valued", always=True),
    Column("birth_date", "date", "ISO date", "date of birth of the life assured", always=True),
    Column("commencement_date", "date", "ISO date", "date from which durations count", always=True),
    Column("sex", "text", "", "F or M, where rates may lawfully depend on it"),
    Column("second_birth_date", "date", "ISO date", "date of birth of the second life of a contract on two lives"),
    Column("second_sex", "text", "", "sex of the second life"),
    Column("lives", "text", "", "who lives: both, first, second or none of two lives; none on one life"),
    Column("state", "text", "", "state at the valuation date of a contract on named states, or dead"),
    Column("term_years", "years", "years", "term of the cover", 0, 120),
    Column("premium_years", "years", "years", "years for which premiums are payable", 0, 120),
    Column("deferral_years", "years", "years", "years from commencement to the first annuity period", 0, 120),
    Column("guarantee_years", "years", "years", "years of annuity paid for certain once payment starts", 0, 60),
    Column("premium_pa", "money", "currency a year", "premium, a year", 0, LARGEST_AMOUNT),
    Column("premium_frequency", "count", "payments a year", "1, 2, 4 or 12", 1, 12),
    Column("single_premium", "money", "currency", "premium paid once", 0, LARGEST_AMOUNT),
    Column("sum_assured", "money", "currency", "amount paid on a claim, before any pattern", 0, LARGEST_AMOUNT),
    Column("annuity_pa", "money", "currency a year", "annuity, a year, before any increase", 0, LARGEST_AMOUNT),
    Column("annuity_frequency", "count", "payments a year", "1, 2, 4 or 12", 1, 12),
    Column("escalation", "rate", "a year", "yearly increase of the annuity", -0.5, 1),
)

BY_NAME = {column.name: column for column in COLUMNS}
ALWAYS = tuple(column.name for column in COLUMNS if column.always)
