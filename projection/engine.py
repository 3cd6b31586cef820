"""The engine: everything that a run shares, and the way of one chunk through it.

extract -> checks -> cells -> places -> rows of curves -> loops -> results. The engine may be used by several threads, each
with chunks of its own; what they share grows under a lock, and nobody's result depends on who came first.
"""

from __future__ import annotations

from collections.abc import Collection
from datetime import date
from threading import Lock
from time import perf_counter
from typing import Any

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
from .curves import IMPOSSIBLE, NEVER, Discount, Persistency, Survival, rows_for
from .plans import Plans
from .relative import RelativeRows
from .settings import Settings
from .slots import whole_months
from .streams import LONGEST, STREAM
from .tally import QUANTA


class Valued:
    """A chunk after the loops: the checks' result brought up to date, and the loops' results."""

    def __init__(self, checked: Checked, results: loops.Results, months: int) -> None:
        self.checked = checked
        self.results = results
        self.months = months
        self.seconds: dict[str, float] = {}

    @property
    def valued(self) -> NDArray[np.bool_]:
        """Which policies have a reserve."""
        return self.checked.reason == 0


class Engine:
    """Values chunks of policies on one basis, with one set of designs and settings.

    needed: the columns that chunks hold; kinds: of the columns that rules look at. Raises DocumentError where basis,
    designs and extract do not fit together.
    """

    def __init__(
        self,
        designs: list[Design],
        basis: Basis,
        settings: Settings,
        needed: tuple[str, ...],
        kinds: dict[str, str],
        in_force: Collection[str] = ("in force",),
        duplicates: Duplicates | None = None,
    ) -> None:
        self.basis, self.settings, self.needed = basis, settings, needed
        today = settings.valuation_date
        self.checks = Checks(designs, today, in_force, duplicates or Duplicates(), needed)
        self.cells = Cells(designs, basis, kinds)
        self.plans = Plans(designs, basis, RelativeRows(today.year, today.month))
        self.survival = Survival(basis)
        self.persistency = Persistency(basis, settings)
        self.discount = Discount(basis, settings)
        self._today = (today - date(1970, 1, 1)).days
        self._until = _Until(basis)
        self._lock = Lock()
        self._ones = np.ones(LONGEST + 2)
        self.rules = loops.Rules(
            step=settings.step_months,
            outstanding=int(settings.due == "outstanding"),
            fractions=self.survival.fractions,
            dependent=int(self.persistency.dependent),
            quantum=float(QUANTA * 10**settings.decimals),
            minor=float(10**settings.decimals),
        )

    def value(self, chunk: Chunk) -> Valued:
        """Value the policies of a chunk."""
        clock = _Clock()
        checked = self.checks.check(chunk)
        clock.lap("check")
        places, dates = self._locate(chunk, checked)
        with self._lock:
            cell = self._cells(chunk, checked)
            clock.lap("rules")
            policies, curves, streams, ranges, lines = self._rows(chunk, checked, cell, places, dates)
            counts = np.array(self.survival.living_count or [0], dtype=np.int64)
        clock.lap("curves")
        results = loops.Results(
            reason=checked.reason,
            fault=np.full(chunk.n, -1, dtype=np.int64),
            parts=np.zeros((3, chunk.n)),
            minor=np.zeros((4, chunk.n), dtype=np.int64),
            flows=np.zeros((lines, loops.BINS)),
        )
        order = np.empty(chunk.n, dtype=np.int64)
        loops.sort_by(np.maximum(policies.mortality, 0), len(counts), order)
        loops.value_policies(order, places, policies, curves, streams, ranges, self.rules, results)
        clock.lap("loops")
        self._name_faults(checked, results.fault, streams)
        valued = Valued(checked, results, self._months(checked, policies, places, counts))
        valued.seconds = clock.seconds
        return valued

    def _locate(self, chunk: Chunk, checked: Checked) -> tuple[loops.Places, loops.Dates]:
        dates = loops.Dates(chunk.day("birth_date"), chunk.day("commencement_date"), checked.reason)
        places = loops.Places(*(np.zeros(chunk.n, dtype=np.int32) for _ in loops.Places._fields))
        places.whole[:] = 30
        loops.locate(dates, self._today, self.settings.step_months, places)
        return places, dates

    def _cells(self, chunk: Chunk, checked: Checked) -> NDArray[np.int32]:
        cell = self.cells.of(chunk, checked.product)
        for number in range(len(self.plans.ranges), len(self.cells.cells)):
            self.plans.add(self.cells.cells[number])
        missing = np.array([bool(known.missing) for known in self.cells.cells] + [False])
        self._flag(checked, missing[cell], Reason.NO_RULE_FITS, "product")
        return np.maximum(cell, 0)

    def _rows(
        self,
        chunk: Chunk,
        checked: Checked,
        cell: NDArray[np.int32],
        places: loops.Places,
        dates: loops.Dates,
    ) -> tuple[loops.Policies, loops.Curves, NDArray[Any], NDArray[np.int64], int]:
        known = self.cells.cells
        mortality, lapse, interest = (
            np.array([getattr(one, part) for one in known], dtype=np.int64)[cell]
            for part in ("mortality", "lapse", "interest")
        )
        fine = checked.reason == 0
        survival = np.full(chunk.n, IMPOSSIBLE, dtype=np.int32)
        survival[fine] = rows_for(self.survival.codes(mortality, places)[fine], self.survival.row)
        self._flag(checked, survival == IMPOSSIBLE, Reason.AGE_OUTSIDE_TABLE, "birth_date")
        months = self.plans.slots.months_of(chunk, _age_finder(dates, self.settings.step_months))
        until = self._until.months(chunk, lapse)
        self._flag(checked, until < 0, Reason.NOT_WHOLE_MONTHS, self._until.column)
        codes = (1 + lapse) * (NEVER + 1) + np.maximum(until, 0)
        policies = loops.Policies(
            cell=cell,
            mortality=survival,
            lapse=rows_for(codes, self.persistency.row),
            discount=rows_for(np.maximum(self.discount.codes(interest, places), 0), self.discount.row),
            claim_shift=self._claim_shift(places),
            money=self.plans.slots.amounts_of(chunk),
            months=months,
            periods=self.plans.slots.periods_of(chunk),
            changing=self._changing(chunk, checked, cell, months),
        )
        return policies, self._curves(), self.plans.records, self.plans.ranges, len(self.plans.lines)

    def _changing(
        self, chunk: Chunk, checked: Checked, cell: NDArray[np.int32], months: NDArray[np.int32]
    ) -> NDArray[np.int32]:
        """Row of relative amounts per policy, for each of the streams where it depends on the policy."""
        rows = np.zeros((len(self.plans.relative.changing), chunk.n), dtype=np.int32)
        users: dict[int, list[int]] = {}
        for number in range(len(self.cells.cells)):
            for changing in self.plans.changing_in(number):
                users.setdefault(changing, []).append(number)
        for changing, cells in users.items():
            concerned = np.zeros(len(self.cells.cells), dtype=bool)
            concerned[cells] = True
            policies = np.flatnonzero(concerned[cell] & (checked.reason == 0))
            if len(policies):
                rows[changing, policies] = self.plans.relative.rows_of(changing, chunk, months, policies)
        return rows

    def _claim_shift(self, places: loops.Places) -> NDArray[np.int64]:
        """Calendar months from the end of a step to the payment of its death claims."""
        after = self.discount.months_after_start()
        if after is None:
            return np.zeros(len(places.day), dtype=np.int64)
        whole = np.floor((places.day - 1) / 30.4375 + after).astype(np.int64)
        return whole - self.settings.step_months

    def _curves(self) -> loops.Curves:
        survival = self.survival
        ends = np.cumsum([0, *(len(rates) + 1 for rates in survival.yearly)])
        return loops.Curves(
            living=survival.living,
            living_at=np.array(survival.living_at, dtype=np.int64),
            living_count=np.array(survival.living_count, dtype=np.int64),
            yearly=_joined([np.append(rates, 1.0) for rates in survival.yearly]),
            reached=_joined([np.concatenate(([1.0], np.cumprod(1 - rates))) for rates in survival.yearly]),
            yearly_at=ends.astype(np.int64),
            offset=np.array(survival.offset, dtype=np.float64),
            closed=np.array(survival.closed, dtype=np.bool_),
            persistency=self.persistency.rows["held"],
            dead=self.persistency.rows["dead"],
            lapsing=self.persistency.rows["lapsing"],
            payment=self.discount.payment,
            claim=self.discount.claim,
            relative=self.plans.relative.rows,
            ones=self._ones,
        )

    def _flag(self, checked: Checked, bad: NDArray[np.bool_], reason: Reason, column: str) -> None:
        if bad.any():
            rows = np.flatnonzero(bad & (checked.reason == 0))
            checked.reason[rows] = reason
            checked.field[rows] = self.needed.index(column) if column in self.needed else -1

    def _name_faults(self, checked: Checked, fault: NDArray[np.int64], streams: NDArray[Any]) -> None:
        """Point at the column behind a duration or frequency that the loops could not use."""
        durations = list(self.plans.slots.durations)
        for i in np.flatnonzero(fault >= 0).tolist():
            record = streams[fault[i]]
            rows = [record[name] for name in ("end", "guarantee", "start") if record[name] >= 0]
            columns = [what for kind, what in (durations[row] for row in rows) if kind == "column"]
            if columns and columns[0] in self.needed:
                checked.field[i] = self.needed.index(str(columns[0]))

    def _months(
        self, checked: Checked, policies: loops.Policies, places: loops.Places, counts: NDArray[np.int64]
    ) -> int:
        """Policy-months from the valuation date to the end of survival or of the longest stream."""
        fine = checked.reason == 0
        ends = counts[np.maximum(policies.mortality, 0)] - 1
        finite = self._last_end(policies)
        return int(np.maximum(np.minimum(ends, finite) - places.k, 0)[fine].sum())

    def _last_end(self, policies: loops.Policies) -> NDArray[np.int64]:
        latest = np.zeros(len(policies.cell), dtype=np.int64)
        records = self.plans.records
        for number, (begin, end) in enumerate(self.plans.ranges[: len(self.cells.cells)]):
            mine = np.flatnonzero(policies.cell == number)
            if not len(mine):
                continue
            rows = {int(row) for row in records["end"][begin:end]}
            if -1 in rows or not rows:
                latest[mine] = LONGEST
            else:
                latest[mine] = policies.months[np.array(sorted(rows))[:, None], mine].max(axis=0)
        return latest


