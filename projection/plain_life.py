"""Survival of one life from commencement, year by year, in ordinary Python."""

from __future__ import annotations

import math
from datetime import date
from fractions import Fraction
from typing import NamedTuple

from assumptions.adjustments import Adjustment
from assumptions.improvement import Scale
from assumptions.mortality import STANDARD, Fractions, MortalityRule, Rates, Rating, adjusted_rate

from .plain_faults import NotValued

Months = int | Fraction


def through(q: float, s: float, fractions: Fractions) -> float:
    """Return F(q, s), the probability to survive the first part s (0 to 1) of a year with rate q."""
    if s == 0:
        return 1.0
    if fractions == "constant force":
        return float((1 - q) ** s)
    if fractions == "uniform deaths":
        return 1 - s * q
    return (1 - q) / (1 - (1 - s) * q)


class YearlyRates(NamedTuple):
    """Adjusted yearly rates of one life.

    Year j starts j - ``offset`` years after commencement. ``offset`` is the part r of an exact age a + r that
    enters a table of whole ages, 0 otherwise. ``entry`` is the age, before added years, of year 0, and
    ``first_year`` the calendar year in which it begins, ``first_month`` the month (from 1). rating: the life's own;
    begun: years since commencement at which year 0 stands, where a rating counts from then on only.
    """

    rule: MortalityRule
    rates: Rates
    entry: float
    offset: Fraction
    scale: Scale | None = None
    first_year: int = 0
    rating: Rating = STANDARD
    begun: int = 0
    adjustment: Adjustment | None = None
    first_month: int = 1

    @property
    def closed(self) -> bool:
        """Whether nobody is left after the last year."""
        return self.rule.close or self.rates.closed

    def improved(self, j: int) -> float:
        """Return the factor of improvement of year j."""
        if self.scale is None:
            return 1.0
        age = math.floor(self.entry + self.rule.added_years + self.rating.added_years)
        return self.scale.factor(age + j, self.first_year + j)

    def rate(self, j: int) -> float:
        """Return q of year j. Raises NotValued after the last age of a table that is not closed."""
        entered = self.entry + self.rule.added_years + self.rating.added_years
        j += self.begun
        if entered + j >= self.rates.final_age and not self.closed:
            rule = f"the table ends at age {self.rates.final_age} and is not closed"
            raise NotValued("table ends too early", "age", entered + j, rule)
        try:
            q = adjusted_rate(self.rule, self.rates, self.entry, j, self.improved(j), self.rating)
        except ValueError as error:
            raise NotValued("age outside the tables", "age", entered + j, str(error)) from error
        if self.adjustment is None or (self.closed and entered + j >= self.rates.final_age - 1):
            return q
        month = self.adjustment.counted(12 * self.first_year + self.first_month - 1)
        return self.adjustment.rate(q, math.floor(entered) + j, j, month)


def yearly_rates(
    rule: MortalityRule,
    rates: Rates,
    age: Fraction,
    scale: Scale | None = None,
    commencement: date | None = None,
    birth: date | None = None,
    rating: Rating = STANDARD,
    begun: int = 0,
    adjustment: Adjustment | None = None,
) -> YearlyRates:
    """Return the rates of a life by its age at commencement; the dates are needed where calendar time matters.

    rating: the life's own, from ``begun`` years after commencement on.

    A law takes any age; a table is entered at the whole age, and the rest is the offset.
    Raises NotValued for an age outside the table, or one that is not whole in a select table.
    """
    whole = age.numerator // age.denominator
    offset = age - whole if rates.whole_ages_only else Fraction(0)
    entry: float = whole if rates.whole_ages_only or age == whole else float(age)
    select_years: int = getattr(rates, "select_years", 0)
    if offset > 0 and select_years > 0:
        raise NotValued("age not whole", "age", float(age), "a select table needs a whole age at commencement")
    entered = entry + rule.added_years + rating.added_years
    if not rates.first_age <= entered < rates.final_age:
        held = f"the table holds ages {rates.first_age} to {rates.final_age - 1}"
        raise NotValued("age outside the tables", "age", entered, held)
    first_year, first_month = 0, 1
    if (scale is not None or adjustment is not None) and commencement is not None and birth is not None:
        # Years of an exact age in a table of whole ages begin on birthdays, all others with the policy year.
        first_year = birth.year + whole if offset else commencement.year
        first_month = birth.month if offset else commencement.month
    return YearlyRates(rule, rates, entry, offset, scale, first_year, rating, begun, adjustment, first_month)


