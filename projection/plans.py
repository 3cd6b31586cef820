"""Plans: the streams of a cell, from the product's design and the basis's expenses, as segments for the loops."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from assumptions.expenses import Expense
from portfolios.designs import AtAge, Design, Stream
from portfolios.returns import looked_back_at

from . import streams as s
from .cells import Cell
from .growth import growth_of
from .lives import Terms, begun, probability, running, states_of
from .pool import ONES
from .relative import RelativeRows, pattern_of, shape_of
from .returned import paid_so_far
from .slots import Slots

_PART = {"premium": s.PREMIUMS, "benefit": s.BENEFITS, "expense": s.EXPENSES, "commission": s.EXPENSES}


Account = tuple["_Record", tuple[tuple[int, float], ...]]
"""What gathers cash flows: the shape of a segment, and the lines that share them, each with its share."""


@dataclass(frozen=True)
class Line:
    """One row of the cash flow table."""

    product: str
    stream: str
    part: str
    direction: str


@dataclass(frozen=True)
class _Record:
    """A stream, or a part of one, that is paid in one way."""

    line: int = 0
    part: int = s.BENEFITS
    when: int = s.ADVANCE
    before: int = 0
    cover: int = s.ALIVE
    window: int = s.OWN_DATES
    amount: int = -1
    factor: float = 1.0
    power: int = 0
    start: int = -1
    end: int = -1
    period: int = -1
    guarantee: int = -1
    clock: int = 0
    relative: int = ONES
    changing: int = -1
    calendar: int = -1
    span_from: int = 0
    span_to: int = s.FOR_EVER
    clip_from: int = 0
    clip_to: int = s.FOR_EVER
    whole: int = 0
    own: int = 1
    life: int = s.FIRST
    term: float = 1.0
    """Factor of the life's curve in the probability of the states that the stream depends on."""

    def clipped(self, begin: int, end: int) -> _Record:
        """The record for payments of months ``begin`` to ``end`` from commencement only."""
        return replace(self, clip_from=max(self.clip_from, begin), clip_to=min(self.clip_to, end))


_PARTS = ("benefits", "expenses", "premiums")
"""Fields with the shares of the parts, by their codes."""

_SHARED = [name for name in s.SEGMENT.names or () if name not in ("account", "largest", *_PARTS)]
"""Fields that a segment takes from its records."""


