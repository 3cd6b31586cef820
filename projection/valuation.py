"""A whole valuation: the extract in, chunk by chunk over the threads, the outcome out."""

from __future__ import annotations

import os
from collections import deque
from collections.abc import Collection, Iterator, Mapping
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import closing
from dataclasses import dataclass
from time import perf_counter
from types import MappingProxyType

import pyarrow as pa

from assumptions.basis import Basis
from portfolios.chunk import Chunk
from portfolios.columns import BY_NAME
from portfolios.designs import Design
from portfolios.exception_rows import no_exceptions
from portfolios.extract import CHUNK_ROWS, Extract
from portfolios.identifiers import find_duplicates

from .basis_columns import needs_of
from .basis_names import OWN, column_on
from .chunk_results import ChunkResults
from .documents import DocumentError
from .engine import Engine
from .gate import check_gate, check_sample
from .groups import Groups, check_names
from .plain_check import SPARE, Sample
from .results import MONEY_COLUMNS, OnBasis, Outcome, PolicySink, Progress, no_progress
from .settings import Settings
from .sheet import convention_sheet
from .sides import Side, named_bases, value_on_all
from .tally import ChunkTally, Tally


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
    further: Mapping[str, Basis] = MappingProxyType({}),
    group_by: Collection[str] = ("product",),
    in_force: Collection[str] = ("in force",),
    exceptions_limit: float = 1.0,
    sample: int = 24,
    sink: PolicySink | None = None,
    progress: Progress = no_progress,
    threads: int | None = None,
    chunk_rows: int = CHUNK_ROWS,
) -> Outcome:
    """Value every policy of an extract, on one basis or on several side by side.

    further: more bases by name. sink takes the per-policy results in the order of the extract: policy_id, product,
    the groups, and the money columns in currency, for further bases with their name behind. Raises ExtractError or
    DocumentError for input that does not fit together, RunStopped where more than ``exceptions_limit`` of the
    policies cannot be valued, the in-force gate does not close, or the plain twin disagrees.
    """
    plan = Plan(tuple(group_by), tuple(in_force), exceptions_limit, sample, threads or usable_cores(), chunk_rows)
    return _Valuation(extract, designs, named_bases(basis, further), settings, plan).run(sink, progress)


