"""Inflation: yearly growth of prices, at one rate, by years from a date, or by calendar year.

Prices grow month by month. In the calendar month that follows n months after the stated date they grow by
(1 + j)^(1/12), with j the rate that holds then.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, field_validator, model_validator

from .items import Item, Sourced
from .rate_table import TableError
from .table_files import read_columns

LOWEST, HIGHEST = -0.5, 1.0
"""Yearly rates lie above the former and not above the latter."""


class Inflation(Item):
    """Yearly growth of a money amount from a stated date, by whole calendar months."""

    rate: float | None = Field(None, gt=LOWEST, le=HIGHEST, description="one yearly rate of growth")
    rates: list[float] | None = Field(
        None, min_length=1, max_length=200, description="yearly rates of growth from the date on; the last one is held"
    )
    table: str | None = Field(
        None,
        description="CSV or Parquet file with columns 'year' (calendar years) and 'rate', the growth from one January "
        "to the next; the first and the last rate are held",
    )
    from_: date = Field(alias="from", description="date of the prices in which the amount is stated")

    @field_validator("rates")
    @classmethod
    def _in_range(cls, rates: list[float] | None) -> list[float] | None:
        for rate in rates or ():
            if not LOWEST < rate <= HIGHEST:
                raise ValueError(f"the rate {rate:g} must lie above {LOWEST:g}, up to {HIGHEST:g}; 3 % is 0.03")
        return rates

    @model_validator(mode="after")
    def _one_form(self) -> Inflation:
        if sum(form is not None for form in (self.rate, self.rates, self.table)) != 1:
            raise ValueError("inflation needs one of 'rate', 'rates' and 'table'")
        return self


class NamedInflation(Inflation, Sourced):
    """Inflation under a name, by which expense items and the increases of designs call it."""

    name: str = Field(min_length=1, description="name by which expense items and designs call it")


@dataclass(frozen=True)
class Prices:
    """An inflation with its table read: the level of prices by month, 1 at the stated date.

    rates: by years from the date, or by calendar year from ``first_year`` where there is one.
    """

    rates: tuple[float, ...]
    year: int
    month: int
    first_year: int | None = None

    def rate(self, n: int) -> float:
        """Return the yearly rate that holds in the month that begins n months after the date (before it: n < 0)."""
        place = n // 12 if self.first_year is None else self.year + (self.month - 1 + n) // 12 - self.first_year
        return self.rates[min(max(place, 0), len(self.rates) - 1)]

    def months(self, year: int, month: int) -> int:
        """Return the calendar months from the date to a month."""
        return 12 * (year - self.year) + month - self.month

    def level(self, n: int) -> float:
        """Return the level n months after the date, n < 0 before it, stretch by stretch of one rate."""
        level, at, sign = 1.0, min(n, 0), -1 if n < 0 else 1
        end = max(n, 0)
        begins = 0 if self.first_year is None else self.month - 1
        while at < end:
            stretch = min(end, at + 12 - (begins + at) % 12) - at
            if len(self.rates) == 1:
                stretch = end - at
            level *= (1 + self.rate(at)) ** (sign * stretch / 12)
            at += stretch
        return float(level)

    def levels(self, n: NDArray[np.int64]) -> NDArray[np.float64]:
        """Return the levels of many months, shape of ``n``."""
        if len(self.rates) == 1:
            # Python's powers: those of arrays may differ in the last bit from one processor to another.
            return np.array([(1 + self.rates[0]) ** (int(m) / 12) for m in n.ravel()]).reshape(n.shape)
        low, high = min(0, int(n.min())), max(0, int(n.max()))
        months = np.arange(low, high)
        first = months // 12
        if self.first_year is not None:
            first = self.year - self.first_year + (self.month - 1 + months) // 12
        forces = np.log1p(np.array(self.rates))[np.clip(first, 0, len(self.rates) - 1)] / 12
        grown = np.concatenate(([0.0], np.cumsum(forces)))
        return np.asarray(np.exp(grown[n - low] - grown[-low]))


def read_prices(document: Inflation, folder: Path) -> Prices:
    """Read the table of an inflation. Raises TableError."""
    year, month = document.from_.year, document.from_.month
    if document.table is None:
        rates = document.rates if document.rates is not None else [document.rate or 0.0]
        return Prices(tuple(rates), year, month)
    path = folder / document.table
    columns = read_columns(path)
    years, rates = columns.numbers("year"), columns.numbers("rate")
    for row, (one, rate) in enumerate(zip(years, rates, strict=True)):
        place = f"{path}, {columns.places[row]}"
        if one != years[0] + row or not 1900 <= one <= 2200 or one != int(one):
            raise TableError(f"{place}: year {one:g}; calendar years go one by one, within 1900 to 2200")
        if not LOWEST < rate <= HIGHEST:
            raise TableError(f"{place}: rate {rate:g} must lie above {LOWEST:g}, up to {HIGHEST:g}; 3 % is 0.03")
    if not rates:
        raise TableError(f"{path}: no rows; a table of inflation needs a rate for a year at least")
    return Prices(tuple(rates), year, month, int(years[0]))
