"""When the payments of a stream on named states fall due and with which probability, in ordinary Python."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from .plain_chain import Chain

if TYPE_CHECKING:
    from .plain_occasions import Course, Terms

Due = tuple[int, float, int, float]
"""Point, month of the payment, month of its relative amount, probability."""


def on_states(terms: Terms, course: Course, chain: Chain, end: int) -> Iterator[Due]:
    """Yield the payments of a stream that are still to come; end: its last month. Lapses are in the probability."""
    states = terms.states or frozenset()
    if terms.way in ("death", "lapse"):
        yield from _moves(terms, course, chain, end)
    elif terms.way == "once":
        if terms.start >= course.next_point and terms.start <= max(chain.moves.last, course.next_point):
            yield terms.start, terms.start, max(terms.start - 1, terms.clock), _share(chain, terms.start, states, False)
    else:
        lag = terms.period if terms.way == "arrears" else 0
        for month in range(terms.start, end, terms.period):
            point = month + lag
            if course.next_point <= point <= end:
                yield point, point, month, _share(chain, point, states, not lag)


def _share(chain: Chain, point: int, states: frozenset[str], after: bool) -> float:
    # On the valuation date the state is known, and so are the lapses.
    if point == chain.u:
        return float(chain.state in states)
    return chain.share(point, states, after)


def _moves(terms: Terms, course: Course, chain: Chain, end: int) -> Iterator[Due]:
    from .plain_occasions import _claim_paid

    step = course.step_months
    first = (course.u.numerator // course.u.denominator // step + 1) * step
    for point in range(max(first, terms.start + step), end + 1, step):
        start = float(course.u) if point == first else float(point - step)
        if terms.way == "lapse":
            yield point, point, point - step, chain.lapsed(point)
        else:
            paid = _claim_paid(course.claims, start, point)
            yield point, paid, point - step, chain.moved(point, terms.moves or frozenset())