@dataclass
class Plans:
    """The plans of all cells met so far: their segments, and the range of segments that belongs to each cell.

    accounts: per account of expected cash flows, the lines that take a share of it, with their shares.
    """

    designs: list[Design]
    basis: Basis
    relative: RelativeRows
    step: int = 1
    """Months of a projection step."""
    slots: Slots = field(default_factory=Slots)
    lines: dict[Line, int] = field(default_factory=dict)
    segments: NDArray[Any] = field(default_factory=lambda: np.zeros(0, s.SEGMENT))
    ranges: NDArray[np.int64] = field(default_factory=lambda: np.zeros((0, 2), np.int64))
    accounts: dict[Account, int] = field(default_factory=dict)
    _known: dict[tuple[int, tuple[int, ...], str, str, tuple[bool, ...]], tuple[int, int]] = field(default_factory=dict)

    def add(self, cell: Cell) -> None:
        """Add the plan of the next cell; a cell without rules gets an empty one.

        Cells that differ only in rates share their plan.
        """
        key = (cell.design, cell.expenses, cell.missing, cell.lives, cell.streams)
        if key not in self._known:
            records = [] if cell.missing else list(self._records(self._design(cell), cell))
            begin = len(self.segments)
            made = list(segments_of(records))
            rows = np.zeros(len(made), s.SEGMENT)
            for row, (shape, charged) in zip(rows, made, strict=True):
                self._fill(row, shape, charged)
            self.segments = np.concatenate((self.segments, rows))
            self._known[key] = (begin, len(self.segments))
        self.ranges = np.concatenate((self.ranges, [self._known[key]]))

    def _design(self, cell: Cell) -> Design:
        """The design with the streams that a cell's policies have."""
        design = self.designs[cell.design]
        return design.having(cell.streams) if cell.streams else design

    def _fill(self, row: Any, shape: _Record, charged: list[_Record]) -> None:
        for name in _SHARED:
            row[name] = getattr(shape, name)
        shares = tuple((record.line, record.factor / shape.factor) for record in charged)
        row["account"] = self.accounts.setdefault((shape, shares), len(self.accounts))
        row["largest"] = self.relative.largest(shape.relative) * self.relative.largest(shape.calendar)
        for record in charged:
            row[_PARTS[record.part]] += record.factor / shape.factor

    def using(self, column: int) -> NDArray[np.bool_]:
        """Say of each cell whether some stream of it looks at a column of the whole-number matrix."""
        uses = np.zeros(len(self.ranges), dtype=bool)
        looked = np.zeros(len(self.segments) + 1, dtype=np.int64)
        for name in ("start", "end", "guarantee", "period", "changing"):
            looked[1:] |= self.segments[name] == column
        # The largest of some durations looks at each of them, and so does a sum.
        for (kind, parts), made in self.slots.whole.items():
            if kind in ("latest", "sum") and column in parts:  # type: ignore[operator]
                looked[1:] |= (self.segments["end"] == made) | (self.segments["start"] == made)
        until = np.cumsum(looked)
        uses[:] = until[self.ranges[:, 1]] > until[self.ranges[:, 0]]
        return uses

    def _records(self, design: Design, cell: Cell) -> Iterator[_Record]:
        made: dict[str, list[_Record]] = {}
        for stream in sorted(design.stream, key=lambda stream: stream.of is not None):
            if stream.of is None:
                states = running(design) if stream.on == "lapse" else states_of(stream)
                terms = probability(states, cell.lives)
                made[stream.name] = list(_on_lives(self._stream(design, stream), terms, begun(states, cell.lives)))
            else:
                made[stream.name] = list(self._share(design, stream, made))
            yield from made[stream.name]
        for item, rule in zip(self.basis.document.expense, cell.expenses, strict=True):
            yield from self._expense(design, item, rule, made, probability(running(design), cell.lives))

    def _line(self, design: Design, name: str, part: str, direction: str) -> int:
        return self.lines.setdefault(Line(design.code, name, part, direction), len(self.lines))

    def _stream(self, design: Design, stream: Stream) -> Iterator[_Record]:
        amount, factor = self.slots.amount(stream.amount if stream.amount is not None else 0.0)
        start = self.slots.start(design, stream)
        end = -1 if stream.to is None else self.slots.duration(stream.to)
        shape = shape_of(stream)
        record = _Record(
            line=self._line(design, stream.name, stream.part, stream.direction or "out"),
            part=_PART[stream.part],
            amount=amount,
            factor=factor * stream.share * _sign(stream),
            start=start,
            end=end,
            clock=int(stream.clock == "commencement"),
            cover=s.CERTAIN if stream.while_ == "certain" else s.ALIVE,
        )
        today = 12 * self.relative.year + self.relative.month - 1
        growth = growth_of(stream, self.basis.document.index, start, today)
        if growth is not None:
            record = replace(record, changing=self.slots.changing(self.relative.of_kind(growth)))
        elif shape.changing:
            number = self.relative.per_policy(shape, start, end)
            record = replace(record, changing=self.slots.changing(number))
        else:
            record = replace(record, relative=self.relative.fixed(shape))
        if looked_back_at(stream) is not None:
            yield from self._looking_back(design, stream, record)
        elif stream.on is not None:
            yield replace(record, when=s.LAPSE if stream.on == "lapse" else s.DEATH)
        elif stream.paid == "once":
            yield replace(record, when=s.ONCE, before=1, end=start)
        else:
            yield from self._periodic(design, stream, record)

    def _looking_back(self, design: Design, stream: Stream, record: _Record) -> Iterator[_Record]:
        """The parts of a benefit on a move or once that depends on what another stream has paid."""
        when = s.ONCE if stream.on is None else s.LAPSE if stream.on == "lapse" else s.DEATH
        record = replace(record, when=when, clock=1, relative=ONES)
        if when == s.ONCE:
            record = replace(record, before=1, end=record.start)
        base = design.named(str(looked_back_at(stream)))
        for (column, figure), row in paid_so_far(stream, base, self.slots, self.step, record.start):
            amount, factor = self.slots.amount(figure if column is None else column)
            factor *= 1.0 if column is None else figure
            changing = self.slots.changing(self.relative.of_kind(row))
            # What is taken off an amount is no payment of its own.
            own = int(row.part != "paid")
            yield replace(record, amount=amount, factor=factor * _sign(stream), changing=changing, own=own)

    def _periodic(self, design: Design, stream: Stream, record: _Record) -> Iterator[_Record]:
        when = s.ARREARS if stream.paid == "arrears" else s.ADVANCE
        ages = design.begins_at_age(stream) or isinstance(stream.to, AtAge)
        whole = int(stream.to is not None and not ages)
        period = self.slots.frequency(stream.a_year)
        before = int(when == s.ARREARS)
        record = replace(record, when=when, before=before, period=period, power=1, whole=whole)
        if stream.guarantee is not None:
            record = replace(record, guarantee=self.slots.duration(stream.guarantee))
            yield replace(record, cover=s.GUARANTEED)
            yield replace(record, cover=s.AFTER_GUARANTEE)
        elif stream.payments == "at their dates":
            yield record
        else:
            yield replace(record, window=s.BROKEN_YEAR)
            yield replace(record, window=s.LAST_YEAR)
            yield from _woolhouse(record, when, third=stream.payments == "Woolhouse 3")

    def _share(self, design: Design, stream: Stream, made: dict[str, list[_Record]]) -> Iterator[_Record]:
        """A share of another stream: its records again, once for each piece of the own pattern."""
        direction = stream.direction or ("in" if stream.part == "premium" else "out")
        line = self._line(design, stream.name, stream.part, direction)
        sign = _sign(stream.model_copy(update={"direction": direction})) * _sign(design.named(str(stream.of)))
        begin = 0
        for years, share in pattern_of(stream.pattern) or ((None, 1.0),):
            end = s.FOR_EVER if years is None else begin + 12 * years
            for record in made[str(stream.of)] if share else ():
                factor = record.factor * stream.share * share * sign
                piece = replace(record, line=line, part=_PART[stream.part], factor=factor)
                if stream.clock == "commencement" or record.start == self.slots.duration(0.0):
                    yield piece.clipped(begin, end)
                else:
                    yield replace(piece, span_from=begin, span_to=end)
            begin = end

    def _expense(
        self, design: Design, item: Expense, rule: int, made: dict[str, list[_Record]], running: Terms
    ) -> Iterator[_Record]:
        line = self._line(design, item.name, "expense", "out")
        figures = item.rule[rule]
        calendar = -1 if item.inflation is None else self.relative.inflating(item.inflation)
        for begin, end, figure in ((0, 12, figures.first_year), (12, s.FOR_EVER, figures.later_years)):
            for record in self._charged(design, item, made, running) if figure else ():
                charged = replace(record, line=line, part=s.EXPENSES, own=0, whole=0, factor=record.factor * figure)
                if calendar >= 0:
                    charged = replace(charged, calendar=calendar)
                yield charged.clipped(begin, end)

    def _charged(
        self, design: Design, item: Expense, made: dict[str, list[_Record]], running: Terms
    ) -> Iterator[_Record]:
        """The records whose payments an expense item is charged on."""
        own = [record for stream in design.stream if stream.of is None for record in made[stream.name]]
        if item.per == "policy":
            if any(_runs(record) for record in own):
                start, period = self.slots.duration(0.0), self.slots.frequency(item.a_year)
                runs = _Record(start=start, end=self._contract_end(own), period=period, power=1)
                yield from _on_lives([runs], running, False)
        elif item.per == "claim":
            ends_early = {self.slots.changing(number) for number in self.relative.until}
            for record in own:
                if record.part == s.BENEFITS and record.when in (s.DEATH, s.ONCE) and record.own:
                    changing = record.changing if record.changing in ends_early else -1
                    yield replace(record, amount=-1, factor=record.term, relative=ONES, changing=changing)
        else:
            part = s.PREMIUMS if item.per == "premium" else s.BENEFITS
            for stream in design.stream:
                if _PART[stream.part] == part:
                    # A payment against the usual direction of its part costs as much as one along it.
                    yield from (replace(one, factor=one.factor * _sign(stream)) for one in made[stream.name])

    def _contract_end(self, records: list[_Record]) -> int:
        ends = {record.end for record in records if _runs(record)}
        return -1 if -1 in ends or not ends else self.slots.latest(tuple(sorted(ends)))


