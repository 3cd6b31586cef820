"""Dates of one policy, in ordinary Python: monthiversaries, the position of the valuation date, ages.

Everything is exact: days are counted as whole numbers and fractions of a step or of a year stay fractions.
"""

from __future__ import annotations

from calendar import monthrange
from datetime import date
from fractions import Fraction
from typing import NamedTuple

from assumptions.mortality import AgeBasis

from .plain_faults import NotValued
from .settings import Step


def monthiversary(start: date, months: int) -> date:
    """Return the date ``months`` calendar months after ``start``.

    It falls on the same day of the month, or on the month's last day where that day is missing.
    """
    year, month = month_after(start, months)
    return date(year, month, min(start.day, monthrange(year, month)[1]))


def month_after(start: date, months: int) -> tuple[int, int]:
    """Return year and month (1 to 12) of the calendar month ``months`` after that of ``start``."""
    years, month = divmod(start.month - 1 + months, 12)
    return start.year + years, month + 1


def whole_months(start: date, end: date) -> int:
    """Return the largest number of months whose monthiversary of ``start`` is not after ``end``."""
    months = 12 * (end.year - start.year) + end.month - start.month
    return months if monthiversary(start, months) <= end else months - 1


class Position(NamedTuple):
    """Where the valuation date lies: u = k + f months after commencement, ``step`` its fraction of a step.

    Counted from ``last``, the last step date not after the valuation date, to ``following``, the next one.
    """

    k: int
    f: Fraction
    u: Fraction
    step: Fraction
    last: date
    following: date


def position_of(valuation: date, commencement: date, step: Step) -> Position:
    """Return the position of the valuation date. Raises NotValued where the policy commences after it."""
    if commencement > valuation:
        raise NotValued(
            "commences after the valuation date", "commencement_date", commencement, f"not after {valuation}"
        )
    length = 12 if step == "year" else 1
    steps = whole_months(commencement, valuation) // length
    last = monthiversary(commencement, length * steps)
    following = monthiversary(commencement, length * (steps + 1))
    elapsed = Fraction((valuation - last).days, (following - last).days)
    u = length * (steps + elapsed)
    k = u.numerator // u.denominator
    return Position(k, u - k, u, elapsed, last, following)


def age_at(birth: date, day: date, basis: AgeBasis) -> Fraction:
    """Return the age at a day in years: exact, or the whole age at the last, nearest or next birthday.

    Raises NotValued where the day lies before birth.
    """
    if day < birth:
        raise NotValued("commenced before birth", "birth_date", birth, f"not after commencement, {day}")
    years = whole_months(birth, day) // 12
    since = (day - monthiversary(birth, 12 * years)).days
    until = (monthiversary(birth, 12 * (years + 1)) - day).days
    if basis == "last birthday":
        return Fraction(years)
    if basis == "next birthday":
        return Fraction(years + 1)
    if basis == "nearest birthday":
        return Fraction(years if since <= until else years + 1)
    return years + Fraction(since, since + until)


def first_point_at_age(birth: date, commencement: date, age: int, step_months: int) -> int:
    """Return the first point, a multiple of the step, that is not before the birthday; at least 0."""
    birthday = monthiversary(birth, 12 * age)
    months = 12 * (birthday.year - commencement.year) + birthday.month - commencement.month
    if monthiversary(commencement, months) < birthday:
        months += 1
    return max(0, -(-months // step_months) * step_months)
