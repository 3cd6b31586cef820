"""The engine: everything that a run shares, and the way of one chunk through it.

extract -> checks -> cells -> places -> rows of curves -> loops -> results. The engine may be used by several
threads, each with chunks of its own; what they share grows under a lock, and nobody's result depends on who
came first.
"""

from __future__ import annotations

from calendar import monthrange
from collections.abc import Collection
from datetime import date
from threading import Lock
from time import perf_counter
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.checks import Checked, Checks
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.identifiers import Duplicates
from portfolios.reasons import Reason

from . import loops
from .cells import Cells
from .curves import IMPOSSIBLE, NEVER, Discount, Finder, Keys, Persistency, Survival
from .lives import on_two, ratings_used
from .plans import Plans
from .pool import Pool
from .relative import RelativeRows, check_indices
from .settings import Settings
from .slots import whole_months
from .streams import LIFE, LONGEST, NO_SECOND, NOBODY, POLICY, SURVIVAL
from .tally import QUANTA

Mask = NDArray[np.bool_]


class Placed(NamedTuple):
    """A chunk before any rates are looked at: what the checks found, and where its policies stand.

    The same for every basis with the same designs and settings.
    """

    checked: Checked
    places: loops.Places

    def again(self) -> Placed:
        """Return a copy to which further reasons can be added."""
        return self._replace(checked=self.checked.again())


class Laid(NamedTuple):
    """A chunk as the loops take it: the order of calculation, and in it the policies and their tables."""

    order: NDArray[np.int64]
    policies: NDArray[Any]
    tables: loops.Tables


class Valued:
    """A chunk after the loops: the checks' result brought up to date, and the loops' results."""

    def __init__(self, placed: Placed, laid: Laid, results: loops.Results, months: int) -> None:
        self.placed = placed
        self.laid = laid
        self.results = results
        self.months = months
        self.seconds: dict[str, float] = {}

    @property
    def checked(self) -> Checked:
        """What checks and loops found against the policies."""
        return self.placed.checked

    def add_seconds(self, seconds: dict[str, float]) -> None:
        """Add the seconds of the phases of an earlier attempt."""
        self.seconds = {phase: taken + seconds.get(phase, 0.0) for phase, taken in self.seconds.items()}

    @property
    def valued(self) -> NDArray[np.bool_]:
        """Which policies have a reserve."""
        valued: NDArray[np.bool_] = self.checked.reason == 0
        return valued


