"""Curves: one row per distinct key met in the portfolio, shared by every policy that has the key.

Survival by mortality rule and age at commencement; persistency by lapse rule and the time at which lapses
stop; discount factors by interest rule and, unless interest is flat, the part of a step that has passed at the
valuation date.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis, ClaimDelay
from assumptions.improvement import Scale
from assumptions.interest import YieldCurve
from assumptions.lapse import LapseRule, yearly_lapse
from assumptions.laws import Law
from assumptions.mortality import MortalityRule, Rates

from . import loops
from .documents import DocumentError
from .pool import Pool
from .settings import Settings
from .streams import LONGEST, SURVIVAL

FRACTIONS = {"constant force": 0, "uniform deaths": 1, "Balducci": 2}

IMPOSSIBLE = -1
"""Row of a key for which there are no rates."""

_SPANS = 367
"""Days of a year of age, and one more."""

FIRST_YEAR, YEARS = 1800, 402
"""Calendar years in which rates may begin."""

NEVER = LONGEST + 1
"""Months until lapses stop where they never do."""

Row = NDArray[np.float64]
Keys = NDArray[np.int64]

MOST_LISTED = 1 << 22
"""Highest key for which a finder keeps a table of all keys."""

_NEW = -2
"""Stands in a finder for the row of a key not met before."""


@dataclass
class Survival:
    """Rows of survival by mortality rule and age at commencement, with a record of each."""

    basis: Basis
    pool: Pool
    records: NDArray[Any] = field(default_factory=lambda: np.zeros(0, SURVIVAL))
    known: dict[int, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        mortality = self.basis.document.mortality
        self.exact = mortality.age == "exact"
        self.keys = 2 * _SPANS * 160 if self.exact else 256
        self.fractions = FRACTIONS[mortality.fractions]
        self.improving = np.array([scale is not None for scale in self.basis.scales])
        # Where a table of whole ages is entered at an exact one, its years begin on birthdays.
        self.by_birthday = np.array([self.exact and rates.whole_ages_only for rates in self.basis.rates])
        for number, (rule, rates) in enumerate(zip(mortality.rule, self.basis.rates, strict=True), 1):
            if self.exact and getattr(rates, "select_years", False):
                raise DocumentError(
                    f"mortality, rule {number}: select rates of {rule.table} need an age at commencement in whole "
                    "years; set the key 'age' to last, nearest or next birthday"
                )

    def keys_of_ages(self, ages: loops.Ages) -> Keys:
        """Return the key of each life's age at commencement, below ``keys``."""
        basis = self.basis.document.mortality.age
        key: Keys = ages.age.astype(np.int64)
        if self.exact:
            key = (2 * np.clip(key, 0, 159) + (ages.span == 366)) * _SPANS + ages.since
        elif basis == "next birthday":
            key += 1
        elif basis == "nearest birthday":
            key += ages.since > ages.span - ages.since
        return np.clip(key, 0, self.keys - 1, out=key)

    def age_of(self, key: int) -> float:
        """Return the age that a key stands for."""
        if not self.exact:
            return float(key)
        halves, since = divmod(key, _SPANS)
        return float(halves // 2 + since / (365 + halves % 2))

    def codes(self, rule: Keys, ages: loops.Ages, commencement: NDArray[np.int32]) -> Keys:
        """Return the key of each life's row: rule, age at commencement, and year where rates improve."""
        key = self.keys_of_ages(ages)
        key += rule * self.keys
        if self.improving.any():
            began = commencement - np.where(self.by_birthday[rule], ages.since, 0)
            year = began.astype("datetime64[D]").astype("datetime64[Y]").astype(np.int64) + 1970
            key *= YEARS
            key += np.where(self.improving[rule], np.clip(year - FIRST_YEAR, 0, YEARS - 1), 0)
        return key

    def row(self, code: int) -> int:
        """Return the row of a key, made on first meeting; IMPOSSIBLE where the rates do not cover the age."""
        if code not in self.known:
            rest, year = divmod(code, YEARS) if self.improving.any() else (code, 0)
            number, key = divmod(rest, self.keys)
            self.known[code] = self._add(number, self.age_of(key), FIRST_YEAR + year)
        return self.known[code]

    def _add(self, number: int, age: float, year: int) -> int:
        rule, rates = self.basis.document.mortality.rule[number], self.basis.rates[number]
        whole = int(age) if rates.whole_ages_only else age
        try:
            yearly = yearly_rates(rule, rates, whole, self.basis.scales[number], year)
        except ValueError:
            return IMPOSSIBLE
        if len(yearly) == 0:
            return IMPOSSIBLE
        passed, count = age - whole, 12 * len(yearly) + 1
        reached = np.concatenate(([1.0], np.cumprod(1 - yearly)))
        living = self.pool.space(count)
        loops.fill_living(yearly, reached, passed, self.fractions, self.pool.row(living, count))
        record = np.zeros(1, SURVIVAL)
        record["living"], record["over"] = living, count - 1
        record["yearly"], record["reached"] = self.pool.add(yearly), self.pool.add(reached)
        record["years"], record["passed"] = len(yearly), passed
        record["lasts"] = self.pool.add(lasts(self.pool.row(living, count)))
        # A multiple or an extra may bring a rate to 1 before the table ends; then too nobody is left.
        record["closed"] = rule.close or rates.closed or bool((yearly >= 1).any())
        self.records = np.concatenate((self.records, record))
        return len(self.records) - 1


def lasts(living: Row) -> Row:
    """Return, per point, the first later point at which survival no longer counts in a double beside it.

    Deaths of the step up to there still do. Survival at the point after it is looked at, since the valuation date
    may lie between the two.
    """
    over = len(living) - 1
    least = np.append(living[1:], living[-1]) * 1e-18
    counting = len(living) - np.searchsorted(living[::-1], least)
    return np.clip(np.maximum(counting, np.arange(1, over + 2)), 0, over).astype(np.float64)


def yearly_rates(rule: MortalityRule, rates: Rates, age: float, scale: Scale | None = None, year: int = 0) -> Row:
    """Adjusted rates of the years from an age at commencement to the end of a table, by year of age or duration.

    year: the calendar year in which the first of them begins, for the improvement.

    Empty where the age lies beyond the table. Raises ValueError where it lies below, or a rate is missing.
    """
    entered = age + rule.added_years
    if entered < rates.first_age:
        raise ValueError(f"age {entered:g} lies below {rates.first_age}")
    years = max(0, int(np.ceil(rates.final_age - entered)))
    if years == 0:
        return np.zeros(0)
    entry = entered if isinstance(rates, Law) else int(entered)
    closing = rule.close or rates.closed
    # The last rate of a table that closes is 1, whatever it says itself.
    known = years - closing
    source = rates.rates_from(entry, known) if known else np.zeros(0)  # type: ignore[attr-defined]
    improved = scale.cohort(int(np.floor(entered)), year, known) if scale is not None else 1.0
    adjusted = np.minimum(1.0, rule.multiple * source * improved + rule.extra)
    if closing:
        adjusted = np.append(adjusted, 1.0)
    return np.asarray(adjusted)


@dataclass
class Persistency:
    """Rows of persistency by lapse rule and the month after which nobody lapses: held, dead and lapsing."""

    basis: Basis
    settings: Settings
    pool: Pool
    places: list[tuple[int, int, int]] = field(default_factory=list)
    known: dict[int, int] = field(default_factory=dict)
    _years: dict[int, Row] = field(default_factory=dict)

    def __post_init__(self) -> None:
        lapse = self.basis.document.lapse
        self.dependent = lapse is not None and lapse.competing == "dependent rates"
        self.spread = lapse is not None and lapse.timing == "each step" and self.settings.step == "month"
        if self.dependent and lapse is not None and lapse.timing == "anniversaries" and not self.yearly:
            raise DocumentError(
                "lapse: 'dependent rates' spread lapses over the step, and 'anniversaries' do not; "
                "take 'each step', or a yearly step"
            )

    @property
    def yearly(self) -> bool:
        """Whether steps are years."""
        return self.settings.step == "year"

    def row(self, code: int) -> int:
        """Return the row of (1 + rule) * (NEVER + 1) + until, made on first meeting; rule -1 has no lapses."""
        if code not in self.known:
            number, until = divmod(code, NEVER + 1)
            held, dead, lapsing = self._build(self._rates(number - 1, until))
            self.known[code] = len(self.places)
            # One place in front of each row stands for g = -1.
            place = self.pool.add(held) + 1
            # Without competition, the deaths of a step are weighted with persistency one month before its end:
            # the same row, one place further on.
            dying = self.pool.add(dead) + 1 if self.dependent else place - 1
            self.places.append((place, dying, self.pool.add(lapsing) + 1))
        return self.known[code]

    def _yearly(self, rule: int) -> Row:
        """Rates of the years since commencement; the same however long lapses go on."""
        if rule not in self._years:
            document: LapseRule = self.basis.document.lapse.rule[rule]  # type: ignore[union-attr]
            table = list(self.basis.lapses[rule])
            self._years[rule] = np.array([yearly_lapse(document, table, year) for year in range(LONGEST // 12 + 2)])
        return self._years[rule]

    def _rates(self, rule: int, until: int) -> Row:
        """Share lapsing at each point 0, 1 ... of those still there before."""
        points = np.arange(LONGEST + 13)
        if rule < 0:
            return np.zeros(len(points))
        yearly = self._yearly(rule)
        if self.spread:
            shares = (1 - (1 - yearly) ** (1 / 12))[np.maximum(points - 1, 0) // 12]
        else:
            shares = np.where(points % 12 == 0, yearly[np.maximum(points // 12 - 1, 0)], 0.0)
        shares[0] = 0.0
        shares[points > until] = 0.0
        return np.asarray(shares)

    def _build(self, shares: Row) -> tuple[Row, Row, Row]:
        held = np.concatenate(([1.0], np.cumprod(1 - shares)))
        before = np.concatenate(([1.0, 1.0], held[1:-1]))
        lapsing = before - held
        if not self.dependent:
            return held, before, lapsing
        if self.yearly:
            # Lapses spread over the year, so that persistency at points within it lies on a straight line.
            points = np.arange(-1, len(held) - 1)
            ends = np.arange(0, len(held) - 1, 12)
            held = np.interp(points, ends, held[ends + 1])
        return held, before - lapsing / 2, lapsing


@dataclass
class Discount:
    """Rows of discount factors to the points after the valuation date, by interest rule and place in the step.

    With flat interest, the part of a month that has passed brings all points nearer by the same factor. One row
    then serves every policy of a rule, and stays in the cache. ``accrued`` holds the factors to both rows.
    """

    basis: Basis
    settings: Settings
    pool: Pool
    places: list[tuple[int, int]] = field(default_factory=list)
    accrued: list[tuple[float, float]] = field(default_factory=list)
    known: dict[int, int] = field(default_factory=dict)
    whole: dict[int, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.paid = self.basis.document.claims.paid

    def codes(self, rule: Keys, places: loops.Places) -> Keys:
        """Return the key of each policy's row: rule, and the part of a month that has passed."""
        key: Keys = rule * 6 + _WHOLES[places.whole]
        key *= _SPANS
        key += places.part
        return key

    def row(self, code: int) -> int:
        """Return the row of a key, made on first meeting."""
        if code not in self.known:
            rest, part = divmod(code, _SPANS)
            rule, whole = divmod(rest, 6)
            passed = part / (28, 29, 30, 31, 365, 366)[whole]
            curve = self.basis.curves[rule]
            n = np.arange(LONGEST + 14, dtype=np.float64)
            self.known[code] = len(self.places)
            payment, accrued = self._payment(rule, curve, n, passed)
            claim, claim_accrued = payment, accrued
            if self.paid != "end of step":
                claim_accrued = 1.0
                begin = np.maximum(n - self.settings.step_months, passed)
                delay = self.paid.delay_months if isinstance(self.paid, ClaimDelay) else 0.0
                claim = self.pool.add(curve.factors(np.maximum((begin + n) / 2 + delay - passed, 0) / 12))
            self.places.append((payment, claim))
            self.accrued.append((accrued, claim_accrued))
        return self.known[code]

    def _payment(self, rule: int, curve: YieldCurve, n: Row, passed: float) -> tuple[int, float]:
        """Place of the factors of payments n months after the last point, and the factor to all of them."""
        if not curve.flat:
            return self.pool.add(curve.factors(np.maximum(n - passed, 0) / 12)), 1.0
        if rule not in self.whole:
            self.whole[rule] = self.pool.add(curve.factors(n / 12))
        return self.whole[rule], float(np.exp(curve.integral(passed / 12)))

    def months_after_start(self) -> float:
        """Months from the start of a step to the payment of a death claim; below 0 where it is paid at its end."""
        if self.paid == "end of step":
            return -1.0
        delay = self.paid.delay_months if isinstance(self.paid, ClaimDelay) else 0.0
        return self.settings.step_months / 2 + delay


_WHOLES = np.zeros(367, dtype=np.int64)
_WHOLES[[28, 29, 30, 31, 365, 366]] = range(6)


class Finder:
    """Finds the row of each policy's key in a table of all keys; asks ``row`` for the rows of new ones."""

    def __init__(self, row: Callable[[int], int]) -> None:
        self._row = row
        self._rows = np.zeros(0, dtype=np.int64)
        self._scattered: dict[int, int] = {}

    def rows_for(self, codes: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the row of each key, a number from 0."""
        highest = int(codes.max(initial=0))
        if highest > MOST_LISTED:
            return self._look_up(codes)
        if highest >= len(self._rows):
            self._rows = np.concatenate((self._rows, np.full(highest + 1 - len(self._rows), _NEW)))
        rows = self._rows[codes]
        if (rows == _NEW).any():
            for code in np.unique(codes[rows == _NEW]).tolist():
                self._rows[code] = self._row(code)
            rows = self._rows[codes]
        return rows

    def _look_up(self, codes: NDArray[np.int64]) -> NDArray[np.int64]:
        """The same where keys lie so far apart that a table of all of them would fill the memory."""
        found, places = np.unique(codes, return_inverse=True)
        for code in found.tolist():
            if code not in self._scattered:
                self._scattered[code] = self._row(code)
        return np.array([self._scattered[code] for code in found.tolist()], dtype=np.int64)[places]
