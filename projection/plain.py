"""The plain twin: the reserve of one policy in ordinary Python, payment by payment, from the definitions.

It shares no line with the compiled engine and is written for a reader who has the page of conventions beside
it. Every run values a sample of its policies a second time with it, and the working of a policy is printed
from it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from fractions import Fraction
from math import fsum
from typing import Any, Literal, NamedTuple

from assumptions.basis import Basis
from assumptions.rules import Rule, first_fit
from portfolios.designs import Design
from portfolios.states import ALIVE, LIVES

from .plain_dates import Position, age_at, month_after, monthiversary, position_of
from .plain_expenses import expense_rule, expense_streams
from .plain_faults import NotValued
from .plain_lapse import Persistency, until_months
from .plain_life import Survival, yearly_rates
from .plain_lives import Lives, running
from .plain_occasions import Course, Occasion
from .plain_streams import Part, Policy, PolicyStream, design_streams, held_by
from .settings import Settings

__all__ = ["NotValued", "Payment", "PlainValue", "RulesUsed", "plain_value"]


class Payment(NamedTuple):
    """One payment to come; money in currency, not rounded.

    point: months from commencement, for a death or lapse the end of its step, and ``due`` its date;
    month: first day of the calendar month in which the cash flow counts; policy_year: from 1, the one of the
    relative amount; the payment is amount x relative; survival x persistency is its probability (of dying or
    lapsing in the step, for a payment on a move); t: years from the valuation date to the payment, at which
    ``discount`` is taken. Against the usual direction of its part (a premium paid out) expected and value are
    negative. By Woolhouse's formula, relative includes the formula's weight.
    """

    stream: str
    part: Part
    direction: Literal["in", "out"]
    point: int
    due: date
    month: date
    policy_year: int
    amount: float
    relative: float
    survival: float
    persistency: float
    t: float
    discount: float
    expected: float
    value: float


class RulesUsed(NamedTuple):
    """Numbers of the rules that fit, from 1; lapse 0 where nobody lapses; expenses by name of the item."""

    mortality: int
    lapse: int
    interest: int
    expenses: dict[str, int]


@dataclass(frozen=True)
class PlainValue:
    """The reserve of one policy and what it is made of; money in currency, not rounded.

    age: at commencement, in years; survival and persistency: L(T) and P(T) from commencement to the valuation
    date; life and lapses: the yearly rates behind them, ``life.yearly`` those used; second: the same for the second
    life where both live.
    """

    benefits: float
    expenses: float
    premiums: float
    payments: list[Payment]
    position: Position
    age: Fraction
    survival: float
    persistency: float
    life: Survival
    second: Survival | None
    lapses: Persistency
    rules: RulesUsed

    @property
    def reserve(self) -> float:
        """Value of benefits and expenses (with commission) less that of premiums."""
        return self.benefits + self.expenses - self.premiums


def plain_value(
    policy: Mapping[str, Any], design: Design, basis: Basis, settings: Settings, payments: bool = True
) -> PlainValue:
    """Value one policy.

    policy: extract column to Python value (date, number, text or None); payments: whether to list them, which
    takes longer than the sums. Raises NotValued, with reason, field, value and rule, for a policy that
    belongs to the exceptions, and ValueError for a basis at odds with the step.
    """
    birth, commencement = _date(policy, "birth_date"), _date(policy, "commencement_date")
    position = position_of(settings.valuation_date, commencement, settings.step)
    age = age_at(birth, commencement, basis.document.mortality.age)
    course, rules = _course(policy, age, position, design, basis, settings)
    streams = _streams(policy, design, basis, course, rules, commencement)
    values: dict[Part, list[float]] = {"benefits": [], "expenses": [], "premiums": []}
    for stream in streams:
        values[stream.part].append(stream.sign * _value_of(stream, course))
    return PlainValue(
        benefits=fsum(values["benefits"]),
        expenses=fsum(values["expenses"]),
        premiums=fsum(values["premiums"]),
        payments=_payments(streams, course, commencement) if payments else [],
        position=position,
        age=age,
        survival=course.alive_now,
        persistency=course.in_force_now,
        life=course.lives.first,
        second=course.lives.second,
        lapses=course.lapses,
        rules=rules,
    )


def _value_of(stream: PolicyStream, course: Course) -> float:
    """Return the sum of amount x relative x probability x discount factor over the payments of a stream."""
    discount, level = course.discount, stream.level
    if level is not None:
        return level * fsum(
            weight * (survival * persistency) * discount(paid)
            for _, paid, _, weight, survival, persistency in stream.occasions
        )
    return fsum(
        stream.amount(occasion)
        * stream.relative(occasion)
        * occasion.weight
        * (occasion.survival * occasion.persistency)
        * discount(occasion.paid)
        for occasion in stream.occasions
    )


def _date(policy: Policy, column: str) -> date:
    value = policy.get(column)
    if not isinstance(value, date):
        raise NotValued("date missing", column, value, "a date is needed")
    return value


def _course(
    policy: Policy, age: Fraction, position: Position, design: Design, basis: Basis, settings: Settings
) -> tuple[Course, RulesUsed]:
    """Find the rules that fit and return what the policy's probabilities and discount factors depend on."""
    document = basis.document
    interest = _fit("interest", document.interest.rule, policy)
    lapse = _fit("lapse", document.lapse.rule, policy) if document.lapse else -1
    expenses = {item.name: expense_rule(item, policy) + 1 for item in document.expense}
    mortality, lives = _lives(policy, age, position, design, basis)
    if document.lapse:
        rule = document.lapse.rule[lapse]
        until = until_months(rule, policy.get(rule.until) if isinstance(rule.until, str) else None)
        lapses = Persistency(document.lapse, rule, basis.lapses[lapse], until, settings.step_months)
    else:
        lapses = Persistency(None, None, (), None, settings.step_months)
    outstanding = settings.due == "outstanding"
    curve = basis.curves[interest]
    course = Course(position.u, settings.step_months, outstanding, lives, lapses, document.claims, curve)
    course.indices, course.today = document.index, settings.valuation_date
    for share, what in ((course.alive_now, "alive"), (course.in_force_now, "in force")):
        if share <= 0:
            raise NotValued(f"nobody {what} at the valuation date", "commencement_date", None, f"by the basis, {share}")
    return course, RulesUsed(mortality + 1, lapse + 1, interest + 1, expenses)