class Engine:
    """Values chunks of policies on one basis, with one set of designs and settings.

    needed: the columns that chunks hold; kinds: of the columns that rules look at. Raises DocumentError where
    basis, designs and extract do not fit together.
    """

    def __init__(
        self,
        designs: list[Design],
        basis: Basis,
        settings: Settings,
        needed: tuple[str, ...],
        kinds: dict[str, str],
        in_force: Collection[str] = ("in force",),
    ) -> None:
        self.basis, self.settings, self.needed = basis, settings, needed
        today = settings.valuation_date
        check_indices(designs, basis)
        ratings = ratings_used(basis, designs, needed)
        self.checks = Checks(designs, today, in_force, Duplicates(), needed, ratings)
        self.cells = Cells(designs, basis, kinds)
        self.pool = Pool()
        self.plans = Plans(designs, basis, RelativeRows(self.pool, today.year, today.month, basis.prices))
        self.survival = Survival(basis, self.pool, rating_columns=ratings)
        self.persistency = Persistency(basis, settings, self.pool)
        self.discount = Discount(basis, settings, self.pool)
        self._survivals = Finder(self.survival.row)
        self._persistencies = Finder(self.persistency.row)
        self._discounts = Finder(self.discount.row)
        self._today = _today(today)
        self._until = _Until(basis)
        self._on_two = on_two(designs)
        self._lock = Lock()
        self.rules = loops.Rules(
            step=settings.step_months,
            outstanding=int(settings.due == "outstanding"),
            fractions=self.survival.fractions,
            dependent=int(self.persistency.dependent),
            quantum=float(QUANTA * 10**settings.decimals),
            minor=float(10**settings.decimals),
            shock=basis.document.mortality.common_shock,
        )

    def meet(self, chunk: Chunk) -> None:
        """Make the plans and rows that a chunk needs, before it is valued."""
        checked, places = self.place(chunk, _Clock())
        with self._lock:
            self._find(chunk, checked, self._cells(chunk, checked), places)

    def place(self, chunk: Chunk, clock: _Clock | None = None) -> Placed:
        """Check the policies of a chunk and find where they stand."""
        clock = clock or _Clock()
        checked = self.checks.check(chunk)
        clock.lap("check")
        places = self._locate(chunk, checked)
        clock.lap("dates")
        return Placed(checked, places)

    def value(self, chunk: Chunk, placed: Placed | None = None) -> Valued:
        """Value the policies of a chunk.

        placed: the chunk as another engine with the same designs and settings placed it, perhaps with reasons found on
        its basis; they hold here too, and checks and dates are not gone through again.
        """
        clock = _Clock()
        placed = self.place(chunk, clock) if placed is None else placed.again()
        checked, laid = placed.checked, self._lay_out(chunk, placed, clock)
        results = _room_for(chunk.n, checked, laid.tables, len(self.plans.accounts))
        loops.value_policies(*laid, self.rules, results)
        self._take_back(laid, results)
        clock.lap("loops")
        self._name_faults(checked, results.fault, laid.tables.segments)
        valued = Valued(placed, laid, results, int(results.months[0]))
        valued.seconds = clock.seconds
        return valued

    def _lay_out(self, chunk: Chunk, placed: Placed, clock: _Clock) -> Laid:
        """Find rules and rows of curves, and lay the policies out in the order of calculation."""
        checked, places = placed
        with self._lock:
            cell = self._cells(chunk, checked)
            clock.lap("rules")
            found = self._find(chunk, checked, cell, places)
        order = self._order(found)
        policies = loops.records(np.zeros(chunk.n, POLICY))
        after = self.discount.months_after_start()
        loops.fill_policies(order, places, found, after, self.settings.step_months, policies)
        tables = self._tables(chunk, checked, cell, order)
        clock.lap("curves")
        return Laid(order, policies, tables)

    def profile(self, chunk: Chunk, months: int) -> tuple[Checked, loops.Profile]:
        """Profiles of policies on one life that commence on the valuation date, by periods of so many months."""
        clock = _Clock()
        placed = self.place(chunk, clock)
        checked, laid = placed.checked, self._lay_out(chunk, placed, clock)
        results = _room_for(chunk.n, checked, laid.tables, 1)
        periods = LONGEST // months + 1
        profile = loops.Profile(
            months=months,
            parts=np.zeros((chunk.n, 3, periods)),
            worth=np.zeros((chunk.n, 3, periods)),
            anchor=np.full(chunk.n, -1, dtype=np.int64),
            in_force=np.zeros((chunk.n, periods)),
            discount=np.ones((chunk.n, periods)),
        )
        loops.profile_policies(*laid, self.rules, results, profile)
        self._name_faults(checked, results.fault, laid.tables.segments)
        return checked, profile

    def _take_back(self, laid: Laid, results: loops.Results) -> None:
        """Take back the cash flows of policies whose result turned out to be no amount of money.

        The same payments with the other sign, each rounded to the same whole number, leave nothing behind.
        """
        reason = results.reason
        if not (reason == Reason.RESULT_NOT_FINITE).any():
            return
        others = np.where(reason == Reason.RESULT_NOT_FINITE, 0, reason | 1).astype(reason.dtype)
        again = results._replace(reason=others)
        loops.value_policies(*laid, self.rules._replace(sign=-1.0), again)

    def _locate(self, chunk: Chunk, checked: Checked) -> loops.Places:
        places = loops.Places(*(np.zeros(chunk.n, dtype=np.int32) for _ in loops.Places._fields))
        places.whole[:] = 30
        step = self.settings.step_months
        loops.locate(chunk.day("commencement_date"), checked.reason, self._today, step, places)
        return places

    def _cells(self, chunk: Chunk, checked: Checked) -> NDArray[np.int32]:
        cell = self.cells.of(chunk, checked.product)
        for number in range(len(self.plans.ranges), len(self.cells.cells)):
            self.plans.add(self.cells.cells[number])
        missing = np.array([bool(known.missing) for known in self.cells.cells] + [False])
        if missing.any():
            self._flag(checked, missing[cell], Reason.NO_RULE_FITS, "product")
        return np.maximum(cell, 0)

    def _find(self, chunk: Chunk, checked: Checked, cell: NDArray[np.int32], places: loops.Places) -> loops.Found:
        """Find each policy's rows of curves, making those that are new."""
        known = self.cells.cells
        mortality, lapse, interest = (
            np.array([getattr(one, part) for one in known], dtype=np.int64)[cell]
            for part in ("mortality", "lapse", "interest")
        )
        survival, second = self._lives(chunk, checked, cell, mortality, places)
        until = self._until.months(chunk, lapse)
        self._flag(checked, until < 0, Reason.NOT_WHOLE_MONTHS, self._until.column)
        codes = self.persistency.codes(lapse, np.maximum(until, 0), chunk.day("commencement_date"))
        lapse = self._persistencies.rows_for(codes)
        discount = self._discounts.rows_for(np.maximum(self.discount.codes(interest, places), 0))
        return loops.Found(
            cell=cell,
            survival=np.maximum(survival, 0).astype(np.int32),
            second=second.astype(np.int32),
            lapse=lapse.astype(np.int32),
            discount=discount.astype(np.int32),
            ranges=self.plans.ranges,
            persistency=np.array(self.persistency.places, dtype=np.int64),
            factors=np.array(self.discount.places, dtype=np.int64),
            accrued=np.array(self.discount.accrued, dtype=np.float64),
        )

    def _lives(
        self, chunk: Chunk, checked: Checked, cell: NDArray[np.int32], mortality: Keys, places: loops.Places
    ) -> tuple[Keys, Keys]:
        """Rows of survival of the first life, or the only one left, and of the second where both live, else -1."""
        birth = chunk.day("birth_date")
        known = self.cells.cells
        nobody = np.array([one.lives == "none" for one in known])[cell]
        fine = checked.reason == 0
        fine &= ~nobody
        second = np.where(nobody, NOBODY, NO_SECOND)
        if not self._on_two:
            codes = self._codes_of(chunk, fine, birth, mortality)
            return self._rows_of(chunk, checked, fine, codes, np.zeros(chunk.n, dtype=bool), places), second
        other = np.array([one.second for one in known], dtype=np.int64)[cell]
        left = np.array([one.lives == "second" for one in known])[cell]
        births = chunk.day("second_birth_date")
        codes = self._codes_of(chunk, fine, np.where(left, births, birth), mortality)
        survival = self._rows_of(chunk, checked, fine, codes, left, places)
        both = fine & (other >= 0) & (checked.reason == 0)
        codes = self._codes_of(chunk, both, births, np.maximum(other, 0))
        rows = self._rows_of(chunk, checked, both, codes, both, places, "second_birth_date")
        return survival, np.where(both, np.maximum(rows, 0), second)

    def _codes_of(self, chunk: Chunk, fine: Mask, birth: NDArray[np.int32], mortality: Keys) -> Keys:
        """Keys of the rows of survival of the lives that count, born on given days."""
        ages = loops.Ages(*(np.zeros(chunk.n, dtype=np.int32) for _ in loops.Ages._fields))
        days_of_age = self.basis.document.mortality.age in ("exact", "nearest birthday")
        loops.find_ages(birth, chunk.day("commencement_date"), fine, days_of_age, ages)
        return self.survival.codes(mortality, ages, chunk.day("commencement_date"))

    def _rows_of(
        self,
        chunk: Chunk,
        checked: Checked,
        fine: Mask,
        codes: Keys,
        of_second: Mask,
        places: loops.Places,
        column: str = "birth_date",
    ) -> Keys:
        """Rows of survival of the lives that count; of_second: whose rating stands in 'second_...' columns."""
        ratings = self.survival.ratings.numbers(chunk, fine, of_second, places)
        standard = fine & (ratings == 0)
        rows = np.zeros(chunk.n, dtype=np.int64)
        if standard.any():
            # No rows for the ages of others; the first one that counts stands in for them.
            known = np.where(standard, codes, codes[standard.argmax()])
            rows = self._survivals.rows_for(known)
        rated = np.flatnonzero(ratings)
        if len(rated):
            rows[rated] = self.survival.rated_rows(codes[rated], ratings[rated])
        self._flag(checked, fine & (rows == IMPOSSIBLE), Reason.AGE_OUTSIDE_TABLE, column)
        return rows

    def _order(self, found: loops.Found) -> NDArray[np.int64]:
        """Order of calculation: policies with the same streams and rows follow one another, still in the cache."""
        order, again = np.arange(len(found.cell)), np.empty(len(found.cell), dtype=np.int64)
        seconds = (found.second - NOBODY,) if self._on_two else ()
        for keys in (found.lapse, *seconds, found.survival, found.cell):
            loops.sort_by(keys, int(keys.max(initial=0)) + 1, order, again)
        return order

    def _tables(
        self, chunk: Chunk, checked: Checked, cell: NDArray[np.int32], order: NDArray[np.int64]
    ) -> loops.Tables:
        def months_to_age(age: int, row: int) -> NDArray[np.int32]:
            months = np.zeros(chunk.n, dtype=np.int32)
            concerned = self.plans.using(row)[cell] & (checked.reason == 0)
            birth, commencement = chunk.day("birth_date"), chunk.day("commencement_date")
            loops.months_to_age(birth, commencement, concerned, age, self.settings.step_months, months)
            return months

        plans = self.plans
        with self._lock:
            whole = plans.slots.numbers_of(chunk, order, months_to_age)
            for number in range(len(plans.relative.changing)):
                row = plans.slots.changing(number)
                mine = np.flatnonzero(plans.using(row)[cell[order]] & (checked.reason[order] == 0))
                if len(mine):
                    whole[row, mine] = plans.relative.places_of(number, chunk, whole, order, mine)
            money = plans.slots.amounts_of(chunk, order)
            records = self.survival.records if len(self.survival.records) else np.zeros(1, SURVIVAL)
            return loops.Tables(
                segments=loops.records(plans.segments),
                survivals=loops.records(records),
                pool=self.pool.numbers,
                money=money,
                whole=whole,
            )

    def _flag(self, checked: Checked, bad: NDArray[np.bool_], reason: Reason, column: str) -> None:
        if bad.any():
            rows = np.flatnonzero(bad & (checked.reason == 0))
            checked.reason[rows] = reason
            checked.field[rows] = self.needed.index(column) if column in self.needed else -1

    def _name_faults(self, checked: Checked, fault: NDArray[np.int64], segments: NDArray[Any]) -> None:
        """Point at the column behind a duration or frequency that the loops could not use."""
        for i in np.flatnonzero(fault >= 0).tolist():
            segment = segments[fault[i]]
            columns = [segment[name] for name in ("end", "guarantee", "start", "period") if segment[name] >= 0]
            named = [name for name in map(self.plans.slots.named, columns) if name in self.needed]
            if named:
                checked.field[i] = self.needed.index(named[0])


