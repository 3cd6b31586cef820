"""Rows of what another stream has paid up to a month: premiums returned, value protection, and the
part of an instalment up to the date of death.

A row depends on the terms of the other stream only: its dates, its frequency, its relative amounts. All policies
that have these in common share it. Value protection is a difference of two such streams, both cut off at the month in
which the payments reach the amount.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from portfolios.chunk import Chunk
from portfolios.designs import Stream
from portfolios.returns import looked_back_at

from .cells import distinct
from .relative import Shape, shape_of
from .slots import Slots
from .streams import WIDE

Row = NDArray[np.float64]
Place = Callable[[Hashable, Callable[[], Row]], int]
Money = tuple[str | None, float]
"""A column of the extract, or none, and a factor."""


@dataclass(frozen=True)
class PaidSoFar:
    """What a row is made of; start, end, period: columns of the whole-number matrix of the other stream's terms.

    part: the payments so far with interest, or of an amount less the payments so far without interest the one
    or the other, or the part of an instalment since the last one; once: the column of the own date of a stream paid
    once, -1 on a move; step: months of a projection step; price and payment: the amount and what the other stream's
    payments are multiples of.
    """

    part: Literal["returned", "price", "paid", "proportion"]
    shape: Shape
    way: Literal["advance", "arrears", "once"]
    start: int
    end: int
    period: int
    once: int
    step: int
    interest: float | str = 0.0
    price: Money = (None, 0.0)
    payment: Money = (None, 0.0)

    @property
    def lasts(self) -> bool:
        """Whether the row says how long there is something to pay."""
        return self.part == "price"

    def places(
        self,
        place: Place,
        chunk: Chunk,
        whole: NDArray[np.int32],
        order: NDArray[np.int64],
        policies: NDArray[np.int64],
        passed: NDArray[np.int32],
    ) -> NDArray[np.int32]:
        """Return the place of the row for each of some policies, as RelativeRows.places_of; T does not matter."""
        rows = order[policies]
        firsts, inverse = _alike(self._figures(chunk, whole, rows, policies))
        terms = [self._terms(chunk, whole, rows[i], policies[i]) for i in firsts.tolist()]
        if self.part in ("returned", "proportion"):
            made = [place((self, *one), lambda one=one: self.row(*one)) for one in terms]  # type: ignore[misc]
            return np.array(made, dtype=np.int32)[inverse]
        ratio = self._ratio(chunk, rows)
        reached = np.empty(len(rows), dtype=np.int64)
        sofar = [self.row(*one) for one in terms]
        for number, row in enumerate(sofar):
            mine = inverse == number
            reached[mine] = np.searchsorted(np.maximum.accumulate(row), ratio[mine])
        keys, again = distinct(inverse * (WIDE + 1) + reached)
        found = []
        for key in keys.tolist():
            number, months = divmod(key, WIDE + 1)
            if self.part == "price":
                found.append(place(("until", months), lambda months=months: _until(np.ones(WIDE), months)))  # type: ignore[misc]
            else:
                known = (self, *terms[number], months)
                found.append(place(known, lambda n=number, m=months: _until(sofar[n], m)))  # type: ignore[misc]
        return np.array(found, dtype=np.int32)[again]

    def _figures(
        self, chunk: Chunk, whole: NDArray[np.int32], rows: NDArray[np.int64], policies: NDArray[np.int64]
    ) -> list[NDArray[np.float64] | NDArray[np.int32]]:
        """What rows differ by, per policy."""
        columns = [column for column in (self.start, self.end, self.period) if column >= 0]
        found: list[NDArray[np.float64] | NDArray[np.int32]] = [whole[column, policies] for column in columns]
        if self.once >= 0:
            found.append((whole[self.once, policies] > 0).astype(np.int32))
        found += [chunk.number(rate)[rows] for rate in (self.shape.rate, self.interest) if isinstance(rate, str)]
        return found

    def _terms(
        self, chunk: Chunk, whole: NDArray[np.int32], row: int, policy: int
    ) -> tuple[int, int, int, bool, float, float]:
        start = min(max(int(whole[self.start, policy]), 0), WIDE - 1)
        end = WIDE if self.end < 0 else min(max(int(whole[self.end, policy]), 0), WIDE)
        period = 12 if self.period < 0 else max(int(whole[self.period, policy]), 1)
        begun = self.once < 0 or bool(whole[self.once, policy] > 0)
        rate, interest = (
            float(chunk.number(one)[row]) if isinstance(one, str) else one for one in (self.shape.rate, self.interest)
        )
        return start, end, period, begun, rate, interest

    def row(self, start: int, end: int, period: int, begun: bool, rate: float, interest: float) -> Row:
        """Sum of the payments that count, by month from commencement of the benefit's relative amount.

        start, end, period: months of the other stream; begun: false at commencement, when nothing counts yet; rate: of
        its increase; interest: yearly.
        """
        if self.part == "proportion":
            return self._since_last(start, end, period, rate)
        due = np.zeros(WIDE + 1)
        if begun:
            points, months = self._points(start, end, period)
            clock = 0 if self.shape.from_commencement else start
            begin = start if self.shape.from_commencement else 0
            amounts = self.shape.row(rate, begin, max(end - start, 0))
            size = 1.0 if self.way == "once" else period / 12
            due[points] = size * amounts[np.clip(months - clock, 0, WIDE - 1)]
        growth: Row = (1 + interest) ** (np.arange(WIDE + 1) / 12)
        sofar: Row = np.cumsum(due / growth)
        if self.once < 0:
            ahead = growth[:WIDE] * float(1 + interest) ** (self.step / 12)
        else:
            # The relative amount of what is paid once at g is that of g - 1; what falls due in arrears at g counts.
            ahead = growth[1:]
            sofar = sofar[1:] if self.way == "arrears" else sofar
        sums: Row = sofar[:WIDE] * ahead
        return sums

    def _since_last(self, start: int, end: int, period: int, rate: float) -> Row:
        """Part of an instalment for the time from its last date to the middle of the step that starts in a month."""
        shape, months = self.shape, np.arange(WIDE)
        clock, begin = (0, start) if shape.from_commencement else (start, 0)
        passed = np.maximum(months - start, 0)
        of_period = np.clip(months - passed % period - clock, 0, WIDE - 1)
        since = (passed % period + 0.5) / period if self.step == 1 else 0.5
        amounts = shape.row(rate, begin, max(end - start, 0))[of_period]
        running = (months >= start) & (months < end)
        parts: Row = np.where(running, period / 12 * since * amounts, 0.0)
        return parts

    def _points(self, start: int, end: int, period: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Points of the other stream's payments, and the months of their relative amounts."""
        if self.way == "once":
            point = np.array([start])
            return point, np.maximum(point - 1, 0) if self.shape.from_commencement else point
        months = np.arange(start, end, period)
        if self.way == "advance":
            return months, months
        months = months[months + period <= min(end, WIDE)]
        return months + period, months

    def _ratio(self, chunk: Chunk, rows: NDArray[np.int64]) -> NDArray[np.float64]:
        """How many units of the other stream's payments come to the amount."""
        price, payment = (
            np.full(len(rows), factor) if column is None else factor * chunk.number(column)[rows]
            for column, factor in (self.price, self.payment)
        )
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio: NDArray[np.float64] = np.where(payment > 0, price / payment, np.inf)
        return ratio


