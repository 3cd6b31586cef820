"""The yardstick in compiled code: one policy, one step at a time, backwards.

    V(n-1) = v p [once(n) + arrears(n) + w lapse(n) + (1 - w) (advance(n) + V(n))] + v* (1 - p) death(n)

with p survival and w the share that lapses in the step to n, v the step's discount factor and v* that of its claims.
Rates of single steps are given. The probability of each payment is read from rows of survival and persistency, so that
cash flows need no pass of their own. Payments certain once a stream has started follow a recursion of interest alone,
V(n-1) = v (paid(n) + V(n)).
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numba as nb
import numpy as np

from .lives import Policies
from .payments import LONGEST, Reals

ADVANCE, ARREARS, ONCE, DEATH, LAPSE = range(5)


class Streams(NamedTuple):
    """Schedules (policy, schedule) and lines, a schedule's lines side by side from first[s] to first[s + 1].

    amount (policy, line); row (policy, line): place of a row of relative amounts; inflating: number of a row of growth
    by calendar month, -1 for none.
    """

    way: Any
    start: Any
    end: Any
    period: Any
    guaranteed: Any
    first: Any
    part: Any
    amount: Any
    row: Any
    rows: Any
    inflating: Any
    growth: Any
    name: Any


class Lives(NamedTuple):
    """What ``Policies`` holds, and the rates of single steps from it.

    surviving[life][g], lapsing[holding][g]: shares surviving and lapsing in the step to g; step[interest][n],
    to_claim[interest][n]: discount from n, and from the claims of the step to n, to its beginning.
    """

    k: Any
    ahead: Any
    last: Any
    alive: Any
    inforce: Any
    life: Any
    living: Any
    holding: Any
    held: Any
    interest: Any
    claim_shift: Any
    surviving: Any
    lapsing: Any
    step: Any
    to_claim: Any


def laid_out(p: Policies) -> tuple[Lives, Streams]:
    """Return the arrays of the recursion, each policy's figures side by side."""
    order = sorted(range(len(p.lines)), key=lambda at: p.lines[at].schedule)
    lines = [p.lines[at] for at in order]
    begins = np.cumsum([0, *(len(line.rows) for line in lines)])
    growths = [line.inflating for line in lines if line.inflating is not None]
    growing = np.cumsum([line.inflating is not None for line in lines]) - 1
    of_schedule = [line.schedule for line in lines]

    def beside(arrays: list[Any]) -> Any:
        return np.ascontiguousarray(np.stack(arrays, axis=1))

    streams = Streams(
        way=np.array([one.way for one in p.schedules]),
        start=beside([one.start for one in p.schedules]),
        end=beside([one.end for one in p.schedules]),
        period=beside([one.period for one in p.schedules]),
        guaranteed=beside([one.guaranteed for one in p.schedules]),
        first=np.searchsorted(of_schedule, np.arange(len(p.schedules) + 1)),
        part=np.array([line.part for line in lines]),
        amount=beside([line.amount for line in lines]),
        row=beside([LONGEST * (begin + line.which) for begin, line in zip(begins, lines, strict=False)]),
        rows=np.concatenate([line.rows for line in lines]).reshape(-1),
        inflating=np.array([-1 if line.inflating is None else at for line, at in zip(lines, growing, strict=True)]),
        growth=np.stack([*growths, np.ones(LONGEST)]),
        name=np.array(order),
    )
    given = {name: getattr(p, name) for name in Lives._fields if hasattr(p, name)}
    return Lives(**given, **_single_steps(p)), streams