def _room_for(policies: int, checked: Checked, tables: loops.Tables, accounts: int) -> loops.Results:
    return loops.Results(
        reason=checked.reason,
        fault=np.full(policies, -1, dtype=np.int64),
        parts=np.zeros((policies, 3)),
        minor=np.zeros((policies, 4), dtype=np.int64),
        flows=np.zeros(accounts * loops.BINS, dtype=np.int64),
        months=np.zeros(1, dtype=np.int64),
        room=np.ones(loops.ROOM * loops.BINS),
        filled=np.zeros((3 * loops.KINDS, 2), dtype=np.int64),
        firsts=np.empty(len(tables.segments) + 1, dtype=np.int64),
        counts=np.empty(len(tables.segments) + 1, dtype=np.int64),
        lives=loops.records(np.zeros(3, LIFE)),
    )


def _today(today: date) -> loops.Today:
    year, month = today.year, today.month
    neighbours = [divmod(12 * year + month - 1 + later, 12) for later in (-1, 0, 1)]
    lengths = (monthrange(y, m + 1)[1] for y, m in neighbours)
    return loops.Today((today - date(1970, 1, 1)).days, year, month, today.day, *lengths)


class _Until:
    """Months after which lapses stop, by lapse rule and perhaps a column of the policy."""

    def __init__(self, basis: Basis) -> None:
        rules = basis.document.lapse.rule if basis.document.lapse else []
        self.columns = [rule.until if isinstance(rule.until, str) else "" for rule in rules]
        fixed = [rule.until if isinstance(rule.until, float | int) else None for rule in rules]
        # The last place answers for rule -1, a basis without lapses.
        self.fixed = np.array(
            [NEVER if years is None else min(NEVER, int(np.floor(12 * years + 1e-6))) for years in fixed] + [NEVER],
            dtype=np.int64,
        )

    @property
    def column(self) -> str:
        """A column that some rule looks at, for messages."""
        return next((column for column in self.columns if column), "")

    def months(self, chunk: Chunk, lapse: NDArray[np.int64]) -> NDArray[np.int64]:
        """Months after which lapses stop, per policy; negative where a column's value is no good."""
        months = self.fixed[lapse]
        for column in sorted({column for column in self.columns if column}):
            asks = np.array([one == column for one in self.columns] + [False])[lapse]
            if asks.any():
                np.copyto(months, whole_months(chunk.number(column)), where=asks)
        return months


class _Clock:
    """Seconds by phase."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._last = perf_counter()

    def lap(self, phase: str) -> None:
        now = perf_counter()
        self.seconds[phase] = self.seconds.get(phase, 0.0) + now - self._last
        self._last = now
