"""The mortality part of a basis: which rates a policy's life is subject to."""

from __future__ import annotations

from typing import Any, Literal, NamedTuple, Protocol

from pydantic import Field, field_validator

from .improvement import Improvement
from .items import Item
from .laws import Law
from .rules import Rule

AgeBasis = Literal["exact", "last birthday", "nearest birthday", "next birthday"]
Fractions = Literal["constant force", "uniform deaths", "Balducci"]


class Rates(Protocol):
    """Yearly rates by age at entry and completed years since, from a table or a law."""

    @property
    def first_age(self) -> int:
        """Lowest age at entry."""

    @property
    def final_age(self) -> int:
        """Age at whose end the rates stop."""

    @property
    def closed(self) -> bool:
        """Whether nobody is left at ``final_age`` (the last rate is 1)."""

    @property
    def whole_ages_only(self) -> bool:
        """Whether age at entry must be a whole number."""

    def rate(self, entry_age: float, duration: int) -> float:
        """Rate of the year that starts ``duration`` years after entry at ``entry_age``."""


class TableFile(Item):
    """One table in a file that holds several, or whose columns need a word of explanation."""

    file: str = Field(description="CSV, Parquet or XTbML file, relative to the document")
    table: int | str | None = Field(None, description="which table of an XTbML file: its number in the file, from 1")
    column: str | None = Field(None, description="which column of a CSV or Parquet file holds the ultimate rates")
    select_by: Literal["entry age", "attained age"] | None = Field(
        None, description="what the age beside a row of select rates is; needed where a file has select rates"
    )


class MortalityRule(Rule):
    """Rates for the policies that fit, with their adjustments.

    The rate that counts is  q = min(1, multiple * q_table * R + extra)  with the table entered at the age at
    entry plus ``added_years``; R is the factor of improvement.
    """

    table: str | TableFile | Law = Field(description="a file of rates, one table of it, or a law")
    multiple: float = Field(1.0, ge=0, le=100, description="factor on every rate")
    added_years: int = Field(0, ge=-50, le=50, description="years added to the age before the table is entered")
    extra: float = Field(0.0, ge=0, le=1, description="flat addition to every yearly rate")
    improvement: Improvement | None = Field(
        None, description="how the rates change with calendar time; absent: not at all"
    )
    close: bool = Field(
        False,
        description="take the rate at the last age as 1 where the table ends below 1; "
        "otherwise a policy that outlives the table is an exception",
    )

    @field_validator("table", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        # Deciding by the telling key gives one plain error in place of one for each member of the union.
        if isinstance(value, dict):
            return Law.model_validate(value) if "law" in value else TableFile.model_validate(value)
        return value


class Mortality(Item):
    """How age is counted, how mortality runs within a year of age, and the rules."""

    age: AgeBasis = Field("exact", description="age at commencement that enters the tables")
    fractions: Fractions = Field("constant force", description="mortality within a year of age")
    common_shock: float = Field(
        0.0,
        ge=0,
        le=1,
        description="force, a year, of a cause that kills both lives of a contract on two lives at once; it is part of "
        "the rates of each. At 0 they are independent",
    )
    ratings: bool = Field(
        False,
        description="whether the ratings of the policies count: the extract's columns 'rating_multiple', 'rating_age' "
        "and 'rating_extra', their '..._years', and 'second_...' for the second life. At false those columns are not "
        "looked at",
    )
    rule: list[MortalityRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")


class Rating(NamedTuple):
    """What a life's own rating does to the rates of a rule: nothing, as it stands here.

    multiple: factor on every rate; added_years: to the age before the table is entered; extra: addition to every
    yearly rate (not per mille).
    """

    multiple: float = 1.0
    added_years: int = 0
    extra: float = 0.0


STANDARD = Rating()


def adjusted_rate(
    rule: MortalityRule,
    rates: Rates,
    entry_age: float,
    duration: int,
    improved: float = 1.0,
    rating: Rating = STANDARD,
) -> float:
    """Return the yearly rate that counts for a life under a rule.

    entry_age: age at commencement, before ``added_years``; duration: completed years since; improved: factor of
    improvement; rating: the life's own.
    Raises ValueError where the table has no rate and is not closed.
    """
    entered = entry_age + rule.added_years + rating.added_years
    if entered + duration >= rates.final_age - 1 and (rule.close or rates.closed):
        return 1.0
    multiple, extra = rating.multiple * rule.multiple, rule.extra + rating.extra
    return min(1.0, multiple * rates.rate(entered, duration) * improved + extra)
