"""The payment streams of one policy, resolved from its design, in ordinary Python."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, Literal

from portfolios.designs import AfterGuarantee, AtAge, Design, Increase, Loan, Share, Stream
from portfolios.returns import looked_back_at
from portfolios.states import States

from .plain_dates import first_point_at_age
from .plain_faults import NotValued
from .plain_growth import Growth
from .plain_lapse import TOLERANCE
from .plain_lives import states_of
from .plain_occasions import Course, Occasion, Terms, Way, last_point, occasions
from .plain_returned import proportion, remaining, returned

Policy = Mapping[str, Any]
Part = Literal["benefits", "expenses", "premiums"]
PART_OF_KIND: dict[str, Part] = {
    "benefit": "benefits",
    "expense": "expenses",
    "commission": "expenses",
    "premium": "premiums",
}


UNFIT = ("end before start", "duration not in whole periods", "duration not in whole years")
"""Reasons why a stream's dates, each of them fine, do not go together."""


@dataclass
class PolicyStream:
    """One stream of one policy: its payments to come, and what each amounts to.

    amount and relative are functions of the occasion; the payment is their product with its weight. level: the
    product of both where it is the same for every payment; lasts: whether there is something to pay at all.
    """

    name: str
    part: Part
    direction: Literal["in", "out"]
    terms: Terms
    occasions: list[Occasion]
    amount: Callable[[Occasion], float]
    relative: Callable[[Occasion], float]
    level: float | None = None
    lasts: Callable[[Occasion], bool] = lambda _: True

    @property
    def sign(self) -> int:
        """1, or -1 for a stream that runs against its part: a premium paid out, a benefit received."""
        return 1 if (self.direction == "in") == (self.part == "premiums") else -1


def design_streams(design: Design, policy: Policy, course: Course) -> list[PolicyStream]:
    """Return the streams of a design that a policy has, in the design's order.

    Raises NotValued where a column of the policy makes no sense for its stream.
    """
    for stream in design.stream:
        if stream.of is None and not stream.is_for(policy):
            _must_be_sound(stream, policy, course, _waits_for(stream, design))
    design = held_by(design, policy)
    own = [stream for stream in design.stream if stream.of is None]
    bases: dict[str, PolicyStream] = {}
    for stream in sorted(own, key=lambda one: looked_back_at(one) is not None):
        made = _own(stream, states_of(stream, design), policy, course, _waits_for(stream, design))
        other = looked_back_at(stream)
        bases[stream.name] = made if other is None else _looking_back(stream, made, bases[other], policy, course)
    return [
        bases[stream.name] if stream.of is None else _share_of(stream, bases[stream.of]) for stream in design.stream
    ]


def held_by(design: Design, policy: Policy) -> Design:
    """Return the design without the streams that a policy does not have."""
    return design.having(tuple(stream.is_for(policy) for stream in design.stream))


def _must_be_sound(stream: Stream, policy: Policy, course: Course, waits_for: Stream | None) -> None:
    """Raise NotValued where a column of a stream that the policy does not have holds no good number all the same."""
    try:
        terms_of(stream, policy, course.step_months, waits_for)
    except NotValued as fault:
        if fault.reason not in UNFIT:
            raise
    rates = [stream.increase.rate] if stream.increase is not None else []
    rates += [stream.returns.interest] if stream.returns is not None else []
    rates += [stream.decrease.loan] if isinstance(stream.decrease, Loan) else []
    for value in (stream.amount, *rates):
        if value is not None and number(policy, value, f"stream '{stream.name}'") < 0 and value is stream.amount:
            raise NotValued("amount negative", str(value), policy.get(str(value)), "an amount is at least 0")


def _waits_for(stream: Stream, design: Design) -> Stream | None:
    """Return the stream after whose guarantee this one begins, if any."""
    return design.named(stream.from_.after) if isinstance(stream.from_, AfterGuarantee) else None


