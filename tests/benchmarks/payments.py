"""The streams of one product as plain arrays: what the yardsticks of the valuation are given.

Written from the definitions in designs and basis, apart from the engine. ``Lines`` raises ValueError for streams that
the demo's products do not have. g counts months since commencement.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from assumptions.rules import first_fit
from portfolios.chunk import Chunk
from portfolios.designs import AtAge, Design, Stream
from projection.settings import Settings

LONGEST = 12 * 125
WAYS = {"advance": 0, "arrears": 1, "once": 2, "death": 3, "lapse": 4}
PARTS = {"benefit": 0, "expense": 1, "commission": 1, "premium": 2}

Whole = NDArray[np.int64]
Reals = NDArray[np.float64]


@dataclass
class Schedule:
    """When money falls due: way, and per policy start, end, period and guaranteed time in months."""

    way: int
    start: Whole
    end: Whole
    period: Whole
    guaranteed: Whole


@dataclass
class Line:
    """One row of the cash flows: amount per policy, and its relative amounts rows[which][month of the payment].

    inflating: relative amounts by calendar month from that of the valuation date, or None.
    """

    name: str
    part: int
    schedule: int
    amount: Reals
    rows: Reals
    which: Whole
    inflating: Reals | None = None
    own: bool = True


class Rules:
    """The rule that fits each policy, in every part of the basis."""

    def __init__(self, chunk: Chunk, design: Design, basis: Basis) -> None:
        document = basis.document
        columns = [name for name in document.rule_columns() if name != "product"]
        values = [np.array(chunk.raw(name).to_pylist()).astype(str) for name in columns]
        numbers = [np.unique(one, return_inverse=True)[1] for one in values]
        _, first, self.kind = np.unique(np.stack(numbers), axis=1, return_index=True, return_inverse=True)
        self.kind = self.kind.reshape(-1)
        self.examples = [{**chunk.policy(i), "product": design.code} for i in first.tolist()]
        self.mortality = self.fits(document.mortality.rule)
        self.lapse = self.fits(document.lapse.rule) if document.lapse else self.kind * 0
        self.interest = self.fits(document.interest.rule)

    def fits(self, rules: Any) -> Whole:
        """Position of the first rule that fits, per policy."""
        found = [first_fit(rules, example) for example in self.examples]
        return np.array(found, dtype=np.int64)[self.kind]


def distinct(*keys: Any) -> tuple[Any, Whole]:
    found, which = np.unique(np.stack(keys, axis=1), axis=0, return_inverse=True)
    return found, which.reshape(-1)


def month_later(dates: Any, months: Any) -> Any:
    """The same day so many months later, or the last of the month where the day is missing."""
    month = dates.astype("M8[M]")
    later = month + months
    last = (later + 1).astype("M8[D]") - 1
    return np.minimum(later.astype("M8[D]") + (dates - month.astype("M8[D]")), last)


class Lines:
    """The schedules and lines of a product."""

    def __init__(
        self, chunk: Chunk, design: Design, basis: Basis, settings: Settings, rules: Rules, birth: Any, commenced: Any
    ) -> None:
        self.chunk, self.birth, self.commenced, self.count = chunk, birth, commenced, chunk.n
        self.schedules: list[Schedule] = []
        self.lines: list[Line] = []
        named: dict[str, Line] = {}
        for stream in sorted(design.stream, key=lambda stream: stream.of is not None):
            named[stream.name] = self._own(stream) if stream.of is None else self._share(stream, named[stream.of])
            self.lines.append(named[stream.name])
        self._expenses(list(named.values()), basis, settings, rules)

    def _own(self, stream: Stream) -> Line:
        way = WAYS[stream.on or stream.paid]
        if stream.while_ == "certain" or stream.payments != "at their dates":
            raise ValueError(f"the yardsticks do not cover stream '{stream.name}'")
        start = self._months(stream.from_)
        end = np.full(self.count, LONGEST) if stream.to is None else self._months(stream.to)
        period = 12 // self._numbers(stream.a_year).astype(np.int64) if way <= WAYS["arrears"] else start * 0 + 1
        guaranteed = start * 0 if stream.guarantee is None else self._months(stream.guarantee)
        self.schedules.append(Schedule(way, start, start + 1 if way == WAYS["once"] else end, period, guaranteed))
        amount = self._numbers(stream.amount) * stream.share
        if way <= WAYS["arrears"]:
            amount = amount * period / 12
        rows, which = self._relative(stream, start, end)
        return Line(stream.name, PARTS[stream.part], len(self.schedules) - 1, amount, rows, which)

    def _relative(self, stream: Stream, start: Whole, end: Whole) -> tuple[Reals, Whole]:
        rate = self._numbers(stream.increase.rate) if stream.increase else np.zeros(self.count)
        varies = stream.pattern or stream.increase or stream.decrease
        clock = start if varies and stream.clock == "stream" else start * 0
        keys, which = distinct(rate, clock, *((start, end) if stream.decrease else (clock, clock)))
        rows = np.empty((len(keys), LONGEST))
        month = np.arange(LONGEST)
        for row, (rise, begin, first, last) in zip(rows, keys.tolist(), strict=True):
            year = np.maximum(month - int(begin), 0) // 12
            row[:] = _pattern(stream, year)
            if stream.increase:
                row *= (1 + rise) ** year if stream.increase.kind == "compound" else 1 + rise * year
            if stream.decrease:
                gone = np.maximum(month - int(first), 0)
                gone = gone // 12 * 12 if stream.decrease == "yearly" else gone
                row *= np.maximum(0, 1 - gone / max(1.0, last - first))
        return rows, which

    def _share(self, stream: Stream, base: Line) -> Line:
        start = self.schedules[base.schedule].start
        clock = start if stream.pattern and stream.clock == "stream" else start * 0
        keys, own = distinct(clock)
        rows = np.stack([_pattern(stream, np.maximum(np.arange(LONGEST) - begin, 0) // 12) for begin in keys[:, 0]])
        rows, which = _product(base.rows, base.which, rows, own)
        return Line(stream.name, PARTS[stream.part], base.schedule, base.amount * stream.share, rows, which, own=False)

    def _expenses(self, lines: list[Line], basis: Basis, settings: Settings, rules: Rules) -> None:
        for item, prices in zip(basis.document.expense, basis.expense_prices, strict=True):
            fit = rules.fits(item.rule)
            figures = np.array([[rule.first_year] * 12 + [rule.later_years] * (LONGEST - 12) for rule in item.rule])
            inflating = None
            if prices is not None:
                today = settings.valuation_date
                inflating = prices.levels(np.maximum(prices.months(today.year, today.month) + np.arange(LONGEST), 0))
            ones = np.ones(self.count)
            if item.per == "policy":
                own = [self.schedules[one.schedule] for one in lines if one.own]
                end = np.max([one.end - (one.way == WAYS["once"]) for one in own if one.way != WAYS["lapse"]], axis=0)
                period = np.full(self.count, 12 // item.a_year)
                self.schedules.append(Schedule(0, end * 0, end, period, end * 0))
                schedule = len(self.schedules) - 1
                self.lines.append(Line(item.name, 1, schedule, ones / item.a_year, figures, fit, inflating))
            for line in lines:
                way = self.schedules[line.schedule].way
                if item.per == "claim" and line.part == 0 and line.own and way in (WAYS["death"], WAYS["once"]):
                    self.lines.append(Line(item.name, 1, line.schedule, ones, figures, fit, inflating))
                elif line.part == {"premium": 2, "benefit": 0}.get(item.per):
                    rows, which = _product(line.rows, line.which, figures, fit)
                    self.lines.append(Line(item.name, 1, line.schedule, line.amount, rows, which))

    def _numbers(self, value: Any) -> Reals:
        return self.chunk.number(value) if isinstance(value, str) else np.full(self.count, float(value))

    def _months(self, value: Any) -> Whole:
        if not isinstance(value, AtAge):
            return np.rint(12 * self._numbers(value)).astype(np.int64)
        birthday = month_later(self.birth, 12 * value.age)
        months = (birthday.astype("M8[M]") - self.commenced.astype("M8[M]")).astype(np.int64)
        return np.maximum(0, months + (month_later(self.commenced, months) < birthday))


def _pattern(stream: Stream, year: Whole) -> Reals:
    if not stream.pattern:
        return np.ones(len(year))
    shares = np.zeros(len(year))
    begin = 0
    for piece in stream.pattern:
        end = LONGEST if piece.years is None else begin + piece.years
        shares[(year >= begin) & (year < end)] = piece.share
        begin = end
    return shares


def _product(rows: Reals, which: Whole, others: Reals, other: Whole) -> tuple[Reals, Whole]:
    keys, both = distinct(which, other)
    return rows[keys[:, 0]] * others[keys[:, 1]], both