class _Valuation:
    """One valuation under way."""

    def __init__(
        self, extract: Extract, designs: list[Design], bases: dict[str, Basis], settings: Settings, plan: Plan
    ) -> None:
        self.extract, self.designs, self.bases, self.settings, self.plan = extract, designs, bases, settings, plan
        check_names(plan.group_by, [name for name in bases if name != OWN])
        self.group_by = plan.group_by
        self.amounts = [name for name in extract.column_names if name in BY_NAME and BY_NAME[name].kind == "money"]
        needs = needs_of(extract, designs, bases.values(), [*self.group_by, *self.amounts])
        self.needed, self.kinds = needs.needed, needs.kinds
        self.groups = Groups(self.group_by)
        self.seconds: dict[str, float] = {}
        self.read = 0

    def run(self, sink: PolicySink | None, progress: Progress) -> Outcome:
        """Read, value and add up."""
        began = perf_counter()
        plan = self.plan
        engines = {name: self._engine(name, basis) for name, basis in self.bases.items()}
        self.engine = engines[OWN]
        with ThreadPoolExecutor(1, thread_name_prefix="meet") as beside:
            # The first chunk meets most of the curves; they are made while identifiers are looked through.
            meeting = beside.submit(self._meet_first, list(engines.values())) if plan.threads > 1 else None
            duplicates = find_duplicates(self.extract, keep=plan.sample + SPARE)
            if meeting is not None:
                meeting.result()
        self.engine.checks.duplicates = duplicates
        self.sides = [
            Side(
                name,
                self.bases[name],
                engine,
                Tally(self.settings.decimals),
                Sample(plan.sample, duplicates.smallest, self.designs, self.bases[name], self.settings),
            )
            for name, engine in engines.items()
        ]
        self.results = ChunkResults(self.sides, self.groups, self.needed, self.amounts)
        self.seconds["identifiers"] = perf_counter() - began
        for parts in self._parts():
            for side, part in zip(self.sides, parts, strict=True):
                side.tally.add(part)
                self._check_sample(side, part)
            first = parts[0]
            if sink is not None and first.policies is not None and first.policies.num_rows:
                sink(first.policies)
            self.read += first.totals_read
            progress(self.read, self.extract.rows)
        return self._outcome(began)

    def _engine(self, name: str, basis: Basis) -> Engine:
        try:
            return Engine(self.designs, basis, self.settings, self.needed, self.kinds, self.plan.in_force)
        except DocumentError as error:
            error.side = name
            raise

    def _check_sample(self, side: Side, part: ChunkTally) -> None:
        started = perf_counter()
        side.sample.take(part.sample)
        self.seconds["sample"] = self.seconds.get("sample", 0.0) + perf_counter() - started

    def _meet_first(self, engines: list[Engine]) -> None:
        with closing(self.extract.chunks(self.needed, self.plan.chunk_rows)) as chunks:
            for chunk in chunks:
                for engine in engines:
                    engine.meet(chunk)
                return

    def _parts(self) -> Iterator[list[ChunkTally]]:
        """Results of the chunks in their order; a few chunks are under way at any time."""
        chunks = self._chunks()
        if self.plan.threads <= 1:
            yield from map(self._work, chunks)
            return
        waiting: deque[Future[list[ChunkTally]]] = deque()
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

    def _work(self, chunk: Chunk) -> list[ChunkTally]:
        return self.results.of(chunk, *value_on_all(self.sides, chunk))

    def _outcome(self, began: float) -> Outcome:
        own, *others = self.sides
        control = own.tally.control_totals()
        exceptions = pa.concat_tables([no_exceptions(), *own.tally.exceptions])
        check_gate(control, exceptions, self.extract.rows, self.plan.exceptions_limit)
        samples = [side.sample.result() for side in self.sides]
        for side, sample in zip(self.sides, samples, strict=True):
            check_sample(sample, side.said)
        totals = own.tally.totals_table(self.group_by, self.groups.keys)
        for side in others:
            table = side.tally.totals_table(self.group_by, self.groups.keys)
            for name in (*MONEY_COLUMNS, "rounding"):
                totals = totals.append_column(column_on(name, side.name), table.column(name))
        return Outcome(
            settings=self.settings,
            totals=totals,
            cash_flows=self._cash_flows(own),
            exceptions=exceptions,
            control=control,
            total=own.tally.total(),
            sample=samples[0],
            group_by=self.group_by,
            conventions=convention_sheet(own.basis, self.settings),
            counts=_counts(own),
            timings=self._timings(began),
            further=tuple(
                OnBasis(
                    name=side.name,
                    title=side.basis.title,
                    cash_flows=self._cash_flows(side),
                    total=side.tally.total(),
                    sample=sample,
                    conventions=convention_sheet(side.basis, self.settings),
                    counts=_counts(side),
                )
                for side, sample in zip(others, samples[1:], strict=True)
            ),
        )

    def _cash_flows(self, side: Side) -> pa.Table:
        today = self.settings.valuation_date
        return side.tally.flows_table(side.engine.plans, today.year, today.month)

    def _timings(self, began: float) -> dict[str, float]:
        seconds = dict(self.seconds)
        for side in self.sides:
            for phase, taken in side.tally.seconds.items():
                seconds[phase] = seconds.get(phase, 0.0) + taken
        return {**seconds, "total": perf_counter() - began}


def _counts(side: Side) -> dict[str, int]:
    engine = side.engine
    return {
        "policy-months": side.tally.months,
        "sets of policies that rules treat alike": len(engine.cells.cells),
        "survival curves": len(engine.survival.records),
        "persistency curves": len(engine.persistency.known),
        "discount curves": len(engine.discount.known),
        "rows of relative amounts": len(engine.plans.relative.known),
    }


def usable_cores() -> int:
    """Processors that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