class _Until:
    """Months after which lapses stop, by lapse rule and perhaps a column of the policy."""

    def __init__(self, basis: Basis) -> None:
        rules = basis.document.lapse.rule if basis.document.lapse else []
        self.columns = [rule.until if isinstance(rule.until, str) else "" for rule in rules]
        fixed = [rule.until if isinstance(rule.until, float | int) else None for rule in rules]
        # The last place answers for rule -1, a basis without lapses.
        self.fixed = np.array(
            [NEVER if years is None else int(np.floor(12 * years + 1e-6)) for years in fixed] + [NEVER]
        )

    @property
    def column(self) -> str:
        """A column that some rule looks at, for messages."""
        return next((column for column in self.columns if column), "")

    def months(self, chunk: Chunk, lapse: NDArray[np.int64]) -> NDArray[np.int64]:
        months = np.minimum(self.fixed, NEVER)[lapse].astype(np.int64)
        for rule, column in enumerate(self.columns):
            if column:
                mine = lapse == rule
                months[mine] = whole_months(chunk.number(column)[mine])
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


def _age_finder(dates: loops.Dates, step: int) -> Any:
    def months_to_age(age: int) -> NDArray[np.int32]:
        months = np.zeros(len(dates.reason), dtype=np.int32)
        loops.months_to_age(dates, age, step, months)
        return months

    return months_to_age


def _joined(rows: list[NDArray[np.float64]]) -> NDArray[np.float64]:
    return np.concatenate(rows) if rows else np.zeros(1)
