"""The lapse part of a basis: how many policies leave by choice, by policy year."""

from __future__ import annotations

from typing import Literal

from pydantic import Field, field_validator, model_validator

from .items import Item
from .rules import Rule


class LapseRule(Rule):
    """Yearly lapse rates by policy year for the policies that fit; the last rate is held."""

    rates: list[float] | None = Field(None, min_length=1, description="yearly rates by policy year, the last one held")
    table: str | None = Field(None, description="CSV or Parquet file with columns 'year' (from 1) and 'rate'")
    multiple: float = Field(1.0, ge=0, le=100, description="factor on every rate, to at most 1")
    until: float | str | None = Field(
        None,
        description="years from commencement after which nobody lapses: a number or an extract column; "
        "absent: lapses never stop",
    )

    @field_validator("rates")
    @classmethod
    def _shares(cls, rates: list[float] | None) -> list[float] | None:
        for year, rate in enumerate(rates or (), 1):
            if not 0 <= rate <= 1:
                raise ValueError(f"the rate of policy year {year} is {rate:g}; it must lie between 0 and 1")
        return rates

    @model_validator(mode="after")
    def _one_source(self) -> LapseRule:
        if (self.rates is None) == (self.table is None):
            raise ValueError("a lapse rule needs either 'rates' or 'table'")
        return self


class Lapse(Item):
    """When lapses fall, how they share a step with deaths, and the rules."""

    timing: Literal["each step", "anniversaries"] = Field(
        "each step", description="lapses at the end of every step, or only at policy anniversaries"
    )
    competing: Literal["lapses at the end", "dependent rates"] = Field(
        "lapses at the end",
        description="deaths through the step and lapses at its end from the survivors; or dependent rates from "
        "independent ones, each decrement uniform in its single table",
    )
    rule: list[LapseRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")


def yearly_lapse(rule: LapseRule, rates: list[float], policy_year: int) -> float:
    """Return the yearly lapse rate of a policy year, counted from 0, before ``until`` is looked at."""
    return min(1.0, rule.multiple * rates[min(policy_year, len(rates) - 1)])