def _lives(policy: Policy, age: Fraction, position: Position, design: Design, basis: Basis) -> tuple[int, Lives]:
    """Return the position of the mortality rule of the first life, or the only one left, and the lives."""
    mortality = basis.document.mortality
    now = str(policy.get("lives"))
    if design.states == "one life":
        now = "none" if now == "none" else ""
    elif now not in LIVES:
        raise NotValued("lives not known", "lives", now, "both, first, second or none")
    ages = {"first": age}
    if now in ("both", "second"):
        ages["second"] = age_at(_date(policy, "second_birth_date"), _date(policy, "commencement_date"), mortality.age)
    found: dict[str, tuple[int, Survival]] = {}
    for life in ("first", "second") if now == "both" else ("second" if now == "second" else "first",):
        place = _fit("mortality", mortality.rule, _seen(policy, life))
        rule, table = mortality.rule[place], basis.rates[place]
        if now == "none":
            # Nobody is left to look at rates, so that any age does.
            ages[life] = Fraction(table.first_age - rule.added_years)
        born = _date(policy, "second_birth_date" if life == "second" else "birth_date")
        commenced, scale = _date(policy, "commencement_date"), basis.scales[place]
        rates = yearly_rates(rule, table, ages[life], scale, commenced, born)
        found[life] = place, Survival(rates, mortality.fractions)
    place, first = found["second" if now == "second" else "first"]
    second = found["second"][1] if now == "both" else None
    return place, Lives(first, second, LIVES.get(now, ALIVE), mortality.common_shock, position.u)


def _seen(policy: Policy, life: str) -> dict[str, Any]:
    """Return what mortality rules see: of the second life, its own columns in place of the first one's."""
    seen = {**policy, "life": life}
    if life == "second":
        for column in policy:
            if f"second_{column}" in policy:
                seen[column] = policy[f"second_{column}"]
    return seen


def _fit(place: str, rules: list[Any], policy: Policy) -> int:
    checked: list[Rule] = rules
    position = first_fit(checked, policy)
    if position is None:
        raise NotValued("no rule fits", place, None, f"one of the {place} rules must fit")
    return position


def _streams(
    policy: Policy, design: Design, basis: Basis, course: Course, rules: RulesUsed, commencement: date
) -> list[PolicyStream]:
    """Return the streams of the design and those that the expense items add, in this order."""
    streams = design_streams(design, policy, course)
    ends = [end for stream in streams for end in _ends(stream, course)]
    if all(end is not None and end < course.u for end in ends):
        raise NotValued("matured", f"product {design.code}", None, "something is to come after the valuation date")
    design = held_by(design, policy)
    own = {stream.name for stream in design.stream if stream.of is None}
    added: list[PolicyStream] = []
    for item in basis.document.expense:
        rule = item.rule[rules.expenses[item.name] - 1]
        added += expense_streams(item, rule, streams, own, running(design), course, commencement)
    return streams + added


def _ends(stream: PolicyStream, course: Course) -> list[int | None]:
    """Return the end of a stream that may still be paid, be it for its guarantee only; else nothing."""
    terms = stream.terms
    if course.lives.may_be(terms.states):
        return [terms.end]
    if not terms.guaranteed or terms.start >= course.u or not course.lives.may_have_been(terms.states):
        return []
    guaranteed = terms.start + terms.guaranteed
    return [guaranteed if terms.end is None else min(terms.end, guaranteed)]


def _payments(streams: list[PolicyStream], course: Course, commencement: date) -> list[Payment]:
    return [_payment(stream, occasion, course, commencement) for stream in streams for occasion in stream.occasions]


def _payment(stream: PolicyStream, occasion: Occasion, course: Course, commencement: date) -> Payment:
    due = monthiversary(commencement, occasion.point)
    month = due.replace(day=1) if occasion.paid == occasion.point else _claim_month(commencement, occasion)
    amount, relative = stream.amount(occasion), stream.relative(occasion) * occasion.weight
    expected = stream.sign * amount * relative * (occasion.survival * occasion.persistency)
    discount = course.discount(occasion.paid)
    return Payment(
        stream=stream.name,
        part=stream.part,
        direction=stream.direction,
        point=occasion.point,
        due=due,
        month=month,
        policy_year=occasion.month // 12 + 1,
        amount=amount,
        relative=relative,
        survival=occasion.survival,
        persistency=occasion.persistency,
        t=course.years_to(occasion.paid),
        discount=discount,
        expected=expected,
        value=expected * discount,
    )


def _claim_month(commencement: date, occasion: Occasion) -> date:
    """Return the calendar month of a claim that is not paid at the end of its step.

    The step starts on the day of commencement's day of the month; months of 30.4375 days run on from there.
    """
    start = occasion.month
    later = (commencement.day - 1 + 30.4375 * (occasion.paid - start)) // 30.4375
    year, month = month_after(commencement, start + int(later))
    return date(year, month, 1)
