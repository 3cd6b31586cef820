"""Slopes of a whole extract: the value and its derivative to every rate of the basis, by group, in one pass."""

from __future__ import annotations

from collections.abc import Collection
from concurrent.futures import ThreadPoolExecutor
from dataclasses import astuple, dataclass, field
from math import fsum
from threading import Lock
from typing import Any

import numpy as np
import pyarrow as pa

from assumptions.basis import Basis
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.extract import CHUNK_ROWS, Extract
from portfolios.identifiers import find_duplicates

from . import loops
from .basis_columns import needs_of
from .documents import DocumentError
from .engine import Engine
from .groups import Groups, group_order
from .plans import Line
from .results import Progress, no_progress
from .settings import Settings
from .slopes import Gathering, Slope, lapse_slopes, mortality_slopes
from .slopes_interest import interest_slopes, key_rate_slopes, parallel
from .valuation import usable_cores

PARTS_OF_MINOR = 10_000
"""What hangs on a number is added in whole parts of a minor unit, so that no order of policies changes a digit."""

PARTS = (mortality_slopes, lapse_slopes, interest_slopes, key_rate_slopes)


@dataclass(frozen=True)
class Slopes:
    """Slopes of a portfolio.

    table: one row for each group and figure of the basis: the columns of the groups, ``part``, ``rule``, ``title``,
    ``at``, ``duration``, ``slope``, ``relative`` as in ``slopes.Slope``. streams: one row for each group and line of
    money: the columns of the groups, ``stream``, ``part``, ``value`` with the sign that it has in the reserve; it
    is the slope to a change in proportion. parallel: by group, first and second derivative to a parallel shift of all
    annual spot rates.
    """

    table: pa.Table
    streams: pa.Table
    parallel: pa.Table


@dataclass
class _Gathered:
    """What the policies of a group hang on, policies valued among them."""

    scale: float
    found: Gathering = field(init=False)
    policies: int = 0

    def __post_init__(self) -> None:
        self.found = Gathering(self.scale)


def slopes_of(
    extract: Extract,
    designs: list[Design],
    basis: Basis,
    settings: Settings,
    *,
    group_by: Collection[str] = (),
    in_force: Collection[str] = ("in force",),
    progress: Progress = no_progress,
    threads: int | None = None,
    chunk_rows: int = CHUNK_ROWS,
) -> Slopes:
    """Return the slopes of every policy that a run would value, added up by group.

    Raises DocumentError where a design is valued by Woolhouse's formula with three terms, whose correction has no
    slope here, or the basis's rates were changed by a shock, and what ``value_extract`` raises for input that does not
    fit together.
    """
    if any(basis.adjustments) or any(basis.lapse_adjustments):
        raise DocumentError(f"{basis.title}: no slopes of a basis after a shock to its rates; take those of the first")
    for design in designs:
        for stream in design.stream:
            if stream.payments == "Woolhouse 3":
                raise DocumentError(
                    f"design {design.code}, stream '{stream.name}': no slopes of Woolhouse's third term; "
                    "take 'at their dates' or 'Woolhouse 2'"
                )
    return _Run(extract, designs, basis, settings, tuple(group_by), in_force).run(
        progress, threads or usable_cores(), chunk_rows
    )


class _Run:
    """A pass under way."""

    def __init__(
        self,
        extract: Extract,
        designs: list[Design],
        basis: Basis,
        settings: Settings,
        group_by: tuple[str, ...],
        in_force: Collection[str],
    ) -> None:
        self.extract, self.settings = extract, settings
        needs = needs_of(extract, designs, [basis], group_by)
        self.needed = needs.needed
        self.engine = Engine(designs, basis, settings, needs.needed, needs.kinds, in_force)
        self.engine.discount.shared = False
        self.groups = Groups(group_by)
        self.scale = float(PARTS_OF_MINOR * 10**settings.decimals)
        self.gathered: dict[int, _Gathered] = {}
        self._lock = Lock()

    def run(self, progress: Progress, threads: int, chunk_rows: int) -> Slopes:
        """Take every chunk through engine and loops, then go on to the rates."""
        self.engine.checks.duplicates = find_duplicates(self.extract)
        done = 0
        with ThreadPoolExecutor(threads) as pool:
            waiting = []
            for chunk in self.extract.chunks(self.needed, chunk_rows):
                waiting.append(pool.submit(self._work, chunk))
                while len(waiting) > threads:
                    done += waiting.pop(0).result()
                    progress(done, self.extract.rows)
            for future in waiting:
                done += future.result()
                progress(done, self.extract.rows)
        return self._slopes()

    def _work(self, chunk: Chunk) -> int:
        valued = self.engine.value(chunk)
        order, policies, tables = valued.laid
        group = self.groups.of(chunk)[order]
        for number in np.unique(group).tolist():
            mine = np.flatnonzero(group == number)
            found = Gathering(self.scale)
            adjoint = found.room(len(tables.pool), len(self.engine.plans.accounts))
            chosen, some = tables, (order, policies)
            if len(mine) < chunk.n:
                columns = {name: np.ascontiguousarray(getattr(tables, name)[:, mine]) for name in ("money", "whole")}
                chosen, some = tables._replace(**columns), (order[mine], loops.records(policies[mine]))
            loops.slope_policies(*some, chosen, self.engine.rules, valued.results, adjoint)
            with self._lock:
                known = self.gathered.setdefault(number, _Gathered(self.scale))
                known.found.add(found)
                known.policies += int(np.count_nonzero(valued.results.reason[some[0]] == 0))
        return chunk.n

    def _slopes(self) -> Slopes:
        names = self.groups.columns
        keys = self.groups.keys
        order = sorted(
            (number for number, one in self.gathered.items() if one.policies),
            key=lambda number: group_order(keys[number]),
        )
        rows, lines, shifts = [], [], []
        for number in order:
            group = dict(zip(names, keys[number], strict=True))
            found = self.gathered[number].found
            for part in PARTS:
                rows += [group | _row(slope) for slope in part(self.engine, found)]
            lines += [group | line for line in self._lines(found)]
            first, second = parallel(self.engine, found)
            shifts.append(group | {"policies": self.gathered[number].policies, "first": first, "second": second})
        return Slopes(*(pa.Table.from_pylist(table) if table else pa.table({}) for table in (rows, lines, shifts)))

    def _lines(self, found: Gathering) -> list[dict[str, Any]]:
        """Value of every line of money: its shares of the accounts, with the sign that it has in the reserve."""
        plans = self.engine.plans
        shares: dict[Line, list[float]] = {line: [] for line in sorted(plans.lines, key=astuple)}
        named = list(plans.lines)
        for (_, charged), account in plans.accounts.items():
            if account < len(found.accounts):
                for line, share in charged:
                    shares[named[line]].append(share * float(found.accounts[account]) / found.scale)
        return [
            {
                "product": line.product,
                "stream": line.stream,
                "part": line.part,
                "value": -fsum(values) if line.part == "premium" else fsum(values),
            }
            for line, values in shares.items()
            if any(values)
        ]


def _row(slope: Slope) -> dict[str, Any]:
    return {name: getattr(slope, name) for name in Slope.__dataclass_fields__}