def _on_lives(records: Iterable[_Record], terms: Terms, begun: bool) -> Iterator[_Record]:
    """Records once for each term of the probability that they depend on; what is certain stays as it is.

    begun: whether the stream may have begun; where nobody is left for it, its guarantee is still paid.
    """
    for record in records:
        if record.cover == s.CERTAIN:
            yield record
        elif record.cover == s.GUARANTEED and not terms and begun:
            yield replace(record, cover=s.BEGUN)
        for life, factor in terms:
            yield replace(record, life=life, factor=record.factor * factor, term=factor)


def _runs(record: _Record) -> bool:
    """Whether the contract runs on until the record's end: paid while alive, once or on death."""
    return record.when == s.ONCE or (record.cover not in (s.CERTAIN, s.BEGUN) and record.when != s.LAPSE)


def segments_of(records: list[_Record]) -> Iterator[tuple[_Record, list[_Record]]]:
    """Yield what the records of a plan have in common: a segment, and the records that are charged on it.

    Records that differ in line, part, factor and clip only are paid at the same points in the same shape.
    Their clips cut time into pieces; each piece is a segment, with the largest factor, so that shares of it
    are at most 1.
    """
    alike: dict[_Record, list[_Record]] = {}
    for record in records:
        shape = replace(record, line=0, part=0, factor=1.0, term=1.0, own=0, whole=0, clip_from=0, clip_to=s.FOR_EVER)
        alike.setdefault(shape, []).append(record)
    for shape, members in alike.items():
        bounds = sorted({bound for record in members for bound in (record.clip_from, record.clip_to)})
        for begin, end in pairwise(bounds):
            charged = [one for one in members if one.clip_from <= begin and end <= one.clip_to and one.factor]
            if not charged:
                continue
            factor = max((record.factor for record in charged), key=abs)
            own, whole = (max(getattr(record, name) for record in charged) for name in ("own", "whole"))
            yield replace(shape, factor=factor, clip_from=begin, clip_to=end, own=own, whole=whole), charged