class Survival:
    """L(t) = S(r + t) / S(r), with S the product of the yearly (1 - q), made as far as it is asked for."""

    def __init__(self, rates: YearlyRates, fractions: Fractions) -> None:
        self.rates = rates
        self.fractions: Fractions = fractions
        self._yearly: list[float] = []
        self._start_of_year = [1.0]
        self._seen: dict[Months, float] = {}
        self._passed = 12 * rates.offset.numerator
        self._month = rates.offset.denominator
        self._divisor = self._unscaled(0)

    @property
    def pieces(self) -> list[YearlyRates]:
        """The rates of each piece of time that a rating cuts; all of time where there is none."""
        return [self.rates]

    @property
    def yearly(self) -> list[float]:
        """The rates q used so far, by year."""
        return self._yearly

    def years(self) -> float:
        """Years from commencement, or from the beginning of a piece of time of its own, to where the rates end."""
        rates = self.rates
        entered = rates.entry + rates.rule.added_years + rates.rating.added_years
        return rates.rates.final_age - entered - rates.begun - float(rates.offset)

    def at(self, months: Months) -> float:
        """Return L, the probability at commencement to live ``months`` months (whole or a fraction).

        Raises NotValued where the table ends before.
        """
        if months not in self._seen:
            # With a rate of 1 nobody is left in the year of age in which an exact age at commencement lies.
            self._seen[months] = self._unscaled(months) / self._divisor if self._divisor else 0.0
        return self._seen[months]

    def end(self) -> int:
        """Return the first point at which nobody is left. Raises NotValued where the table is not closed."""
        end = self.end_before(None)
        assert end is not None
        return end

    def end_before(self, limit: int | None) -> int | None:
        """Return the first point at which nobody is left, None if some are left ``limit`` months on."""
        last = 0
        while self._rate(last) < 1:
            last += 1
            if limit is not None and 12 * (last - self.rates.offset) >= limit:
                return None
        months = 12 * (last - self.rates.offset)
        over = max(0, -(-(months + 12) // 1) if self.fractions == "uniform deaths" else months // 1 + 1)
        return over if limit is None or over <= limit else None

    def force(self, point: int) -> float:
        """Return the force of mortality at a point from the survival of the years before and after it.

        One-sided where there is no year before (within a year of commencement), or where after it nobody or
        no rate is left.
        """
        years = []
        if point >= 12:
            years.append((point - 12, point))
        try:
            if self.at(point + 12) > 0:
                years.append((point, point + 12))
        except NotValued:
            pass
        return sum(math.log(self.at(start) / self.at(end)) for start, end in years) / max(1, len(years))

    def rate_before(self, point: int) -> float | None:
        """Return the yearly rate in force just before a point, None at commencement or if never asked for."""
        position = 12 * self.rates.offset + point
        year = -(-position // 12) - 1
        return self._yearly[year] if 0 <= year < len(self._yearly) else None

    def _unscaled(self, months: Months) -> float:
        # With r = n / d: r + months / 12 = (12 n + d months) / (12 d), which stays exact, so that the first
        # moment of a year is never taken for the last one of the year before.
        year, rest = divmod(self._passed + months * self._month, 12 * self._month)
        start = self._start(year)
        if rest == 0 or start == 0:
            return start
        return start * through(self._rate(year), float(rest / (12 * self._month)), self.fractions)

    def _start(self, year: int) -> float:
        while len(self._start_of_year) <= year:
            if self._start_of_year[-1] == 0:
                return 0.0
            q = self._rate(len(self._start_of_year) - 1)
            self._start_of_year.append(self._start_of_year[-1] * (1 - q))
        return self._start_of_year[year]

    def _rate(self, year: int) -> float:
        while len(self._yearly) <= year:
            self._yearly.append(self.rates.rate(len(self._yearly)))
        return self._yearly[year]