def _own(
    stream: Stream, states: States | None, policy: Policy, course: Course, waits_for: Stream | None = None
) -> PolicyStream:
    guaranteed = stream.guarantee is not None and course.lives.may_have_been(states)
    possible = course.lives.may_be(states) or guaranteed
    try:
        terms = terms_of(stream, policy, course.step_months, waits_for)._replace(states=states)
    except NotValued as fault:
        if possible or fault.reason not in UNFIT:
            raise
        # Nobody minds the dates of a stream that cannot be paid any more.
        terms = Terms("once", False, 0, 0, states=states)
    last_point(terms, course)
    amount = 1.0
    if stream.returns is None and stream.proportion is None:
        amount = number(policy, stream.amount, f"stream '{stream.name}' needs an amount")
    if isinstance(stream.amount, str) and amount < 0:
        raise NotValued("amount negative", stream.amount, amount, "an amount is at least 0")
    if terms.way in ("advance", "arrears"):
        amount /= terms.a_year
    amount *= stream.share
    rate = loan = 0.0
    if isinstance(stream.decrease, Loan):
        loan = number(policy, stream.decrease.loan, f"stream '{stream.name}' needs the rate of the loan")
    if stream.increase is not None and stream.increase.rate is not None:
        rate = number(policy, stream.increase.rate, f"stream '{stream.name}' needs a rate of increase")
    varies = stream.pattern or stream.increase or stream.decrease
    assert stream.direction is not None  # the design has checked it
    relative: Callable[[Occasion], float] = lambda _: 1.0  # noqa: E731
    if stream.increase is not None and stream.increase.needs_calendar:
        relative = _by_calendar(stream, stream.increase, terms, rate, policy, course)
    elif varies:
        relative = lambda occasion: relative_amount(stream, terms, rate, occasion.month, loan)  # noqa: E731
    return PolicyStream(
        stream.name,
        PART_OF_KIND[stream.part],
        stream.direction,
        terms,
        occasions(terms, course) if possible else [],
        lambda _: amount,
        relative,
        level=None if varies else amount,
    )