def _sign(stream: Stream) -> int:
    """1, or -1 for a stream that runs against its part: a premium paid out, a benefit received."""
    if stream.direction is None:
        return 1
    return 1 if (stream.direction == "in") == (stream.part == "premium") else -1


def _woolhouse(record: _Record, when: int, third: bool) -> Iterator[_Record]:
    """Yearly records that stand for m payments a year by Woolhouse's formula.

    A year's payments in advance come to (1 - z) at its start and z at its end, z = (m - 1) / (2 m) = 1/2 -
    1/(2 m); so each weight is a half, plus or minus a half of one m-th. The third term carries (m^2 - 1) /
    (12 m^2).
    """
    near, far = (s.ADVANCE, s.ARREARS) if when == s.ADVANCE else (s.ARREARS, s.ADVANCE)
    yearly = replace(record, window=s.WHOLE_YEARS)
    yield replace(yearly, when=near, factor=record.factor / 2, power=0)
    yield replace(yearly, when=near, factor=record.factor / 2, power=1)
    yield replace(yearly, when=far, factor=record.factor / 2, power=0)
    yield replace(yearly, when=far, factor=-record.factor / 2, power=1)
    if third:
        yield replace(yearly, when=s.THIRD_TERM, factor=-record.factor / 12, power=0)
        yield replace(yearly, when=s.THIRD_TERM, factor=record.factor / 12, power=2)
