"""Rows of figures in order: whole consecutive ages, rates between 0 and 1, select rows by entry age."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np

from .rate_table import Rows, TableError

SelectBy = Literal["entry age", "attained age"]

OLDEST = 150
"""Highest age that a table may hold."""


def consecutive_ages(ages: Sequence[float], places: Sequence[str]) -> int:
    """Return the first of ages that must be whole, from 0 to OLDEST, each one more than the one before.

    places: what to call each age's place in a message, file included. Raises TableError.
    """
    for row, age in enumerate(ages):
        if age % 1 or not 0 <= age <= OLDEST:
            raise TableError(f"{places[row]}: age {age:g}; ages must be whole numbers from 0 to {OLDEST}")
        if row and age != ages[row - 1] + 1:
            said = f"age {age:g} follows age {ages[row - 1]:g}"
            raise TableError(f"{places[row]}: {said}; a table needs every age once, in order")
    return int(ages[0])


def check_rate(value: float, place: str) -> None:
    """Raise TableError for a rate that does not lie between 0 and 1; a missing one (NaN) passes."""
    if not 0 <= value <= 1 and not np.isnan(value):
        hint = "; numbers living, amounts and rates per 1000 must be turned into yearly rates first"
        raise TableError(f"{place}: rate {value:g} does not lie between 0 and 1{hint if value > 1 else ''}")


def keying(file: str, said: SelectBy | None, asked: SelectBy | None) -> SelectBy:
    """Decide what the ages beside select rows are: what the file says, else what the document says.

    "entry age": row x, column t is q_[x]+t; "attained age": row x, column t is q_[x-t]+t. Raises TableError
    where neither says it, and where they contradict each other.
    """
    if said and asked and said != asked:
        raise TableError(
            f"{file}: select rows go by {said}, as the file says, but 'select_by' is '{asked}'; leave it out"
        )
    by = said or asked
    if by is None:
        raise TableError(
            f"{file}: select rates, but the file does not say which age stands beside a row; state select_by "
            "= 'entry age' (row x, column t: q_[x]+t) or 'attained age' (row x, column t: q_[x-t]+t)"
        )
    return by


def by_entry_age(rows: Rows, first_age: int, select_by: SelectBy) -> tuple[Rows, int]:
    """Return select rates with a row for each entry age, and the first of them.

    rows: shape (ages, durations), row i at age ``first_age + i``. By attained age, the rates of one entry age
    lie on a falling diagonal. Entry ages without any rate at either end are left out.
    """
    years = rows.shape[1]
    if select_by == "attained age":
        first_age -= years - 1
        slanted = np.full((rows.shape[0] + years - 1, years), np.nan)
        for duration in range(years):
            start = years - 1 - duration
            slanted[start : start + rows.shape[0], duration] = rows[:, duration]
        rows = slanted
    held = np.flatnonzero(np.isfinite(rows).any(axis=1))
    if not held.size:
        return rows[:0].copy(), first_age
    return rows[held[0] : held[-1] + 1].copy(), first_age + int(held[0])


def without_blank_ends(rates: Rows, first_age: int) -> tuple[Rows, int]:
    """Return rates by age without missing ones at either end, and the first age that is left."""
    held = np.flatnonzero(np.isfinite(rates))
    if not held.size:
        return rates[:0].copy(), first_age
    return rates[held[0] : held[-1] + 1].copy(), first_age + int(held[0])
