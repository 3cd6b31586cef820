"""The expected profits of one new policy in ordinary Python, payment by payment, from the definitions.

Written for a reader who has the page of conventions, Profits, beside it. Cash flows come from the experience
basis, the reserves held from the reserving basis; both see the policy on its day of commencement, with the payments
due on it still to come.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import fsum
from typing import Any, Literal, NamedTuple

from assumptions.basis import Basis
from portfolios.designs import Design

from .plain import course_and_streams
from .plain_faults import NotValued
from .plain_occasions import Course, Occasion, Terms
from .plain_streams import Policy, PolicyStream
from .settings import Settings, Step

Reserves = Literal["gross premium", "none"]


class Flow(NamedTuple):
    """One expected payment per policy sold, in currency; out is positive, in negative.

    paid: months from commencement to the payment; belongs: 0 at outset, else number of the period that it counts
    in; certain_from: point from which it no longer depends on survival or lapse, if any; reached: the payment is
    past at later months than this, half a month before its own point where it closes the month.
    """

    stream: str
    expected: float
    paid: float
    belongs: int
    certain_from: int | None
    reached: float


@dataclass(frozen=True)
class PlainProfit:
    """Profits of one policy: point 0 is outset, then one period apart; money in currency, per policy sold unless said.

    flows: stream to its payments by period, in the direction of the office: premiums positive, outgo negative;
    interest: earned on all of them and on the reserve at the period's start; reserves: held at each point, per
    policy sold; in_force: share in force at each point on the experience basis; signature = flows + interest
    less the increase in reserves; vector: the same per policy in force at the start of the period.
    """

    flows: dict[str, list[float]]
    interest: list[float]
    reserves: list[float]
    in_force: list[float]
    signature: list[float]
    vector: list[float]


def plain_profit(
    policy: Mapping[str, Any],
    design: Design,
    experience: Basis,
    reserving: Basis,
    *,
    step: Step = "month",
    period: Step = "year",
    reserves: Reserves = "gross premium",
) -> PlainProfit:
    """Return the expected profits of a new policy.

    policy: extract column to Python value; step: of the projection on both bases; period: of the profits.
    Raises NotValued for a policy that the reserve run would refuse on either basis, and for a contract on two
    lives; ValueError for a period shorter than the step.
    """
    if design.states != "one life":
        raise NotValued("lives not known", "lives", design.states, "profits are those of contracts on one life")
    if policy.get("lives") == "none":
        raise NotValued("nobody alive at the valuation date", "lives", "none", "a policy is sold to somebody who lives")
    months = 12 if period == "year" else 1
    if months % (12 if step == "year" else 1):
        raise ValueError("the period of the profits is shorter than the step of the projection")
    settings = Settings(policy["commencement_date"], step, "outstanding")
    course, streams = course_and_streams(policy, design, experience, settings)
    flows = _flows(streams, months)
    periods = max((flow.belongs for flow in flows), default=0)
    held = [0.0] * (periods + 1)
    if reserves == "gross premium":
        held = _reserves(policy, design, reserving, settings, course, months, periods)
    return _profits(flows, held, course, months, periods)


def _profits(flows: list[Flow], held: list[float], course: Course, months: int, periods: int) -> PlainProfit:
    by_stream = {flow.stream: [0.0] * (periods + 1) for flow in flows}
    ends: list[list[float]] = [[] for _ in range(periods + 1)]
    nominal: list[list[float]] = [[] for _ in range(periods + 1)]
    for flow in flows:
        # Interest at the earned rate from the payment to the period's end; less than nothing on late claims.
        growth = course.discount(flow.paid) / course.discount(months * flow.belongs)
        by_stream[flow.stream][flow.belongs] -= flow.expected
        nominal[flow.belongs].append(-flow.expected)
        ends[flow.belongs].append(-flow.expected * growth)
    in_force = [_in_force(course, months * t) for t in range(periods + 1)]
    interest, signature = [fsum(ends[0]) - fsum(nominal[0])], [fsum(ends[0]) - held[0]]
    for t in range(1, periods + 1):
        growth = course.discount(months * (t - 1)) / course.discount(months * t)
        interest.append(fsum(ends[t]) - fsum(nominal[t]) + held[t - 1] * (growth - 1))
        signature.append(fsum([*ends[t], held[t - 1] * growth, -held[t]]))
    there = [1.0, *in_force[:-1]]
    vector = [amount / share if share > 0 else 0.0 for amount, share in zip(signature, there, strict=True)]
    return PlainProfit(by_stream, interest, held, in_force, signature, vector)


def _flows(streams: list[PolicyStream], months: int) -> list[Flow]:
    return [_flow(stream, occasion, months) for stream in streams for occasion in stream.occasions]


def _flow(stream: PolicyStream, occasion: Occasion, months: int) -> Flow:
    out = stream.sign * (-1 if stream.part == "premiums" else 1)
    amount = stream.amount(occasion) * stream.relative(occasion) * occasion.weight
    # By Woolhouse's formula payments stand at the ends of a year, the later of which closes it.
    advance = stream.terms.way == "advance" and (not stream.terms.woolhouse or occasion.month == occasion.point)
    period = occasion.point // months + 1 if advance else -(-occasion.point // months)
    certain = _certain_from(stream.terms, occasion)
    expected = out * amount * (occasion.survival * occasion.persistency)
    reached = occasion.point + (0.0 if advance else -0.5)
    return Flow(stream.name, expected, occasion.paid, period, certain, reached)


def _certain_from(terms: Terms, occasion: Occasion) -> int | None:
    """Return the point from which a payment is certain: outset, or the start of a stream within its guarantee."""
    if terms.certain:
        return 0
    last = terms.start + terms.guaranteed
    if terms.way in ("advance", "arrears") and terms.guaranteed:
        inside = occasion.point < last if terms.way == "advance" else occasion.point <= last
        return terms.start if inside else None
    return None


def _in_force(course: Course, point: int) -> float:
    try:
        return course.alive(point, None) * course.lapses.at(point)
    except NotValued:  # after the end of a table that is not closed nothing depends on survival any more
        return 0.0


def _reserves(
    policy: Policy, design: Design, basis: Basis, settings: Settings, course: Course, months: int, periods: int
) -> list[float]:
    """Return the reserve per policy sold at the start of each period, and nothing at the end of the last.

    What each later payment is worth per policy in force on the reserving basis, times the share in force on the
    experience basis; from the point at which it becomes certain both shares are those of that point.
    """
    own, streams = course_and_streams(policy, design, basis, settings)
    flows = _flows(streams, months)
    held = []
    for t in range(periods):
        point, parts = months * t, []
        for flow in flows:
            if flow.reached < point:
                continue
            sure = point if flow.certain_from is None else min(point, flow.certain_from)
            share = _in_force(own, sure)
            if share > 0:
                value = flow.expected * own.discount(flow.paid) / own.discount(point)
                parts.append(value / share * _in_force(course, sure))
        held.append(fsum(parts))
    return [*held, 0.0]
