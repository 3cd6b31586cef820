"""Persistency of one policy from commencement, in ordinary Python."""

from __future__ import annotations

from fractions import Fraction

from assumptions.adjustments import Adjustment
from assumptions.lapse import Lapse, LapseRule, yearly_lapse

from .plain_faults import NotValued
from .plain_life import Months

# A number of years times twelve is a whole number of months within this.
TOLERANCE = 1e-6


class Persistency:
    """P[g], the share of the surviving policies that have not lapsed, lapses at the point g included.

    Without a lapse part nobody lapses. ``until`` is in months, None where lapses never stop.
    """

    def __init__(
        self,
        part: Lapse | None,
        rule: LapseRule | None,
        rates: tuple[float, ...],
        until: float | None,
        step_months: int,
    ) -> None:
        self.rule = rule
        self.rates = list(rates)
        self.until = until
        self.step_months = step_months
        self.only_anniversaries = step_months == 12 or (part is not None and part.timing == "anniversaries")
        self.dependent = part is not None and part.competing == "dependent rates"
        if self.dependent and self.only_anniversaries and step_months == 1:
            raise ValueError("dependent rates need lapses at each step, or the step 'year'")
        self._points = [1.0]
        self.adjustment: Adjustment | None = None
        self._month = 0

    def adjust(self, adjustment: Adjustment | None, month: int) -> None:
        """Adjust the yearly rates; month: of commencement, 12 times the year and the months before it."""
        self.adjustment = adjustment
        self._month = month if adjustment is None else adjustment.counted(month)

    def yearly(self, year: int) -> float:
        """Return w of a policy year counted from 0, before ``until`` is looked at."""
        if self.rule is None:
            return 0.0
        w = yearly_lapse(self.rule, self.rates, year)
        return w if self.adjustment is None else self.adjustment.rate(w, 0, year, self._month)

    def at(self, point: int) -> float:
        """Return P[g]."""
        while len(self._points) <= point:
            self._points.append(self._points[-1] * (1 - self._lapsing(len(self._points))))
        return self._points[point]

    def _lapsing(self, point: int) -> float:
        # The share of the policies in force just before the point that lapses at it.
        if self.rule is None or (self.until is not None and point > self.until + TOLERANCE):
            return 0.0
        w = self.yearly((point - 1) // 12)
        if self.only_anniversaries:
            return w if point % 12 == 0 else 0.0
        return float(1 - (1 - w) ** (1 / 12))

    def in_advance(self, point: int) -> float:
        """Return the persistency of a payment in advance: after the lapses at its point."""
        return self._on_the_line(point) if self.dependent else self.at(point)

    def in_arrears(self, point: int) -> float:
        """Return the persistency of a payment in arrears or paid once: before the lapses at its point.

        Dependent rates have no lapses at a point: they are spread over the step.
        """
        return self._on_the_line(point) if self.dependent else self.at(max(0, point - 1))

    def at_valuation(self, u: Fraction) -> float:
        """Return P(T)."""
        return self._on_the_line(u) if self.dependent else self.at(u.numerator // u.denominator)

    def _on_the_line(self, months: Months) -> float:
        # P falls evenly from one step boundary to the next.
        steps, rest = divmod(months, self.step_months)
        start = self.at(self.step_months * steps)
        if rest == 0:
            return start
        end = self.at(self.step_months * (steps + 1))
        return start - float(Fraction(rest) / self.step_months) * (start - end)


def until_months(rule: LapseRule, value: object) -> float | None:
    """Return ``until`` in months, given the rule and the value of the column that it names.

    Raises NotValued where that value is missing.
    """
    if rule.until is None:
        return None
    years = value if isinstance(rule.until, str) else rule.until
    if not isinstance(years, int | float) or years != years:
        raise NotValued("duration missing", str(rule.until), years, "the lapse rule needs it for 'until'")
    return 12 * float(years)
