"""The policies of one product with their curves as plain arrays, for the yardsticks of the valuation.

Written from the definitions, apart from the engine. Only what the demo's statutory month end asks for is covered:
monthly steps, payments on the valuation date settled, age last birthday, constant force, lapses at the end of each
step, claims at the end of the step or a stated delay after its middle. Anything else raises ValueError. g counts months
since commencement, n = g - k those after the last monthiversary before the valuation date.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from assumptions.basis import Basis, ClaimDelay
from assumptions.lapse import yearly_lapse
from assumptions.mortality import adjusted_rate
from portfolios.chunk import Chunk
from portfolios.designs import Design
from projection.settings import Settings

from .payments import LONGEST, Line, Lines, Reals, Rules, Schedule, Whole, distinct, month_later


@dataclass
class Policies:
    """The policies of one product, and their curves.

    k, fraction: whole months passed at the valuation date and the rest of the last one; ahead: 1 if point k lies in
    the calendar month before that of the valuation date, else 0; last: the last point that counts. living[life][g]:
    survival from commencement; held[holding][g]: persistency; payment[interest][n], claim[interest][n]: discount
    factors; there: survival and persistency at the valuation date; claim_shift: calendar months from the end of a step
    to the payment of its claims.
    """

    k: Whole
    fraction: Reals
    ahead: Whole
    last: Whole
    alive: Reals
    inforce: Reals
    life: Whole
    living: Reals
    holding: Whole
    held: Reals
    interest: Whole
    payment: Reals
    claim: Reals
    claim_shift: Whole
    schedules: list[Schedule]
    lines: list[Line]

    def __len__(self) -> int:
        return len(self.k)


def policies_of(chunk: Chunk, design: Design, basis: Basis, settings: Settings) -> Policies:
    """Lay out the policies of a chunk, all of one product and fit to be valued."""
    _covered(basis, settings)
    birth, commencement = (_dates(chunk, name) for name in ("birth_date", "commencement_date"))
    today = np.datetime64(settings.valuation_date, "D")
    k = _months_between(commencement, today)
    before, after = month_later(commencement, k), month_later(commencement, k + 1)
    days = np.stack([(today - before).astype(np.int64), (after - before).astype(np.int64)])
    rules = Rules(chunk, design, basis)
    living, life = _survival(basis, rules.mortality, _months_between(birth, commencement) // 12)
    held, holding = _persistency(basis, rules.lapse, chunk)
    payment, claim, interest = _discount(basis, rules.interest, days)
    fraction = days[0] / days[1]
    made = Lines(chunk, design, basis, settings, rules, birth, commencement)
    alive = living[life, k] * (living[life, k + 1] / living[life, k]) ** fraction
    return Policies(
        k=k, fraction=fraction, ahead=(before.astype("M8[M]") < today.astype("M8[M]")).astype(np.int64),
        last=_last_point(living, life, alive),
        alive=alive, inforce=held[holding, k], life=life, living=living, holding=holding, held=held,
        interest=interest, payment=payment, claim=claim, claim_shift=_claim_shift(basis, commencement),
        schedules=made.schedules, lines=made.lines,
    )  # fmt: skip


def _covered(basis: Basis, settings: Settings) -> None:
    document = basis.document
    lapse = document.lapse
    asked = (settings.step, settings.due, document.mortality.age, document.mortality.fractions)
    if asked != ("month", "settled", "last birthday", "constant force"):
        raise ValueError(f"the yardsticks do not cover {asked}")
    if lapse is None or (lapse.timing, lapse.competing) != ("each step", "lapses at the end"):
        raise ValueError("the yardsticks need lapses at the end of each step")


def _dates(chunk: Chunk, name: str) -> Any:
    return chunk.day(name).astype("M8[D]")


def _months_between(start: Any, end: Any) -> Whole:
    months = (end.astype("M8[M]") - start.astype("M8[M]")).astype(np.int64)
    return months - (month_later(start, months) > end)


def _survival(basis: Basis, rule: Whole, age: Whole) -> tuple[Reals, Whole]:
    keys, life = distinct(rule, age)
    living = np.zeros((len(keys), LONGEST))
    for row, (number, entry) in zip(living, keys.tolist(), strict=True):
        rates = basis.rates[number]
        added = basis.document.mortality.rule[number].added_years
        years = int(rates.final_age - entry - added)
        q = np.array([adjusted_rate(basis.document.mortality.rule[number], rates, entry, j) for j in range(years)])
        reached = np.concatenate([[1.0], np.cumprod(1 - q)])
        g = np.arange(12 * years + 1)
        p = np.append(1 - q, 1.0)[g // 12]
        row[: len(g)] = reached[g // 12] * p ** ((g % 12) / 12)
    return living, life


def _last_point(living: Reals, life: Whole, alive: Reals) -> Whole:
    """Last point with survival beside which one minus 1e-18 is still one; later ones add nothing to a double."""
    last = np.empty(len(life), dtype=np.int64)
    for row in range(len(living)):
        mine = life == row
        last[mine] = len(living[row]) - np.searchsorted(living[row, ::-1], 1e-18 * alive[mine], "left")
    return np.minimum(last, LONGEST - 1)


def _persistency(basis: Basis, rule: Whole, chunk: Chunk) -> tuple[Reals, Whole]:
    document = basis.document.lapse
    assert document is not None
    until = np.full(len(rule), LONGEST, dtype=np.int64)
    for number, one in enumerate(document.rule):
        if one.until is not None:
            years = chunk.number(one.until) if isinstance(one.until, str) else np.full(len(rule), float(one.until))
            until[rule == number] = np.rint(12 * years[rule == number])
    keys, holding = distinct(rule, until)
    g = np.arange(LONGEST)
    held = np.empty((len(keys), LONGEST))
    for row, (number, stop) in zip(held, keys.tolist(), strict=True):
        one, rates = document.rule[number], list(basis.lapses[number])
        yearly = np.array([yearly_lapse(one, rates, year) for year in range(LONGEST // 12)])
        monthly = 1 - (1 - yearly[np.maximum(g - 1, 0) // 12]) ** (1 / 12)
        row[:] = np.cumprod(1 - np.where((g == 0) | (g > stop), 0.0, monthly))
    return held, holding


def _discount(basis: Basis, rule: Whole, days: Whole) -> tuple[Reals, Reals, Whole]:
    keys, which = distinct(rule, days[0], days[1])
    n = np.arange(LONGEST, dtype=np.float64)
    payment, claim = np.empty((len(keys), LONGEST)), np.empty((len(keys), LONGEST))
    paid = basis.document.claims.paid
    for at, (number, passed, whole) in enumerate(keys.tolist()):
        f = passed / whole
        v = np.vectorize(basis.curves[number].factor)
        payment[at] = v(np.maximum(n - f, 0) / 12)
        claim[at] = payment[at]
        if paid != "end of step":
            delay = paid.delay_months if isinstance(paid, ClaimDelay) else 0.0
            claim[at] = v(np.maximum((np.maximum(n - 1, f) + n) / 2 + delay - f, 0) / 12)
    return payment, claim, which


def _claim_shift(basis: Basis, commencement: Any) -> Whole:
    paid = basis.document.claims.paid
    if paid == "end of step":
        return np.zeros(len(commencement), dtype=np.int64)
    delay = paid.delay_months if isinstance(paid, ClaimDelay) else 0.0
    day = (commencement - commencement.astype("M8[M]").astype("M8[D]")).astype(np.int64)
    return np.floor(day / 30.4375 + 0.5 + delay).astype(np.int64) - 1
