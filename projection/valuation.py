"""A whole valuation: the extract in, chunk by chunk over the threads, the outcome out."""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Collection, Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import closing
from dataclasses import dataclass
from time import perf_counter
from typing import Any

import numpy as np
import pyarrow as pa

from assumptions.basis import Basis
from portfolios.checks import needed_columns, number_columns
from portfolios.chunk import Chunk
from portfolios.columns import BY_NAME
from portfolios.designs import Design
from portfolios.exception_rows import exception_rows, no_exceptions
from portfolios.extract import CHUNK_ROWS, Extract
from portfolios.identifiers import find_duplicates
from portfolios.reasons import Reason

from . import loops
from .engine import Engine, Valued
from .gate import RunStopped, check_gate
from .groups import Groups, check_names
from .lives import need_ratings, ratings_used, rule_columns
from .plain_check import Sample
from .results import MONEY_COLUMNS, Outcome, PolicySink, Progress, no_progress
from .settings import Settings
from .sheet import convention_sheet
from .tally import ChunkTally, Tally

SPARE = 24
"""Policies that may step in where others of the sample turn out to be exceptions."""


@dataclass(frozen=True)
class Plan:
    """What a valuation is asked beside its figures.

    group_by: extract columns of the totals; in_force: values of 'status' that are valued; exceptions_limit:
    share of policies that may be exceptions; sample: policies that the plain twin values again; threads: at
    most; chunk_rows: policies at a time.
    """

    group_by: tuple[str, ...] = ("product",)
    in_force: tuple[str, ...] = ("in force",)
    exceptions_limit: float = 1.0
    sample: int = 24
    threads: int = 2
    chunk_rows: int = CHUNK_ROWS


def value_extract(
    extract: Extract,
    designs: list[Design],
    basis: Basis,
    settings: Settings,
    *,
    group_by: Collection[str] = ("product",),
    in_force: Collection[str] = ("in force",),
    exceptions_limit: float = 1.0,
    sample: int = 24,
    sink: PolicySink | None = None,
    progress: Progress = no_progress,
    threads: int | None = None,
    chunk_rows: int = CHUNK_ROWS,
) -> Outcome:
    """Value every policy of an extract.

    sink takes the per-policy results in the order of the extract: policy_id, product, the groups, and the
    money columns in currency. Raises ExtractError or DocumentError for input that does not fit together,
    RunStopped where more than ``exceptions_limit`` of the policies cannot be valued, the in-force gate does
    not close, or the plain twin disagrees.
    """
    plan = Plan(tuple(group_by), tuple(in_force), exceptions_limit, sample, threads or usable_cores(), chunk_rows)
    return _Valuation(extract, designs, basis, settings, plan).run(sink, progress)


