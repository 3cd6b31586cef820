"""Reserves before and after shocks, in one pass over the extract: each chunk through an engine for each basis."""

from __future__ import annotations

from collections.abc import Callable, Collection, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from assumptions.basis import Basis
from assumptions.shocks import Shock
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.extract import CHUNK_ROWS, Extract
from portfolios.identifiers import find_duplicates

from .basis_columns import needs_of
from .documents import shocked_basis
from .engine import Engine, Valued
from .gate import check_sample
from .groups import Groups, check_names, group_order
from .plain_check import SPARE, Sample
from .results import Progress, SampleCheck, no_progress
from .settings import Settings

Minor = NDArray[np.int64]

PolicyReserves = Callable[[pa.Array, NDArray[np.bool_], Minor, Minor], None]
"""Takes, chunk by chunk, what belongs to the policies that the base values: identifiers; whether each shocked basis
values them too, shape (shocks, policies); reserves on the base, shape (policies,), and on the shocked bases, shape
(shocks, policies), in minor units. Where a policy is not valued its figure is 0."""


@dataclass(frozen=True)
class Sensitivity:
    """What a set of shocks does to the reserves.

    rows: per shock and group, ``shock``, ``title``, the groups, ``policies`` (valued before and after), ``base``,
    ``shocked`` and ``change`` in currency, exact sums of rounded policies, and ``per_cent`` of the base (null where it
    is 0). not_valued: per shock, policies of the base that the shocked basis cannot value; they are in no sum. samples:
    per shock, the check by the plain twin.
    """

    rows: pa.Table
    bases: tuple[Basis, ...]
    not_valued: tuple[int, ...]
    samples: tuple[SampleCheck, ...]


def value_shocks(
    extract: Extract,
    designs: list[Design],
    basis: Basis,
    settings: Settings,
    shocks: Sequence[Shock],
    *,
    group_by: Collection[str] = ("product",),
    in_force: Collection[str] = ("in force",),
    sample: int = 4,
    sink: PolicyReserves | None = None,
    progress: Progress = no_progress,
    threads: int = 2,
    chunk_rows: int = CHUNK_ROWS,
) -> Sensitivity:
    """Value every policy on a basis and on each shocked one.

    A shock that changes nothing is not valued again. sample: policies per basis that the plain twin values again.
    Raises ExtractError or DocumentError for input that does not fit together, RunStopped where the plain twin
    disagrees.
    """
    named = [(getattr(shock, "name", "") or shock.name_in_words, shock.name_in_words) for shock in shocks]
    bases = [shocked_basis(basis, shock, settings.valuation_date) for shock in shocks]
    run = _Run(extract, designs, basis, bases, settings, tuple(group_by), in_force, sample)
    run.go(sink, progress, threads, chunk_rows)
    return Sensitivity(run.table(named), tuple(bases), tuple(run.lost), run.samples())


class _Run:
    """One pass under way. ``place[s]`` is the position of shock s among the distinct bases; the base is the first."""

    def __init__(
        self, extract: Extract, designs: list[Design], base: Basis, bases: list[Basis], settings: Settings,
        group_by: tuple[str, ...], in_force: Collection[str], sample: int,
    ) -> None:  # fmt: skip
        check_names(group_by)
        self.extract, self.settings, self.group_by = extract, settings, group_by
        distinct = {id(one): one for one in (base, *bases)}
        self.bases = list(distinct.values())
        self.place = [list(distinct).index(id(one)) for one in bases]
        needs = needs_of(extract, designs, self.bases, group_by)
        self.needed = needs.needed
        self.engines = [Engine(designs, one, settings, needs.needed, needs.kinds, in_force) for one in self.bases]
        duplicates = find_duplicates(extract, keep=sample + SPARE)
        for engine in self.engines:
            engine.checks.duplicates = duplicates
        self.checks = [Sample(sample, duplicates.smallest, designs, one, settings) for one in self.bases]
        self.groups = Groups(group_by)
        self.sums: list[dict[int, list[int]]] = [{} for _ in bases]
        self.lost = [0] * len(bases)

    def go(self, sink: PolicyReserves | None, progress: Progress, threads: int, chunk_rows: int) -> None:
        """Value chunk by chunk; the engines of a chunk run beside each other."""
        read = 0
        with ThreadPoolExecutor(max(1, threads), thread_name_prefix="shock") as pool:
            for chunk in self.extract.chunks(self.needed, chunk_rows):
                # What the checks find holds on every basis, but what one basis refuses does not keep others from it.
                placed = self.engines[0].place(chunk)
                # The first engine converts the columns that the others share.
                base = self.engines[0].value(chunk, placed)
                found = [
                    base,
                    *pool.map(lambda engine, part=chunk, at=placed: engine.value(part, at), self.engines[1:]),
                ]
                for check, valued in zip(self.checks, found, strict=True):
                    check.take(check.candidates(chunk, valued))
                self._add(chunk, found, sink)
                read += chunk.n
                progress(read, self.extract.rows)

    def _add(self, chunk: Chunk, found: list[Valued], sink: PolicyReserves | None) -> None:
        base, group = found[0], self.groups.of(chunk)
        fine = base.valued
        held = base.results.minor[:, 0]
        both = np.array([fine & found[place].valued for place in self.place]).reshape(-1, chunk.n)
        after = np.array([found[place].results.minor[:, 0] for place in self.place]).reshape(-1, chunk.n)
        for shock, mask in enumerate(both):
            self.lost[shock] += int(fine.sum() - mask.sum())
            for number in np.unique(group[mask]).tolist():
                mine = mask & (group == number)
                sums = self.sums[shock].setdefault(number, [0, 0, 0])
                for at, figure in enumerate((mine.sum(), held[mine].sum(), after[shock, mine].sum())):
                    sums[at] += int(figure)
        if sink is not None:
            sink(pa.array(chunk.ids).filter(pa.array(fine)), both[:, fine], held[fine], after[:, fine])

    def samples(self) -> tuple[SampleCheck, ...]:
        """The checks of the shocks' bases. Raises RunStopped where the plain twin disagrees with one or the base."""
        results = [check.result() for check in self.checks]
        for basis, result in zip(self.bases, results, strict=True):
            check_sample(result, f"on basis '{basis.title}': ")
        return tuple(results[place] for place in self.place)

    def table(self, named: list[tuple[str, str]]) -> pa.Table:
        """One row per shock and group, groups in their order."""
        keys, unit = self.groups.keys, 10**self.settings.decimals
        rows: list[dict[str, Any]] = []
        for (name, title), sums in zip(named, self.sums, strict=True):
            for place in sorted(sums, key=lambda place: group_order(keys[place])):
                policies, base, after = sums[place]
                row: dict[str, Any] = {"shock": name, "title": title}
                row |= dict(zip(self.group_by, keys[place], strict=True))
                row |= {"policies": policies, "base": base / unit, "shocked": after / unit}
                row |= {"change": (after - base) / unit, "per_cent": 100 * (after - base) / base if base else None}
                rows.append(row)
        return pa.Table.from_pylist(rows)
