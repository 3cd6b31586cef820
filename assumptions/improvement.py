"""Improvement of mortality with calendar time: from the rates of a base year to those of any later one.

A rate of the base year b becomes in year Y the rate times (1 - f(x, b+1)) ... (1 - f(x, Y)), where f(x, y) is the
yearly improvement at age x from year y - 1 to y. A table may instead hold the reduction factors themselves. Rates
of the base year and before are taken as they stand.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, field_validator, model_validator

from .items import Item, Sourced
from .rate_table import TableError
from .select_rows import consecutive_ages
from .table_files import is_xml, read_columns
from .xtbml import read_xtbml
from .xtbml_scales import scale_values

LONGEST = 300
"""Years after the base year for which factors are made; later ones stand still."""

OLDEST = 160
"""Ages for which factors are made."""


class LongTerm(Item):
    """Improvement that goes over, in a straight line, into one rate for all ages."""

    rate: float = Field(ge=-0.2, le=0.2, description="yearly improvement in the long run")
    years: int = Field(ge=1, le=100, description="years until it is reached")
    from_: int | None = Field(
        None, alias="from", ge=1900, le=2200, description="last calendar year before that; absent: the table's last"
    )


class ScaleFile(Item):
    """One scale of an XTbML file that holds several."""

    file: str = Field(description="XTbML file, relative to the document")
    table: int | str = Field(description="which table of the file: its number, from 1, or its title")


class Improvement(Sourced):
    """Improvement of the rates of a mortality rule: a table by age, or by age and calendar year, or one rate."""

    table: str | ScaleFile | None = Field(
        None,
        description="CSV or Parquet file with columns 'age' and 'rate', or 'age' and one for each calendar year; or an "
        "XTbML file with a projection scale by age, or by age and calendar year",
    )
    rate: float | None = Field(None, ge=-0.2, le=0.2, description="one yearly improvement for all ages and years")
    base_year: int = Field(ge=1900, le=2200, description="calendar year that the mortality rates belong to")
    holds: Literal["yearly improvements", "yearly changes", "reduction factors"] = Field(
        "yearly improvements",
        description="what the table holds: improvement from the year before; change from the year before, negative "
        "where mortality falls; or the share of the base year's rate that is left",
    )
    multiple: float = Field(1.0, ge=0, le=10, description="factor on every yearly improvement")
    long_term: LongTerm | None = Field(None, description="where improvement goes after the table; absent: held")

    @field_validator("table", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        return ScaleFile.model_validate(value) if isinstance(value, dict) else value

    @property
    def file(self) -> str | None:
        """The file of the table, as the document names it."""
        return self.table.file if isinstance(self.table, ScaleFile) else self.table

    @model_validator(mode="after")
    def _consistent(self) -> Improvement:
        if (self.table is None) == (self.rate is None):
            raise ValueError("an improvement needs one of 'table' and 'rate'")
        if self.holds == "yearly changes" and self.table is None:
            raise ValueError("'yearly changes' is what a 'table' holds; beside 'rate' leave 'holds' out")
        if self.holds == "reduction factors" and (self.table is None or self.long_term or self.multiple != 1):
            raise ValueError("reduction factors need a 'table', and neither 'multiple' nor 'long_term'")
        return self


@dataclass(frozen=True)
class Scale:
    """An improvement with its table read.

    values: shape (ages, years), ages from ``first_age``; without years, the only column holds for all.
    """

    document: Improvement
    first_age: int = 0
    years: tuple[int, ...] = ()
    values: NDArray[np.float64] = field(default_factory=lambda: np.zeros((1, 1)))

    def yearly(self, age: int, year: int) -> float:
        """Return f(x, y), the improvement at an age from the year before; edges of the table are held."""
        long_term = self.document.long_term
        last = self.years[-1] if self.years else self.document.base_year
        if long_term is not None:
            last = long_term.from_ or last
            if year > last:
                share = min(1.0, (year - last) / long_term.years)
                return (1 - share) * self._held(age, last) + share * long_term.rate
        return self._held(age, year)

    def factor(self, age: int, year: int) -> float:
        """Return the share of the base year's rate that is left at an age in a calendar year."""
        base = self.document.base_year
        if year <= base:
            return 1.0
        if self.document.holds == "reduction factors":
            return self._cell(age, year)
        left = 1.0
        for later in range(base + 1, min(year, base + LONGEST) + 1):
            left *= 1 - self.yearly(age, later)
        return left

    def cohort(self, age: int, year: int, count: int) -> NDArray[np.float64]:
        """Return the factors of a life in the years of age from ``age``, the first of which begins in ``year``."""
        ages = np.clip(age + np.arange(count), 0, OLDEST)
        passed = np.clip(year + np.arange(count) - self.document.base_year, 0, LONGEST)
        return self._factors[ages, passed]

    @cached_property
    def _factors(self) -> NDArray[np.float64]:
        """Factors by age and years since the base year, both from 0."""
        base = self.document.base_year
        years = np.arange(base + 1, base + LONGEST + 1)
        ones = np.ones((OLDEST + 1, 1))
        if self.document.holds == "reduction factors":
            return np.hstack((ones, self._cells(years)))
        yearly = self.document.multiple * (
            self._cells(years) if self.document.rate is None else self.document.rate * ones
        )
        yearly = np.broadcast_to(yearly, (OLDEST + 1, LONGEST)).copy()
        long_term = self.document.long_term
        if long_term is not None:
            last = long_term.from_ or (self.years[-1] if self.years else base)
            # What is left in the last year before goes over into the long run; that year may be the base year.
            before = yearly[:, max(0, last - base - 1)] if self.document.rate is not None else (
                self.document.multiple * self._cells(np.array([last]))[:, 0]
            )  # fmt: skip
            share = np.clip((years - last) / long_term.years, 0.0, 1.0)
            blended = (1 - share) * before[:, None] + share * long_term.rate
            yearly = np.where(years > last, blended, yearly)
        return np.hstack((ones, np.cumprod(1 - yearly, axis=1)))

    def _cells(self, years: NDArray[np.int64]) -> NDArray[np.float64]:
        """What the table holds for all ages, in some years."""
        rows = np.clip(np.arange(OLDEST + 1) - self.first_age, 0, len(self.values) - 1)
        columns = np.clip(years - self.years[0], 0, len(self.years) - 1) if self.years else np.zeros(len(years), int)
        return np.asarray(self.values[np.ix_(rows, columns)])

    def _held(self, age: int, year: int) -> float:
        if self.document.rate is not None:
            return self.document.multiple * self.document.rate
        return self.document.multiple * self._cell(age, year)

    def _cell(self, age: int, year: int) -> float:
        row = min(max(age - self.first_age, 0), len(self.values) - 1)
        column = min(max(year - self.years[0], 0), len(self.years) - 1) if self.years else 0
        return float(self.values[row, column])


