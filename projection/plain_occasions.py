"""When the payments of a stream fall due and with which probability, one by one, in ordinary Python."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from datetime import date
from fractions import Fraction
from typing import Literal, NamedTuple

from assumptions.basis import ClaimDelay, Claims
from assumptions.indices import Index
from assumptions.interest import YieldCurve
from portfolios.states import States

from .plain_lapse import Persistency
from .plain_lives import Lives

Way = Literal["advance", "arrears", "once", "death", "lapse"]


class Terms(NamedTuple):
    """When one stream of one policy is paid; months from commencement.

    end: None at the end of survival; guaranteed: months from the start; woolhouse: terms of the formula, 0
    for payments at their dates; clock: month from which the relative amount counts its years; states: of a
    contract on two lives, while the stream is paid or which are left when it is.
    """

    way: Way
    certain: bool
    start: int
    end: int | None
    a_year: int = 1
    guaranteed: int = 0
    woolhouse: int = 0
    clock: int = 0
    states: States | None = None

    @property
    def period(self) -> int:
        """Months between two payments."""
        return 12 // self.a_year


class Occasion(NamedTuple):
    """One payment without its amount.

    point: months from commencement to the point that it belongs to, for a death or lapse the end of its
    step; paid: months to the payment itself; month: of its relative amount; weight: 1, or that of Woolhouse's
    formula; survival and persistency: from the valuation date, their product is the payment's probability.
    """

    point: int
    paid: float
    month: int
    weight: float
    survival: float
    persistency: float


@dataclass
class Course:
    """What the probabilities of one policy depend on, seen from the valuation date.

    u: months from commencement to the valuation date; outstanding: whether payments due on it are to come.
    """

    u: Fraction
    step_months: int
    outstanding: bool
    lives: Lives
    lapses: Persistency
    claims: Claims
    curve: YieldCurve
    indices: Sequence[Index] = ()
    today: date | None = None
    """The valuation date itself, where increases in calendar months ask for it."""
    alive_now: float = field(init=False)
    """L(T)."""
    in_force_now: float = field(init=False)
    """P(T)."""

    def __post_init__(self) -> None:
        self.alive_now = self.lives.now
        self.in_force_now = self.lapses.at_valuation(self.u)
        self.due_now = int(self.u) if self.u.denominator == 1 else None
        """The point that falls on the valuation date, if any."""
        self.next_point = self.u.numerator // self.u.denominator + (0 if self._still_due else 1)
        """The first point whose payments are still to come."""
        self._months_passed = float(self.u)
        self._discount: dict[float, float] = {}
        now = {self.due_now: 1.0} if self.due_now is not None else {}
        self._in_advance, self._in_arrears = dict(now), dict(now)
        self._alive: dict[States | None, dict[int, float]] = {}

    @property
    def _still_due(self) -> bool:
        return self.outstanding and self.due_now is not None

    def years_to(self, months: float) -> float:
        """Return the years from the valuation date to a month counted from commencement."""
        return (months - self._months_passed) / 12

    def discount(self, months: float) -> float:
        """Return the discount factor for a month counted from commencement."""
        if months not in self._discount:
            self._discount[months] = self.curve.factor(self.years_to(months))
        return self._discount[months]

    def alive(self, point: int, states: States | None) -> float:
        """Return L(g) / L(T), or the probability of the states on two lives."""
        known = self._alive.setdefault(states, {})
        if point not in known:
            known[point] = self.lives.probability(point, states)
        return known[point]

    def in_force(self, point: int, way: Way) -> float:
        """Return P / P(T) for a payment while alive or once at a point, 1 on the valuation date."""
        known = self._in_advance if way == "advance" else self._in_arrears
        if point not in known:
            share = self.lapses.in_advance(point) if way == "advance" else self.lapses.in_arrears(point)
            known[point] = share / self.in_force_now
        return known[point]


def occasions(terms: Terms, course: Course) -> list[Occasion]:
    """Return the payments of a stream that are still to come, in order of time."""
    if terms.way in ("death", "lapse"):
        return list(_moves(terms, course))
    if terms.way == "once":
        return list(_once(terms, course))
    if terms.woolhouse and terms.a_year > 1:
        return list(_by_woolhouse(terms, course))
    end = last_point(terms, course)
    if terms.end is None and terms.guaranteed:
        # A guarantee for life may outlast the table.
        end = max(end, terms.start + terms.guaranteed)
    return list(_at_their_dates(terms, course, terms.start, end))


def last_point(terms: Terms, course: Course) -> int:
    """Return the end of a stream in months; for life, the first point at which nobody is left.

    Raises NotValued where the stream runs beyond the last age of a table that is not closed.
    """
    if terms.end is None:
        end = course.lives.end(terms.states)
        # The last deaths count in the step that ends with nobody left.
        on_move = terms.way in ("death", "lapse")
        return -(-end // course.step_months) * course.step_months if on_move else end
    if not terms.certain and terms.end > terms.start:
        course.alive(terms.end, terms.states)
    return terms.end


def _at_their_dates(terms: Terms, course: Course, first: int, last: int) -> Iterator[Occasion]:
    """Yield the payments of the periods from month ``first`` to month ``last``."""
    period = terms.period
    arrears = period if terms.way == "arrears" else 0
    guaranteed = terms.start + terms.guaranteed
    certain = (1.0, 1.0) if terms.certain else _factor_of_guarantee(terms, course)
    possible = course.lives.may_be(terms.states)
    for month in range(first, last, period):
        point = month + arrears
        if point < course.next_point or point > last:
            continue
        inside = point <= guaranteed if arrears else point < guaranteed
        if terms.certain or inside:
            survival, persistency = certain
        elif possible:
            survival, persistency = course.alive(point, terms.states), course.in_force(point, terms.way)
        else:
            continue
        yield Occasion(point, point, month, 1.0, survival, persistency)


def _factor_of_guarantee(terms: Terms, course: Course) -> tuple[float, float]:
    # Survival and persistency to the start of the stream; 1 once it has started in one of its states.
    if terms.guaranteed == 0:
        return 1.0, 1.0
    if terms.start == course.u:
        return _now(terms, course), 1.0
    if terms.start < course.u:
        return (1.0, 1.0) if course.lives.may_have_been(terms.states) else (0.0, 1.0)
    if not course.lives.may_be(terms.states):
        return 0.0, 1.0
    return course.alive(terms.start, terms.states), course.in_force(terms.start, "advance")


def _once(terms: Terms, course: Course) -> Iterator[Occasion]:
    point = terms.start
    if point < course.next_point:
        return
    month = max(point - 1, terms.clock)
    if terms.certain:
        yield Occasion(point, point, month, 1.0, 1.0, 1.0)
    else:
        yield Occasion(point, point, month, 1.0, course.alive(point, terms.states), course.in_force(point, "once"))


def _moves(terms: Terms, course: Course) -> Iterator[Occasion]:
    """Yield the payments on death or lapse, one for every step that ends in (start, end]."""
    step = course.step_months
    dependent = course.lapses.dependent
    end = last_point(terms, course)
    first = (course.u.numerator // course.u.denominator // step + 1) * step
    for point in range(max(first, terms.start + step), end + 1, step):
        # The first step ahead, whole or broken, starts on the valuation date: all are alive and in force.
        broken = point == first
        start = float(course.u) if broken else float(point - step)
        alive = _now(terms, course) if broken else course.alive(point - step, terms.states)
        in_force = 1.0 if broken else course.lapses.at(point - step) / course.in_force_now
        alive_after = course.alive(point, terms.states)
        in_force_after = course.lapses.at(point) / course.in_force_now
        if terms.way == "death":
            survival = alive - alive_after
            persistency = (in_force + in_force_after) / 2 if dependent else in_force
            paid = _claim_paid(course.claims, start, point)
        else:
            survival = (alive + alive_after) / 2 if dependent else alive_after
            persistency = in_force - in_force_after
            paid = point
        yield Occasion(point, paid, point - step, 1.0, survival, persistency)


def _now(terms: Terms, course: Course) -> float:
    """1 if the contract is in one of the stream's states on the valuation date, else 0."""
    return 1.0 if terms.states is None or course.lives.state in terms.states else 0.0