class _Valuation:
    """One valuation under way."""

    def __init__(self, extract: Extract, designs: list[Design], basis: Basis, settings: Settings, plan: Plan) -> None:
        self.extract, self.designs, self.basis, self.settings, self.plan = extract, designs, basis, settings, plan
        check_names(plan.group_by)
        self.group_by = plan.group_by
        until = [rule.until for rule in basis.document.lapse.rule] if basis.document.lapse else []
        numbers = [*number_columns(designs), *(column for column in until if isinstance(column, str))]
        asked = rule_columns(basis, designs, extract.column_names)
        need_ratings(basis, designs, extract.column_names)
        ratings = ratings_used(basis, designs, extract.column_names)
        self.needed = needed_columns(designs, [*numbers, *asked, *ratings, *self.group_by])
        extract.need(self.needed, numbers=numbers)
        self.amounts = [name for name in extract.column_names if name in BY_NAME and BY_NAME[name].kind == "money"]
        self.needed = tuple(dict.fromkeys([*self.needed, *self.amounts]))
        extract.need(self.needed, numbers=numbers)
        self.groups = Groups(self.group_by)
        self.seconds: dict[str, float] = {}
        self.kinds = {column: str(extract.column_kind(column)) for column in asked}
        self.read = 0

    def run(self, sink: PolicySink | None, progress: Progress) -> Outcome:
        """Read, value and add up."""
        began = perf_counter()
        plan = self.plan
        self.engine = Engine(self.designs, self.basis, self.settings, self.needed, self.kinds, plan.in_force)
        with ThreadPoolExecutor(1, thread_name_prefix="meet") as beside:
            # The first chunk meets most of the curves; they are made while identifiers are looked through.
            meeting = beside.submit(self._meet_first) if plan.threads > 1 else None
            duplicates = find_duplicates(self.extract, keep=plan.sample + SPARE)
            if meeting is not None:
                meeting.result()
        self.engine.checks.duplicates = duplicates
        self.sample = Sample(plan.sample, duplicates.smallest, self.designs, self.basis, self.settings)
        self.seconds["identifiers"] = perf_counter() - began
        tally = Tally(self.settings.decimals)
        for part in self._parts():
            tally.add(part)
            if sink is not None and part.policies.num_rows:
                sink(part.policies)
            self._check_sample(part)
            self.read += part.totals_read
            progress(self.read, self.extract.rows)
        return self._outcome(tally, began)

    def _check_sample(self, part: ChunkTally) -> None:
        started = perf_counter()
        self.sample.take(part.sample)
        self.seconds["sample"] = self.seconds.get("sample", 0.0) + perf_counter() - started

    def _meet_first(self) -> None:
        with closing(self.extract.chunks(self.needed, self.plan.chunk_rows)) as chunks:
            for chunk in chunks:
                self.engine.meet(chunk)
                return

    def _parts(self) -> Iterator[ChunkTally]:
        """Results of the chunks in their order; a few chunks are under way at any time."""
        chunks = self._chunks()
        if self.plan.threads <= 1:
            yield from map(self._work, chunks)
            return
        waiting: deque[Future[ChunkTally]] = deque()
        with ThreadPoolExecutor(self.plan.threads, thread_name_prefix="value") as pool:
            try:
                for chunk in chunks:
                    waiting.append(pool.submit(self._work, chunk))
                    if len(waiting) > self.plan.threads + 1:
                        yield waiting.popleft().result()
                while waiting:
                    yield waiting.popleft().result()
            finally:
                for future in waiting:
                    future.cancel()

    def _chunks(self) -> Iterator[Chunk]:
        chunks = self.extract.chunks(self.needed, self.plan.chunk_rows)
        while True:
            began = perf_counter()
            chunk = next(chunks, None)
            self.seconds["read"] = self.seconds.get("read", 0.0) + perf_counter() - began
            if chunk is None:
                return
            yield chunk

    def _work(self, chunk: Chunk) -> ChunkTally:
        valued = self.engine.value(chunk)
        began = perf_counter()
        checked, results = valued.checked, valued.results
        groups = self.groups.of(chunk)
        totals = np.zeros((len(self.groups.keys), 1 + len(MONEY_COLUMNS)), dtype=np.int64)
        loops.add_totals(groups, checked.reason, results.minor, totals)
        exceptions = self._exceptions(chunk, valued)
        part = ChunkTally(
            totals=totals,
            flows=results.flows.reshape(-1, loops.BINS),
            control=self._control(chunk, valued),
            exceptions=exceptions,
            policies=self._policies(chunk, valued),
            months=valued.months,
            seconds=valued.seconds,
            totals_read=chunk.n,
            sample=self.sample.candidates(chunk, valued),
        )
        part.seconds["results"] = perf_counter() - began
        return part

    def _exceptions(self, chunk: Chunk, valued: Valued) -> pa.Table:
        if not valued.checked.reason.any():
            return no_exceptions()
        rows = exception_rows(chunk, valued.checked, self.needed)
        unfitted = valued.checked.reason[valued.checked.reason != 0] == Reason.NO_RULE_FITS
        if not unfitted.any():
            return rows
        # The rules are the basis's; say which part of it has none for the policy.
        cells = self.engine.cells.of(chunk, valued.checked.product)[valued.checked.reason != 0]
        texts = rows.column("rule").to_pylist()
        for place in np.flatnonzero(unfitted).tolist():
            texts[place] = f"a rule of {self.engine.cells.cells[cells[place]].missing} must fit"
        return rows.set_column(rows.schema.get_field_index("rule"), "rule", pa.array(texts, pa.string()))

    def _control(self, chunk: Chunk, valued: Valued) -> dict[str, tuple[int, int, int]]:
        """Read, valued and exceptions: policies, and each amount of the extract in minor units."""
        good = valued.valued
        control = {"policies": (chunk.n, int(good.sum()), int((~good).sum()))}
        for name in self.amounts:
            sums = np.zeros(3, dtype=np.int64)
            loops.control_sums(chunk.number(name), valued.checked.reason, self.engine.rules.minor, sums)
            control[name] = (int(sums[0]), int(sums[1]), int(sums[2]))
        return control

    def _policies(self, chunk: Chunk, valued: Valued) -> pa.Table:
        minor = valued.results.minor / self.engine.rules.minor
        names = dict.fromkeys(["product", *self.group_by])
        columns: dict[str, Any] = {"policy_id": chunk.ids}
        columns.update({name: _plain(chunk.raw(name)) for name in names if name != "policy_id"})
        columns.update(
            {name: pa.array(np.ascontiguousarray(minor[:, place])) for place, name in enumerate(MONEY_COLUMNS)}
        )
        table = pa.table(columns)
        return table if not valued.checked.reason.any() else table.filter(pa.array(valued.valued))

    def _outcome(self, tally: Tally, began: float) -> Outcome:
        control = tally.control_totals()
        exceptions = pa.concat_tables([no_exceptions(), *tally.exceptions])
        check_gate(control, exceptions, self.extract.rows, self.plan.exceptions_limit)
        result = self.sample.result()
        if not result.passes:
            raise RunStopped(
                f"policy {result.policy_id}: the engine and the plain twin differ by {result.largest_difference:.6g} "
                f"({result.largest_relative:.1e} of the value); this is a fault of the program, please report it"
            )
        today = self.settings.valuation_date
        seconds = {**self.seconds, **tally.seconds, "total": perf_counter() - began}
        engine = self.engine
        return Outcome(
            settings=self.settings,
            totals=tally.totals_table(self.group_by, self.groups.keys),
            cash_flows=tally.flows_table(engine.plans, today.year, today.month),
            exceptions=exceptions,
            control=control,
            total=tally.total(),
            sample=result,
            group_by=self.group_by,
            conventions=convention_sheet(self.basis, self.settings),
            counts={
                "policy-months": tally.months,
                "sets of policies that rules treat alike": len(engine.cells.cells),
                "survival curves": len(engine.survival.records),
                "persistency curves": len(engine.persistency.known),
                "discount curves": len(engine.discount.known),
                "rows of relative amounts": len(engine.plans.relative.known),
            },
            timings=seconds,
        )


def usable_cores() -> int:
    """Processors that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _plain(column: pa.Array) -> pa.Array:
    return column.combine_chunks() if isinstance(column, pa.ChunkedArray) else column
