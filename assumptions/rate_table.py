"""Yearly rates by age at entry and duration, as a table holds them."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Rows = NDArray[np.float64]


class TableError(ValueError):
    """A table that cannot be read, or has no rate where one is asked for; says file, place and remedy."""


def _no_rows() -> Rows:
    return np.empty((0, 0))


@dataclass(frozen=True, eq=False)
class RateTable:
    """Select rates, ultimate rates or both; a missing rate is NaN inside and an error when asked for.

    title: what the table is called; ultimate: rates by attained age from ``ultimate_from``, shape (ages,);
    select: rates by entry age from ``select_from`` and duration from 0, shape (entry ages, select years);
    kind: what the rates are of, in the words of the file ("Insured Lives Mortality"), or empty;
    reference: where the figures come from; file: where they were read.

    Raises TableError for rates outside 0 to 1 and for a table without any rate to enter with.
    """

    title: str
    ultimate: Rows
    ultimate_from: int
    select: Rows = field(default_factory=_no_rows)
    select_from: int = 0
    kind: str = ""
    reference: str = ""
    file: str = ""

    # Rates stand at whole ages only; an exact age is taken care of by whoever asks (mortality within a year).
    whole_ages_only = True

    def __post_init__(self) -> None:
        for rows in (self.ultimate, self.select):
            wrong = rows[(rows < 0) | (rows > 1)]
            if wrong.size:
                raise TableError(f"{self.name}: rate {wrong[0]:g} does not lie between 0 and 1")
            rows.flags.writeable = False
        if not np.isfinite(self._entry_rates).any():
            raise TableError(f"{self.name}: no rate to begin with; a table needs one in the first year after entry")

    @property
    def name(self) -> str:
        """Title and file, for messages."""
        return f"{self.title} ({self.file})" if self.file and self.file != self.title else self.title

    @cached_property
    def select_years(self) -> int:
        """Length of the select period in years, 0 where there are ultimate rates only."""
        return int(self.select.shape[1]) if self.select.size else 0

    @property
    def _entry_rates(self) -> Rows:
        # What a life that enters meets in its first year.
        return self.select[:, 0] if self.select_years else self.ultimate

    @cached_property
    def first_age(self) -> int:
        """Lowest age at entry."""
        start = self.select_from if self.select_years else self.ultimate_from
        return start + int(np.flatnonzero(np.isfinite(self._entry_rates))[0])

    @cached_property
    def final_age(self) -> int:
        """Age at whose end the rates stop: the last age that has a rate, plus 1."""
        if len(self.ultimate):
            return self.ultimate_from + len(self.ultimate)
        rows, columns = np.nonzero(np.isfinite(self.select))
        return self.select_from + int((rows + columns).max()) + 1

    @cached_property
    def closed(self) -> bool:
        """Whether nobody is left at ``final_age``: the last rate is 1."""
        if len(self.ultimate):
            return bool(self.ultimate[-1] == 1)
        rows, columns = np.nonzero(np.isfinite(self.select))
        last = self.select_from + rows + columns == self.final_age - 1
        return bool((self.select[rows[last], columns[last]] == 1).all())

    def rate(self, entry_age: float, duration: int) -> float:
        """Rate q_[x]+t of the year that starts ``duration`` = t years after entry at whole age x.

        Within the select period the select rate, after it the ultimate rate at age x + t. Raises TableError
        where the table has no such rate.
        """
        select, ultimate = self._lists
        value = math.nan
        if not entry_age % 1 and duration >= 0 and entry_age >= self.first_age:
            entry = int(entry_age)
            if duration < self.select_years:
                row = entry - self.select_from
                if row < len(select):
                    value = select[row][duration]
            else:
                place = entry + duration - self.ultimate_from
                if 0 <= place < len(ultimate):
                    value = ultimate[place]
        if math.isnan(value):
            raise TableError(self._nothing_at(entry_age, duration))
        return value

    @cached_property
    def _lists(self) -> tuple[list[list[float]], list[float]]:
        # One rate at a time, a list answers several times faster than an array.
        return self.select.tolist(), self.ultimate.tolist()

    def rates_from(self, entry_age: int, years: int) -> Rows:
        """Rates of the first ``years`` years after entry at a whole age, shape (years,).

        The same figures as ``rate`` for durations 0 to years - 1, and the same errors.
        """
        rates = np.full(max(years, 0), np.nan)
        if not entry_age % 1 and entry_age >= self.first_age:
            row = int(entry_age) - self.select_from
            if self.select_years and row < len(self.select):
                chosen = self.select[row, : len(rates)]
                rates[: len(chosen)] = chosen
            # Ultimate rates follow the select period, or begin later where the table has a gap.
            start = max(self.select_years, self.ultimate_from - int(entry_age))
            place = int(entry_age) + start - self.ultimate_from
            later = self.ultimate[place : place + max(0, len(rates) - start)]
            rates[start : start + len(later)] = later
        missing = np.flatnonzero(np.isnan(rates))
        if missing.size:
            raise TableError(self._nothing_at(entry_age, int(missing[0])))
        return rates

    def survivors(self, radix: float = 1.0) -> Rows:
        """Numbers living l_x at whole ages ``ultimate_from`` to ``final_age``, the first being ``radix``.

        l_x+1 = l_x (1 - q_x) with the ultimate rates; shape (ultimate ages + 1,). Raises TableError where the
        table has no ultimate rates or one of them is missing.
        """
        if not len(self.ultimate):
            raise TableError(f"{self.name}: no ultimate rates, so no numbers living; name a table with them")
        missing = np.flatnonzero(np.isnan(self.ultimate))
        if missing.size:
            raise TableError(f"{self.name}: no rate at age {self.ultimate_from + missing[0]}; fill it in")
        return radix * np.concatenate([[1.0], np.cumprod(1 - self.ultimate)])

    def _nothing_at(self, entry_age: float, duration: int) -> str:
        held = []
        if self.select_years:
            last = self.select_from + int(np.flatnonzero(np.isfinite(self.select[:, 0]))[-1])
            held.append(f"select rates for entry at {self.first_age} to {last}, {self.select_years} years")
        if len(self.ultimate):
            last = self.ultimate_from + len(self.ultimate) - 1
            held.append(f"ultimate rates at ages {self.ultimate_from} to {last}")
        whole = "; a table is entered at whole ages" if entry_age % 1 else ""
        return (
            f"{self.name}: no rate for entry at age {entry_age:g}, duration {duration}{whole}; "
            f"it holds {' and '.join(held)}"
        )
