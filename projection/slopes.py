"""Slopes: the exact derivative of the value to every rate of the basis, from one pass over the policies.

A value is a sum of products of curves, so that it is linear in each number of each row. The loops gather, for every
number of a row, the value that hangs on it (``loops.slope_policies``): the derivative to its logarithm. Here these
are taken on to what the rows are made of, by the chain rule. For a rate of mortality it comes to the textbook's
identity, that the derivative is the value of the sum at risk at that point (Hoem 1969; Norberg 1999).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from assumptions.laws import Law
from assumptions.mortality import Rates

from . import loops
from .curves import Entered, Persistency, Survival
from .documents import DocumentError
from .engine import Engine
from .ratings import Key

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class Slope:
    """The derivative of the value to one figure of the basis.

    part: of the basis; rule: its number, from 1; title: of the rule; at: attained age, policy year or maturity in
    years; duration: policy year from 0 within a select period, -1 elsewhere; slope: change of the value, in currency,
    for a change of 1 in the figure; relative: the same for a change in proportion, by 100 %, of mortality and lapse of
    the rate that counts (after multiple, improvement and extra).
    """

    part: str
    rule: int
    title: str
    at: float
    duration: int
    slope: float
    relative: float


class Gathering:
    """What an engine's policies hang on: arrays of the shape of its pool, which grows while it works."""

    def __init__(self, scale: float) -> None:
        self.scale = scale
        self.rows = np.zeros(0, dtype=np.int64)
        self.part = np.zeros(0, dtype=np.int64)
        self.accounts = np.zeros(0, dtype=np.int64)

    def room(self, pool: int, accounts: int) -> loops.Adjoint:
        """Return arrays that are large enough, with what was gathered so far."""
        self.rows, self.part = _grown(self.rows, pool), _grown(self.part, pool)
        self.accounts = _grown(self.accounts, accounts)
        return loops.Adjoint(self.rows, self.part, self.accounts, self.scale)

    def add(self, other: Gathering) -> None:
        """Add what another one gathered; whole numbers, so that the order does not matter."""
        self.room(len(other.rows), len(other.accounts))
        self.rows[: len(other.rows)] += other.rows
        self.part[: len(other.part)] += other.part
        self.accounts[: len(other.accounts)] += other.accounts

    def row(self, place: int, count: int) -> Numbers:
        """Return what hangs on a row, in currency."""
        return _padded(self.rows, place, count) / self.scale

    def passed(self, place: int, count: int) -> Numbers:
        """Return the derivatives to yearly rates of what has passed of a month, in currency."""
        return _padded(self.part, place, count) / self.scale


def mortality_slopes(engine: Engine, gathered: Gathering) -> list[Slope]:
    """Return the slopes to the rates of the mortality part, by rule, attained age and, where select, duration.

    The age is the one at which the table is read, with added years. Raises DocumentError for ratings for a time of
    lives whose years of age begin between anniversaries.
    """
    survival = engine.survival
    sums: dict[tuple[int, int, int], Numbers] = {}
    # In order of their keys, not as they were met, so that sums come out the same to the bit.
    for _, number in (*sorted(survival.known.items()), *_rated(survival)):
        if number < 0 or not gathered.row(int(survival.records[number]["living"]), _points(survival, number)).any():
            continue
        entered = survival.entered[number]
        found = _of_record(survival, number, gathered)
        select = _select_years(survival.basis.rates[entered.rule])
        for place in np.flatnonzero(found.slopes).tolist():
            key = entered.rule, int(found.ages[place]), place if place < select else -1
            sums.setdefault(key, np.zeros(2))
            sums[key] += (found.slopes[place], found.relative[place])
    rules = engine.basis.document.mortality.rule
    return [
        Slope("mortality", rule + 1, rules[rule].title, age, duration, *figures.tolist())
        for (rule, age, duration), figures in sorted(sums.items())
    ]


def _rated(survival: Survival) -> list[tuple[tuple[int, Key], int]]:
    """Records of rated lives in order of what they were made from; ratings are numbered as they are met."""
    named = [((code, survival.ratings.keys[rating - 1]), record) for (code, rating), record in survival.rated.items()]
    return sorted(named)


def _points(survival: Survival, number: int) -> int:
    return int(survival.records[number]["over"]) + 1


class _Found(NamedTuple):
    """Of the years from commencement on: ages at which the table is read, slopes to its rates, and in proportion."""

    ages: Numbers
    slopes: Numbers
    relative: Numbers


def _of_record(survival: Survival, number: int, gathered: Gathering) -> _Found:
    record, entered = survival.records[number], survival.entered[number]
    years, passed = int(record["years"]), float(record["passed"])
    if passed and len(entered.pieces) > 1:
        raise DocumentError(
            "no slopes of ratings for a time where years of age begin between anniversaries; "
            "take another 'age' of mortality than 'exact'"
        )
    q = survival.pool.row(int(record["yearly"]), years).copy()
    hung = gathered.row(int(record["living"]), _points(survival, number))
    since = passed + np.arange(len(hung)) / 12
    whole = np.floor(since + 1e-12 * (passed == 0)).astype(np.int64)
    share = np.where(whole < years, since - whole, 1.0)
    whole = np.minimum(whole, years - 1)
    by_year = np.bincount(whole, weights=hung, minlength=years)
    after = np.cumsum(by_year[::-1])[::-1] - by_year
    at_points = np.bincount(whole, weights=hung * _log_slope(q[whole], share, survival.fractions), minlength=years)
    with np.errstate(divide="ignore", invalid="ignore"):
        slopes = at_points - after / (1 - q)
    slopes[0] -= hung.sum() * _log_slope(q[:1], np.array([passed]), survival.fractions)[0]
    slopes += gathered.passed(int(record["yearly"]), years)
    ages, factor = _factors(survival, entered, years)
    free = (q < 1) & (factor > 0)
    return _Found(ages, np.where(free, slopes * factor, 0.0), np.where(free, slopes * q, 0.0))


