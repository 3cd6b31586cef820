"""What another stream has paid up to a point, with or without interest, in ordinary Python."""

from __future__ import annotations

from bisect import bisect_left, bisect_right
from collections.abc import Callable
from itertools import count, takewhile
from typing import TYPE_CHECKING

from .plain_occasions import Occasion

if TYPE_CHECKING:
    from .plain_streams import PolicyStream

_FAR = 12 * 200
"""Months from commencement beyond which nobody lives to receive anything."""


class Balance:
    """The payments of a stream, paid into an account that earns interest.

    base: the stream; interest: yearly rate. The account is carried on from payment to payment.
    """

    def __init__(self, base: PolicyStream, interest: float) -> None:
        self._growth = 1 + interest
        self._arrears = base.terms.way == "arrears"
        self._points: list[int] = []
        self._after: list[float] = []
        held, last = 0.0, 0
        for point, month in _payments(base):
            paid = Occasion(point, point, month, 1.0, 1.0, 1.0)
            held = held * self._growth ** ((point - last) / 12) + base.amount(paid) * base.relative(paid)
            last = point
            self._points.append(point)
            self._after.append(held)

    def at(self, occasion: Occasion, on_move: bool) -> float:
        """Return what the account holds at the point of an occasion, of the payments that count for it."""
        if on_move:
            number = bisect_right(self._points, occasion.month)
        elif self._arrears:
            number = bisect_right(self._points, occasion.point)
        else:
            number = bisect_left(self._points, occasion.point)
        if number == 0:
            return 0.0
        since = occasion.point - self._points[number - 1]
        return self._after[number - 1] * float(self._growth ** (since / 12))

    def reached(self, amount: float) -> float:
        """Return the first point at which so much has been paid; infinity for never."""
        enough = (point for point, held in zip(self._points, self._after, strict=True) if held >= amount)
        return next(enough, float("inf"))


def _payments(base: PolicyStream) -> list[tuple[int, int]]:
    """Points of all payments from commencement on, and the months of their relative amounts."""
    terms = base.terms
    end = _FAR if terms.end is None else min(terms.end, _FAR)
    if terms.way == "once":
        return [(terms.start, max(terms.start - 1, terms.clock))]
    starts = list(takewhile(lambda month: month < end, count(terms.start, terms.period)))
    if terms.way == "advance":
        return [(month, month) for month in starts]
    return [(month + terms.period, month) for month in starts if month + terms.period <= end]


def returned(base: PolicyStream, interest: float, on_move: bool) -> Callable[[Occasion], float]:
    """Return the amount of a benefit that gives another stream's payments back."""
    balance = Balance(base, interest)
    return lambda occasion: balance.at(occasion, on_move)


def proportion(base: PolicyStream, step_months: int) -> Callable[[Occasion], float]:
    """Return the part of an instalment in arrears from its last date to the middle of the step of a death."""
    terms = base.terms

    def part(occasion: Occasion) -> float:
        begins = occasion.month
        if begins < terms.start or (terms.end is not None and begins >= terms.end):
            return 0.0
        last = terms.start + (begins - terms.start) // terms.period * terms.period
        months = begins + 0.5 - last if step_months == 1 else terms.period / 2
        instalment = Occasion(last + terms.period, last + terms.period, last, 1.0, 1.0, 1.0)
        return base.amount(instalment) * base.relative(instalment) * months / terms.period

    return part


def remaining(
    amount: float, base: PolicyStream, on_move: bool
) -> tuple[Callable[[Occasion], float], Callable[[Occasion], bool]]:
    """Return what an amount is still above another stream's payments, and whether they have not reached it yet."""
    balance = Balance(base, 0.0)
    reached = balance.reached(amount)
    in_arrears = base.terms.way == "arrears"

    def lasts(occasion: Occasion) -> bool:
        return (occasion.month if on_move else occasion.point if in_arrears else occasion.point - 1) < reached

    return lambda occasion: amount - balance.at(occasion, on_move) if lasts(occasion) else 0.0, lasts
