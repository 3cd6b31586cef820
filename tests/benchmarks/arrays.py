"""The yardstick in NumPy: two-dimensional arrays, policies x months ahead, a block of policies at a time.

Survival, persistency, discount and relative amounts are gathered into such arrays, a slice of a row at a time; masks
say when a stream is paid, and each line of money is amount x occupancy x relative, times discount and summed along
time. What does not vary with time is not spread over it, and policies are put in order of their horizon, so that a
block is no wider than it must be.
"""

from __future__ import annotations

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view

from .lives import Policies
from .payments import LONGEST, WAYS, Line, Reals, Schedule, Whole

PAD = 12
"""Months in front of commencement, for payments in arrears whose relative amount lies a period back."""


class _Tables:
    """The rows to gather from, with room on both sides; None for relative amounts that do not vary with time."""

    def __init__(self, p: Policies) -> None:
        room = ((0, 0), (PAD, LONGEST))
        self.living, self.held = np.pad(p.living, room), np.pad(p.held, room)
        level = [bool((line.rows == line.rows[:, :1]).all()) for line in p.lines]
        self.rows = [None if flat else np.pad(line.rows, room) for line, flat in zip(p.lines, level, strict=True)]


def value_arrays(p: Policies, block: int) -> tuple[Reals, Reals]:
    """Return the parts (policies, 3) of the reserves, and cash flows (lines, calendar months)."""
    parts, flows = np.zeros((len(p), 3)), np.zeros((len(p.lines), LONGEST + 2))
    horizon = _horizon(p)
    group = 2 * p.ahead + p.claim_shift
    order = np.lexsort((horizon, group))
    tables = _Tables(p)
    for one in np.unique(group):
        mine = order[group[order] == one]
        for begin in range(0, len(mine), block):
            policies = mine[begin : begin + block]
            width = int(horizon[policies].max())
            if width > 0:
                _Block(p, policies, width, tables).add(parts, flows)
    return parts, flows


def _horizon(p: Policies) -> Whole:
    ends = np.max([schedule.end for schedule in p.schedules], axis=0)
    certain = np.max([schedule.start + schedule.guaranteed for schedule in p.schedules], axis=0)
    return np.maximum(np.minimum(ends, p.last), certain) - p.k


class _Block:
    """Some policies with the same calendar, over ``width`` months."""

    def __init__(self, p: Policies, policies: Whole, width: int, tables: _Tables) -> None:
        self.p, self.policies, self.width, self.tables = p, policies, width, tables
        self.k = p.k[policies]
        self.n = np.arange(1, width + 1, dtype=np.int32)
        self.there = (p.alive * p.inforce)[policies]
        self.discount = p.payment[p.interest[policies], 1 : width + 1]
        self.claim_discount = p.claim[p.interest[policies], 1 : width + 1]
        self.ahead, self.shift = int(p.ahead[policies[0]]), int(p.claim_shift[policies[0]])
        self._occupancies()

    def _rows(self, table: Reals, row: Whole, first: Whole) -> Reals:
        """Months first ... first + width - 1 of a row per policy."""
        found: Reals = sliding_window_view(table, self.width, axis=1)[row, first]
        return found

    def _occupancies(self) -> None:
        p, k = self.p, self.k
        living = self._rows(self.tables.living, p.life[self.policies], k + 1 + PAD)
        held = self._rows(self.tables.held, p.holding[self.policies], k + 1 + PAD)
        living /= p.alive[self.policies, None]
        held /= p.inforce[self.policies, None]
        ones = np.ones((len(k), 1))
        before = np.hstack([ones, held[:, :-1]])
        self.occupancy = {
            WAYS["advance"]: living * held,
            WAYS["arrears"]: living * before,
            WAYS["death"]: (np.hstack([ones, living[:, :-1]]) - living) * before,
            WAYS["lapse"]: living * (before - held),
        }

    def add(self, parts: Reals, flows: Reals) -> None:
        """Add the block's values to the parts, its payments to the cash flows."""
        for number, schedule in enumerate(self.p.schedules):
            lines = [(at, line) for at, line in enumerate(self.p.lines) if line.schedule == number]
            if schedule.way == WAYS["once"]:
                for at, line in lines:
                    self._once(schedule, line, at, parts, flows)
                continue
            paid = self._paid(schedule)
            # Relative amounts are those of the month that a payment is for.
            periods = schedule.period[self.policies]
            back = periods if schedule.way == WAYS["arrears"] else int(schedule.way > WAYS["once"])
            death = schedule.way == WAYS["death"]
            discount, shift = (self.claim_discount, self.shift) if death else (self.discount, 0)
            for at, line in lines:
                money, amount, rows = paid, line.amount[self.policies], self.tables.rows[at]
                if rows is None:
                    amount = amount * line.rows[line.which[self.policies], 0]
                else:
                    money = paid * self._rows(rows, line.which[self.policies], self.k + 1 - back + PAD)
                if line.inflating is not None:
                    money = money * line.inflating[self.n - self.ahead]
                parts[self.policies, line.part] += amount * np.einsum("ij,ij->i", money, discount)
                first = 1 - self.ahead + shift
                flows[at, first : first + self.width] += amount @ money

    def _paid(self, schedule: Schedule) -> Reals:
        """Occupancy where the schedule pays, else 0."""
        figures = (schedule.start, schedule.end, schedule.period)
        start, end, period = (months[self.policies].astype(np.int32)[:, None] for months in figures)
        since = self.n + self.k.astype(np.int32)[:, None] - start
        arrears = schedule.way == WAYS["arrears"]
        late = schedule.way != WAYS["advance"]
        due = (since >= late) & (since < end - start + late)
        if (period > 1).any():
            due &= since % period == 0
        paid = self.occupancy[schedule.way] * due
        guaranteed = schedule.guaranteed[self.policies].astype(np.int32)[:, None]
        if guaranteed.any():
            certain = due & (since - period * arrears < guaranteed)
            paid = np.where(certain, self._reached(schedule)[:, None], paid)
        return paid

    def _reached(self, schedule: Schedule) -> Reals:
        """Probability to be there when the schedule starts."""
        p, start = self.p, schedule.start[self.policies]
        reached = p.living[p.life[self.policies], start] * p.held[p.holding[self.policies], start] / self.there
        return np.where(start <= self.k, 1.0, reached)

    def _once(self, schedule: Schedule, line: Line, at: int, parts: Reals, flows: Reals) -> None:
        """Paid at one point, before the lapses there: no second dimension is needed."""
        p, start = self.p, schedule.start[self.policies]
        coming = (start > self.k) & (start <= p.last[self.policies])
        mine, start = self.policies[coming], start[coming]
        n = start - p.k[mine]
        share = p.living[p.life[mine], start] * p.held[p.holding[mine], start - 1] / (p.alive * p.inforce)[mine]
        money = line.amount[mine] * share * line.rows[line.which[mine], start - 1]
        if line.inflating is not None:
            money *= line.inflating[n - self.ahead]
        parts[mine, line.part] += money * p.payment[p.interest[mine], n]
        np.add.at(flows[at], n - self.ahead, money)
