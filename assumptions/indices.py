"""Indices that increases of payments follow: prices, wages, a rate that the office declares."""

from __future__ import annotations

from pydantic import Field, field_validator, model_validator

from .items import Sourced

LOWEST, HIGHEST = -0.5, 1.0
"""Range of a yearly rate of increase."""


class Index(Sourced):
    """An assumption of how an index grows: one rate, or a rate for each calendar year."""

    name: str = Field(min_length=1, description="what the designs call it")
    flat: float | None = Field(None, gt=LOWEST, le=HIGHEST, description="the same yearly rate for all years")
    years: dict[str, float] | None = Field(
        None,
        min_length=1,
        description="rate of the increases that fall into each calendar year, consecutive; the first and last are held",
    )

    @field_validator("years")
    @classmethod
    def _consecutive(cls, years: dict[str, float] | None) -> dict[str, float] | None:
        if years is None:
            return None
        if not all(len(year) == 4 and year.isascii() and year.isdigit() for year in years):
            raise ValueError("the keys of 'years' are calendar years of four digits, such as 2027")
        known = sorted(map(int, years))
        if known != list(range(known[0], known[-1] + 1)):
            raise ValueError("'years' must be consecutive calendar years")
        for year, rate in years.items():
            if not LOWEST < rate <= HIGHEST:
                raise ValueError(f"the rate {rate} of {year} is outside {LOWEST} to {HIGHEST}")
        return years

    @model_validator(mode="after")
    def _one_form(self) -> Index:
        if (self.flat is None) == (self.years is None):
            raise ValueError("an index needs one of 'flat' and 'years'")
        return self

    def rate(self, year: int) -> float:
        """Return the yearly rate of the increases that fall into a calendar year."""
        if self.years is None:
            return self.flat or 0.0
        known = sorted(map(int, self.years))
        return self.years[str(min(max(year, known[0]), known[-1]))]

    @property
    def listed(self) -> tuple[int, tuple[float, ...]]:
        """The first year, and the rates from it on; the first and the last hold for what lies outside."""
        if self.years is None:
            return 0, (self.flat or 0.0,)
        return min(map(int, self.years)), tuple(self.years[year] for year in sorted(self.years))