def _single_steps(p: Policies) -> dict[str, Any]:
    began = np.ones_like(p.payment)
    began[:, 2:] = p.payment[:, 1:-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        surviving = np.nan_to_num(p.living / np.roll(p.living, 1, axis=1))
        lapsing = np.nan_to_num(1 - p.held / np.roll(p.held, 1, axis=1))
    return {"surviving": surviving, "lapsing": lapsing, "step": p.payment / began, "to_claim": p.claim / began}


def value_recursively(lives: Lives, streams: Streams) -> tuple[Reals, Reals]:
    """Return the parts (policies, 3) of the reserves, and cash flows (lines, calendar months)."""
    parts, flows = np.zeros((len(lives.k), 3)), np.zeros((len(streams.name), LONGEST + 2))
    recursion(lives, streams, parts, flows)
    return parts, flows


@nb.njit(cache=False, nogil=True, error_model="numpy")
def recursion(lives, s, parts, flows):
    """Value every policy; fills parts and adds to the flows."""
    schedules = len(s.way)
    due, first_due = np.zeros(schedules, np.int64), np.zeros(schedules, np.int64)
    sure = np.zeros((schedules, 3))
    way, first, part, inflating, name = s.way, s.first, s.part, s.inflating, s.name
    rows, growth = s.rows, s.growth
    for i in range(len(lives.k)):
        k, ahead, late = lives.k[i], lives.ahead[i], lives.claim_shift[i]
        living, held = lives.living[lives.life[i]], lives.held[lives.holding[i]]
        surviving, lapsing = lives.surviving[lives.life[i]], lives.lapsing[lives.holding[i]]
        step, to_claim = lives.step[lives.interest[i]], lives.to_claim[lives.interest[i]]
        start, period, guaranteed = s.start[i], s.period[i], s.guaranteed[i]
        amount, row = s.amount[i], s.row[i]
        scale = 1.0 / (lives.alive[i] * lives.inforce[i])
        furthest = last_due(s, i, k, lives.last[i], first_due, due)
        benefits, expenses, premiums = 0.0, 0.0, 0.0
        sure[:] = 0.0
        for g in range(furthest, k, -1):
            n = g - k
            p, w = surviving[g], lapsing[g]
            before = held[g - 1] * living[g] * scale
            after = held[g] * living[g] * scale
            died = held[g - 1] * (living[g - 1] - living[g]) * scale
            if n == 1:
                p = living[g] / lives.alive[i]
                died = held[g - 1] * (lives.alive[i] - living[g]) * scale
            stay = step[n] * p * (1.0 - w)
            benefits, expenses, premiums = stay * benefits, stay * expenses, stay * premiums
            for q in range(schedules):
                if due[q] == g:
                    kind = way[q]
                    month, chance, worth, calendar = g - 1, before, step[n] * p, n - ahead
                    shift = 0
                    if kind == ADVANCE:
                        month, chance, worth = g, after, stay
                    elif kind == ARREARS:
                        month = g - period[q]
                    elif kind == DEATH:
                        chance, worth, shift = died, to_claim[n] * (1.0 - p), late
                    elif kind == LAPSE:
                        chance, worth = before - after, step[n] * p * w
                    due[q] = g - period[q] if g - period[q] >= first_due[q] else k
                    certain = kind <= ARREARS and month < start[q] + guaranteed[q]
                    if certain:
                        chance = living[start[q]] * held[start[q]] * scale if start[q] > k else 1.0
                    for line in range(first[q], first[q + 1]):
                        paid = amount[line] * rows[row[line] + month]
                        if inflating[line] >= 0:
                            paid *= growth[inflating[line], calendar]
                        flows[name[line], calendar + shift] += paid * chance
                        if certain:
                            sure[q, part[line]] += paid
                        elif part[line] == 0:
                            benefits += worth * paid
                        elif part[line] == 1:
                            expenses += worth * paid
                        else:
                            premiums += worth * paid
                if guaranteed[q] > 0:
                    if g == start[q]:
                        # What is certain from the start on is worth its value there to those who reach it.
                        benefits += stay * sure[q, 0]
                        expenses += stay * sure[q, 1]
                        premiums += stay * sure[q, 2]
                        sure[q] = 0.0
                    for one in range(3):
                        sure[q, one] *= step[n]
        parts[i, 0] = benefits + sure[:, 0].sum()
        parts[i, 1] = expenses + sure[:, 1].sum()
        parts[i, 2] = premiums + sure[:, 2].sum()


@nb.njit(cache=False, nogil=True, error_model="numpy")
def last_due(s, i, k, last, first_due, due):
    """Fill in the first and last month in which each schedule pays; return the latest of all, k if none is to come."""
    furthest = k
    for q in range(len(s.way)):
        start, period = s.start[i, q], s.period[i, q]
        # In advance and once the end itself is not paid, otherwise it is.
        early = s.way[q] == ADVANCE or s.way[q] == ONCE
        final = s.end[i, q] - (1 if early else 0)
        first = start if early else start + period
        final = min(final, max(last, start + s.guaranteed[i, q]))
        first_due[q] = first
        due[q] = first + (final - first) // period * period if final >= first else k
        if due[q] > k:
            furthest = max(furthest, due[q])
    return furthest