def _claim_paid(claims: Claims, start: float, end: int) -> float:
    """Return the month in which a death of the step from ``start`` to ``end`` is paid."""
    if claims.paid == "end of step":
        return end
    delay = claims.paid.delay_months if isinstance(claims.paid, ClaimDelay) else 0.0
    return (start + end) / 2 + delay


def _by_woolhouse(terms: Terms, course: Course) -> Iterator[Occasion]:
    """Yield the terms of Woolhouse's formula for each year of the stream that lies wholly ahead.

    Payments of the year in which the valuation date falls and of an incomplete last year are taken at their
    own dates. Only streams paid while alive, without a guarantee, are valued by the formula.
    """
    m = terms.a_year
    z = (m - 1) / (2 * m)
    at_start, at_end = (1 - z, z) if terms.way == "advance" else (z, 1 - z)
    third = (m * m - 1) / (12 * m * m) if terms.woolhouse == 3 else 0.0
    end = last_point(terms, course)
    for first in range(terms.start, end, 12):
        last = first + 12
        incomplete = terms.end is not None and last > terms.end
        if incomplete or not _lies_ahead(first, terms, course):
            yield from _at_their_dates(terms, course, first, min(last, end))
            continue
        for point, weight, sign in ((first, at_start, -1.0), (last, at_end, 1.0)):
            if third:
                weight += sign * third * _decline(point, course)
            survival, persistency = course.alive(point, terms.states), course.in_force(point, terms.way)
            # An amount is one of m payments a year; the formula's terms are amounts of a year.
            yield Occasion(point, point, first, m * weight, survival, persistency)


def _lies_ahead(first: int, terms: Terms, course: Course) -> bool:
    if first == course.due_now:
        return terms.way == "arrears" or course.outstanding
    return first > course.u


def _decline(point: int, course: Course) -> float:
    """Return mu + delta at a point, the forces of mortality (0 where nobody is left) and of interest."""
    t = course.years_to(point)
    curve, life = course.curve, course.lives.first
    if t < 1:
        delta = math.log(curve.factor(t) / curve.factor(t + 1))
    else:
        delta = math.log(curve.factor(t - 1) / curve.factor(t + 1)) / 2
    return delta + (life.force(point) if life.at(point) > 0 else 0.0)