def _factors(survival: Survival, entered: Entered, years: int) -> tuple[Numbers, Numbers]:
    """Ages at which the table is read, and what its rates are multiplied with.

    The factor is 0 in the year that closes a table and where the rate is held at 1.
    """
    rule, rates = survival.basis.document.mortality.rule[entered.rule], survival.basis.rates[entered.rule]
    scale = survival.basis.scales[entered.rule]
    ages, factor = np.zeros(years), np.zeros(years)
    ends = [begin for begin, _ in entered.pieces[1:]] + [years]
    for (begin, rating), end in zip(entered.pieces, ends, strict=True):
        age = entered.age + rule.added_years + rating.added_years
        known = min(max(0, int(np.ceil(rates.final_age - age))) - (rule.close or rates.closed), end)
        if known <= begin:
            continue
        here = slice(begin, known)
        read = rates.rates_from(age if isinstance(rates, Law) else int(age), known)  # type: ignore[attr-defined]
        ages[here] = np.floor(age) + np.arange(begin, known)
        factor[here] = rule.multiple * rating.multiple
        if scale is not None:
            factor[here] *= scale.cohort(int(np.floor(age)), entered.year, known)[begin:]
        factor[here] *= factor[here] * read[begin:] + (rule.extra + rating.extra) < 1
    return ages, factor


def _log_slope(q: Numbers, share: Numbers, rule: int) -> Numbers:
    """Derivative of ln F(q, s) to q; 0 where q is 1, which no small change of a rate moves."""
    q = np.where(q < 1, q, 0.0)
    if rule == 0:
        return -share / (1 - q)
    if rule == 1:
        return -share / (1 - share * q)
    return np.where(share > 0, -1 / (1 - q) + (1 - share) / (1 - (1 - share) * q), 0.0)


def _select_years(rates: Rates) -> int:
    if isinstance(rates, Law):
        return int(np.ceil(rates.select.years)) if rates.select else 0
    return int(getattr(rates, "select_years", 0))


def lapse_slopes(engine: Engine, gathered: Gathering) -> list[Slope]:
    """Return the slopes to the yearly lapse rates, by rule and policy year."""
    persistency, lapse = engine.persistency, engine.basis.document.lapse
    sums: dict[tuple[int, int], Numbers] = {}
    for code, number in sorted(persistency.known.items()):
        place, until, _ = persistency.meaning(code)
        position = place + 1
        if position == 0 or lapse is None:
            continue
        rule, rates = lapse.rule[position - 1], engine.basis.lapses[position - 1]
        slopes = _to_yearly(persistency, position - 1, until, _hung_on_points(persistency, number, gathered))
        for year, slope in enumerate(slopes.tolist()):
            place = min(year, len(rates) - 1)
            if slope and rule.multiple * rates[place] < 1:
                sums.setdefault((position, place), np.zeros(2))
                sums[position, place] += slope * rule.multiple * np.array([1.0, rates[place]])
    return [
        Slope("lapse", position, lapse.rule[position - 1].title if lapse else "", year + 1, -1, *found.tolist())
        for (position, year), found in sorted(sums.items())
    ]


def _hung_on_points(persistency: Persistency, number: int, gathered: Gathering) -> Numbers:
    """What hangs on persistency at points 0, 1 ..., all of it at those where lapses fall."""
    place = persistency.places[number][0]
    count = len(persistency.shares(-1, 0))
    hung = gathered.row(place, count)
    if not (persistency.dependent and persistency.yearly):
        return hung
    # Between the ends of years persistency lies on a straight line, and what hangs there is shared by both ends.
    held = persistency.pool.row(place, count)
    points = np.arange(count)
    inside = points % 12
    begin, end = points - inside, np.minimum(points - inside + 12, count - 1)
    share = inside / 12
    with np.errstate(divide="ignore", invalid="ignore"):
        early = np.where(held > 0, (1 - share) * held[begin] / held, 0.0)
    moved = np.zeros(count)
    np.add.at(moved, begin, hung * np.where(inside == 0, 1.0, early))
    np.add.at(moved, end, hung * np.where(inside == 0, 0.0, 1 - early))
    return moved


def _to_yearly(persistency: Persistency, rule: int, until: int, hung: Numbers) -> Numbers:
    """From what hangs on persistency at points to the derivatives to the yearly rates that count."""
    shares = persistency.shares(rule, until)
    after = np.cumsum(hung[::-1])[::-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        to_share = np.where(shares < 1, -after / (1 - shares), 0.0)
    points = np.arange(len(shares))
    counts = (points >= 1) & (points <= until)
    yearly = persistency.yearly_rates(rule)
    if persistency.spread:
        year = np.maximum(points - 1, 0) // 12
        rate = yearly[year]
        to_rate = np.where(rate < 1, (1 - np.minimum(rate, 0.999999999)) ** (1 / 12 - 1) / 12, 0.0)
    else:
        counts &= points % 12 == 0
        year = np.maximum(points // 12 - 1, 0)
        to_rate = np.ones(len(points))
    return np.asarray(np.bincount(year[counts], weights=(to_share * to_rate)[counts], minlength=len(yearly)))


def _grown(array: NDArray[np.int64], size: int) -> NDArray[np.int64]:
    return array if len(array) >= size else np.concatenate((array, np.zeros(size - len(array), dtype=np.int64)))


def _padded(array: NDArray[np.int64], place: int, count: int) -> Numbers:
    found = array[place : place + count].astype(np.float64)
    return found if len(found) == count else np.concatenate((found, np.zeros(count - len(found))))