def read_scale(document: Improvement, folder: Path) -> Scale:
    """Read the table of an improvement. Raises TableError."""
    if document.file is None:
        return Scale(document)
    path = folder / document.file
    if is_xml(path):
        wanted = document.table.table if isinstance(document.table, ScaleFile) else None
        first, years, values = scale_values(str(path), read_xtbml(path), wanted)
        places = [f"{path}, age {first + row}" for row in range(len(values))]
    else:
        if isinstance(document.table, ScaleFile):
            raise TableError(f'{path}: only an XTbML file holds several tables; write table = "{document.file}"')
        first, years, values, places = _columns(path)
    if not years and document.holds == "reduction factors":
        raise TableError(f"{path}: reduction factors need a column for each calendar year")
    low, high = (0.0, 10.0) if document.holds == "reduction factors" else (-0.2, 0.2)
    for row, column in np.argwhere((values < low) | (values > high))[:1].tolist():
        when = f", year {years[column]}" if years else ""
        figure = values[row, column]
        raise TableError(f"{places[row]}{when}: {figure:g} does not lie between {low:g} and {high:g}")
    return Scale(document, first, years, -values if document.holds == "yearly changes" else values)


def _columns(path: Path) -> tuple[int, tuple[int, ...], NDArray[np.float64], list[str]]:
    """First age, calendar years, figures and the place of each row, from a CSV or Parquet file."""
    columns = read_columns(path)
    places = [f"{path}, {place}" for place in columns.places]
    first = consecutive_ages(columns.numbers("age"), places)
    names = sorted(name for name in columns.cells if name.isdigit())
    years = tuple(int(name) for name in names)
    if years and years != tuple(range(years[0], years[-1] + 1)):
        raise TableError(f"{path}: the columns of calendar years leave some out; give every year from first to last")
    if years and "rate" in columns.cells:
        raise TableError(f"{path}: both 'rate' and columns of calendar years; remove one")
    values = np.array([columns.numbers(name) for name in names or ["rate"]]).T
    return first, years, values, places