def _by_calendar(
    stream: Stream, increase: Increase, terms: Terms, rate: float, policy: Policy, course: Course
) -> Callable[[Occasion], float]:
    growth = Growth(increase, rate, policy["commencement_date"], terms.clock, course)

    def relative(occasion: Occasion) -> float:
        year = max(0, (occasion.month - terms.clock) // 12)
        return share_of_year(stream.pattern, year) * growth.at(occasion.month)

    return relative


def _looking_back(
    stream: Stream, made: PolicyStream, base: PolicyStream, policy: Policy, course: Course
) -> PolicyStream:
    """A stream whose amount depends on what another one has paid up to then."""
    on_move, level = stream.on is not None, made.level or 0.0
    if stream.returns is not None:
        interest = number(policy, stream.returns.interest, f"stream '{stream.name}' needs a rate of interest")
    if not made.occasions:
        return made
    if stream.proportion is not None:
        part = proportion(base, course.step_months)
        return replace(made, amount=lambda occasion: level * part(occasion), level=None)
    if stream.returns is None:
        amount, lasts = remaining(level, base, on_move)
        return replace(made, amount=amount, level=None, lasts=lasts)
    back = returned(base, interest, on_move)
    return replace(made, amount=lambda occasion: level * back(occasion), level=None)


def _share_of(stream: Stream, base: PolicyStream) -> PolicyStream:
    clock = base.terms.start if stream.clock == "stream" else 0

    def relative(occasion: Occasion) -> float:
        year = max(0, (occasion.month - clock) // 12)
        return base.relative(occasion) * share_of_year(stream.pattern, year)

    part = PART_OF_KIND[stream.part]
    return PolicyStream(
        stream.name,
        part,
        stream.direction or ("in" if part == "premiums" else "out"),
        base.terms,
        base.occasions,
        lambda occasion: base.amount(occasion) * stream.share,
        relative,
    )


def terms_of(stream: Stream, policy: Policy, step_months: int, waits_for: Stream | None = None) -> Terms:
    """Return when a stream is paid; waits_for: the stream after whose guarantee it begins.

    Raises NotValued for durations that do not fit it.
    """
    way: Way = stream.paid if stream.on is None else "lapse" if stream.on == "lapse" else "death"
    if isinstance(stream.from_, AfterGuarantee):
        assert waits_for is not None  # the design has checked it
        start = _end_of_guarantee(stream, waits_for, policy, step_months)
    else:
        start = _months(stream.from_, stream, policy, step_months)
    end = None if stream.to is None else _months(stream.to, stream, policy, step_months)
    if way == "once":
        end = start
    if end is not None and end < start:
        raise NotValued("end before start", f"stream '{stream.name}'", f"{start} to {end} months", "to >= from")
    a_year = _frequency(stream, policy)
    begins = stream.from_ if waits_for is None else waits_for.from_
    by_age = isinstance(begins, AtAge) or isinstance(stream.to, AtAge)
    periodic = way in ("advance", "arrears") and not by_age
    if periodic and end is not None and (end - start) % (12 // a_year):
        rule = f"with {a_year} payments a year it lasts a whole number of periods"
        raise NotValued("duration not in whole periods", f"stream '{stream.name}'", f"{end - start} months", rule)
    return Terms(
        way,
        stream.while_ == "certain",
        start,
        end,
        a_year,
        0 if stream.guarantee is None else _months(stream.guarantee, stream, policy, step_months),
        {"Woolhouse 2": 2, "Woolhouse 3": 3}.get(stream.payments, 0),
        start if stream.clock == "stream" and looked_back_at(stream) is None else 0,
    )


def _end_of_guarantee(stream: Stream, other: Stream, policy: Policy, step_months: int) -> int:
    # The design has checked both.
    assert other.guarantee is not None
    assert not isinstance(other.from_, AfterGuarantee)
    begins = _months(other.from_, other, policy, step_months)
    ends = begins + _months(other.guarantee, other, policy, step_months)
    if stream.on is not None and ends % step_months:
        raise NotValued("duration not in whole years", other.name, ends / 12, "needed on a move with the step 'year'")
    return ends


def _months(value: float | str | AtAge, stream: Stream, policy: Policy, step_months: int) -> int:
    if isinstance(value, AtAge):
        birth, commencement = policy["birth_date"], policy["commencement_date"]
        return first_point_at_age(birth, commencement, value.age, step_months)
    years = number(policy, value, f"stream '{stream.name}' needs a duration")
    field = value if isinstance(value, str) else f"stream '{stream.name}'"
    months = round(12 * years)
    if abs(12 * years - months) > TOLERANCE or months < 0:
        raise NotValued("duration not in whole months", field, years, "years from commencement, in whole months")
    if stream.on is not None and months % step_months:
        raise NotValued("duration not in whole years", field, years, "needed on a move with the step 'year'")
    return months


def _frequency(stream: Stream, policy: Policy) -> int:
    if stream.on is not None or stream.paid == "once":
        return 1
    a_year = number(policy, stream.a_year, f"stream '{stream.name}' needs a number of payments a year")
    if a_year not in (1, 2, 4, 12):
        raise NotValued("frequency not 1 2 4 12", str(stream.a_year), a_year, "1, 2, 4 or 12 payments a year")
    return int(a_year)


def number(policy: Policy, value: float | str | None, need: str) -> float:
    """Return a stated number, or the policy's in the column named. Raises NotValued where it is missing."""
    found = policy.get(value) if isinstance(value, str) else value
    if isinstance(found, bool) or not isinstance(found, int | float) or not math.isfinite(found):
        raise NotValued("value missing", str(value), found, need)
    return float(found)


def relative_amount(stream: Stream, terms: Terms, rate: float, month: int, loan: float = 0.0) -> float:
    """Return pattern x increase x decrease at a month from commencement; rates of the increase and of a loan."""
    year = max(0, (month - terms.clock) // 12)
    relative = share_of_year(stream.pattern, year)
    if stream.increase is not None:
        relative *= (1 + rate) ** year if stream.increase.kind == "compound" else 1 + rate * year
    if stream.decrease is not None and terms.end is not None:
        passed, months = month - terms.start, terms.end - terms.start
        if isinstance(stream.decrease, Loan):
            by = 12 if stream.decrease.instalments == "yearly" else 1
            return relative * balance(loan, (months - passed // by * by) / 12, months / 12)
        relative *= 1 - (passed // 12 * 12 if stream.decrease == "yearly" else passed) / months
    return relative


def balance(rate: float, left: float, term: float) -> float:
    """Return what is left of a loan of 1 with so many years left: the value of its instalments, a_left / a_term."""
    if rate == 0:
        return left / term
    force = math.log1p(rate)
    return math.expm1(-force * left) / math.expm1(-force * term)


def share_of_year(pattern: list[Share] | None, year: int) -> float:
    """Return the share of the piece that holds a year, counted from 0; 0 after the last stated year."""
    if pattern is None:
        return 1.0
    for piece in pattern:
        if piece.years is None or year < piece.years:
            return piece.share
        year -= piece.years
    return 0.0