def paid_so_far(stream: Stream, base: Stream, slots: Slots, step: int, own: int) -> list[tuple[Money, PaidSoFar]]:
    """Return the amounts of a stream that looks back, each with its row per policy; own: column of its start."""
    payment = _money(base.amount, base.share)
    periodic = base.paid != "once"
    common = {
        "shape": shape_of(base),
        "way": base.paid,
        "start": slots.duration(base.from_),  # type: ignore[arg-type]
        "end": -1 if base.to is None else slots.duration(base.to),
        "period": slots.frequency(base.a_year) if periodic else -1,
        "once": -1 if stream.on is not None else own,
        "step": step,
    }
    if stream.proportion is not None:
        row = PaidSoFar(part="proportion", **common)  # type: ignore[arg-type]
        return [(_times(payment, stream.share), row)]
    if stream.returns is not None:
        row = PaidSoFar(part="returned", interest=stream.returns.interest, **common)  # type: ignore[arg-type]
        return [(_times(payment, stream.share), row)]
    assert looked_back_at(stream) == base.name
    price = _money(stream.amount, stream.share)
    return [
        (price, PaidSoFar(part="price", price=price, payment=payment, **common)),  # type: ignore[arg-type]
        (_times(payment, -1.0), PaidSoFar(part="paid", price=price, payment=payment, **common)),  # type: ignore[arg-type]
    ]


def _money(amount: float | str | None, share: float) -> Money:
    return (amount, share) if isinstance(amount, str) else (None, (amount or 0.0) * share)


def _times(money: Money, factor: float) -> Money:
    return money[0], money[1] * factor


def _until(row: Row, months: int) -> Row:
    cut = row.copy()
    cut[months:] = 0.0
    return cut


def _alike(columns: list[NDArray[np.float64] | NDArray[np.int32]]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Return the place of a policy of each kind, and the kind of each policy; alike are those with the same figures."""
    codes = np.zeros(len(columns[0]), dtype=np.int64)
    for column in columns:
        known, own = np.unique(column, return_inverse=True)
        if len(known) > 1:
            codes = distinct(codes * len(known) + own)[1]
    _, firsts, inverse = np.unique(codes, return_index=True, return_inverse=True)
    return firsts, inverse
