"""The expense items of a basis as streams of one policy, in ordinary Python."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from datetime import date

from assumptions.expenses import Expense, ExpenseRule
from assumptions.rules import first_fit
from portfolios.states import States

from .plain_dates import month_after
from .plain_faults import NotValued
from .plain_occasions import Course, Occasion, Terms, occasions
from .plain_streams import Policy, PolicyStream

Figure = Callable[[Occasion], float]


def expense_rule(item: Expense, policy: Policy) -> int:
    """Return the position of the rule that fits. Raises NotValued where none does."""
    position = first_fit(item.rule, policy)
    if position is None:
        raise NotValued("no rule fits", f"expense '{item.name}'", None, "one of the item's rules must fit")
    return position


def expense_streams(
    item: Expense,
    rule: ExpenseRule,
    streams: list[PolicyStream],
    own: set[str],
    running: States,
    course: Course,
    commencement: date,
) -> Iterator[PolicyStream]:
    """Yield what one item of expense adds to the streams of a design.

    ``own`` names the streams that have terms of their own, that is, are not a share of another one; running: the
    states in which a contract on two lives runs.
    """

    def by_year(occasion: Occasion) -> float:
        return rule.first_year if occasion.month < 12 else rule.later_years

    def grown(occasion: Occasion) -> float:
        if item.inflation is None:
            return 1.0
        return item.inflation.factor(*month_after(commencement, occasion.point))

    if item.per == "policy":
        mine = [stream.terms for stream in streams if stream.name in own]
        terms = _contract([one for one in mine if course.lives.may_be(one.states)], item.a_year)
        if terms is not None:
            terms = terms._replace(states=running)
            figure: Figure = lambda occasion: by_year(occasion) / item.a_year  # noqa: E731
            yield _stream(item, terms, occasions(terms, course), figure, grown)
        return
    for stream in streams:
        if item.per == "claim":
            if stream.part == "benefits" and stream.name in own and stream.terms.way in ("death", "once"):
                yield _stream(item, stream.terms, list(filter(stream.lasts, stream.occasions)), by_year, grown)
        elif stream.part == f"{item.per}s":
            yield _stream(item, stream.terms, stream.occasions, _times(stream.amount, by_year), stream.relative)


def _times(amount: Figure, share: Figure) -> Figure:
    return lambda occasion: amount(occasion) * share(occasion)


def _stream(item: Expense, terms: Terms, payments: list[Occasion], amount: Figure, relative: Figure) -> PolicyStream:
    return PolicyStream(item.name, "expenses", "out", terms, payments, amount, relative)


def _contract(terms: list[Terms], a_year: int) -> Terms | None:
    """Return the terms of an amount paid in advance while the contract runs.

    That is until the latest end of the streams paid while alive, once or on death; None if there are none.
    """
    ends = [term.end for term in terms if term.way in ("once", "death") or (term.way != "lapse" and not term.certain)]
    if not ends:
        return None
    known = [end for end in ends if end is not None]
    return Terms("advance", False, 0, max(known) if len(known) == len(ends) else None, a_year)
