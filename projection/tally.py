"""Tallies: what chunks add up to, in whole numbers only, so that the order of policies cannot matter."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from . import loops
from .groups import group_order
from .plans import Plans
from .results import MONEY_COLUMNS, ControlTotal

QUANTA = 1000
"""Cash flows are added in whole thousandths of a minor unit."""


@dataclass
class ChunkTally:
    """What one chunk adds on one basis: money by group, cash flows by line and month.

    Control totals, exceptions and policies are the same for all bases; they come with those of the run's own.
    """

    totals: NDArray[np.int64]
    flows: NDArray[np.int64]
    control: dict[str, tuple[int, int, int]] = field(default_factory=dict)
    exceptions: pa.Table | None = None
    policies: pa.Table | None = None
    months: int = 0
    seconds: dict[str, float] = field(default_factory=dict)
    totals_read: int = 0
    sample: list[Any] = field(default_factory=list)


@dataclass
class Tally:
    """The sums over all chunks so far."""

    decimals: int
    totals: NDArray[Any] = field(default_factory=lambda: np.zeros((0, 1 + len(MONEY_COLUMNS)), dtype=object))
    flows: NDArray[np.int64] = field(default_factory=lambda: np.zeros((0, loops.BINS), dtype=np.int64))
    control: dict[str, list[int]] = field(default_factory=dict)
    exceptions: list[pa.Table] = field(default_factory=list)
    months: int = 0
    seconds: dict[str, float] = field(default_factory=dict)

    def add(self, part: ChunkTally) -> None:
        """Add a chunk."""
        self.totals = _grown(self.totals, len(part.totals))
        self.totals[: len(part.totals)] += part.totals
        self.flows = _grown(self.flows, len(part.flows))
        self.flows[: len(part.flows)] += part.flows
        for name, figures in part.control.items():
            sums = self.control.setdefault(name, [0, 0, 0])
            for place, figure in enumerate(figures):
                sums[place] += figure
        if part.exceptions is not None and len(part.exceptions):
            self.exceptions.append(part.exceptions)
        self.months += part.months
        for phase, seconds in part.seconds.items():
            self.seconds[phase] = self.seconds.get(phase, 0.0) + seconds

    def total(self) -> dict[str, int]:
        """Sums over all policies in minor units, by money column."""
        sums = self.totals.sum(axis=0) if len(self.totals) else np.zeros(1 + len(MONEY_COLUMNS), dtype=object)
        return {name: int(sums[1 + place]) for place, name in enumerate(MONEY_COLUMNS)}

    def control_totals(self) -> tuple[ControlTotal, ...]:
        """The in-force gate, policies first."""
        return tuple(ControlTotal(name, *sums) for name, sums in self.control.items())

    def totals_table(self, names: tuple[str, ...], keys: list[tuple[Any, ...]]) -> pa.Table:
        """Totals by group, sorted by group: group columns, policies, money columns, rounding."""
        order = sorted(
            (place for place in range(len(self.totals)) if self.totals[place, 0]),
            key=lambda place: group_order(keys[place]),
        )
        columns: dict[str, Any] = {
            name: pa.array([keys[place][at] for place in order]) for at, name in enumerate(names)
        }
        rows = self.totals[order] if order else self.totals[:0]
        columns["policies"] = pa.array([int(row[0]) for row in rows], pa.int64())
        for at, name in enumerate(MONEY_COLUMNS):
            columns[name] = self._money([int(row[1 + at]) for row in rows])
        columns["rounding"] = self._money([int(row[1] - row[2] - row[3] + row[4]) for row in rows])
        return pa.table(columns)

    def flows_table(self, plans: Plans, year: int, month: int) -> pa.Table:
        """Expected cash flows by calendar month and line, without the months in which a line has none."""
        lines = list(plans.lines)
        amounts = self._by_line(plans)
        order = sorted(range(len(lines)), key=lambda place: (lines[place].product, place))
        flat = amounts[order].T.reshape(-1)
        paid = np.flatnonzero(flat)
        months, places = np.divmod(paid, max(1, len(order)))
        dates = (np.datetime64(f"{year:04d}-{month:02d}", "M") + months).astype("datetime64[D]").astype(np.int32)
        return pa.table(
            {
                "month": pa.array(dates, pa.int32()).cast(pa.date32()),
                **{
                    name: _chosen([getattr(lines[place], name) for place in order], places)
                    for name in ("product", "stream", "part", "direction")
                },
                "amount": pa.array(flat[paid] / 10**self.decimals, pa.float64()),
            }
        )

    def _by_line(self, plans: Plans) -> NDArray[np.float64]:
        """Minor units by line and month: each line's shares of the accounts, rounded once."""
        parts: dict[int, list[NDArray[np.float64]]] = {line: [] for line in range(len(plans.lines))}
        for (_, shares), account in plans.accounts.items():
            if account < len(self.flows):
                for line, share in shares:
                    parts[line].append(share * self.flows[account])
        # Added in order of size: which account was met first must not matter, even to the last bit.
        nothing = np.zeros((1, self.flows.shape[1]))
        sums = [np.sort(np.array([*nothing, *found]), axis=0).sum(axis=0) for found in parts.values()]
        return np.rint(np.array(sums or nothing) / QUANTA)

    def _money(self, minor: list[int]) -> pa.Array:
        return pa.array([figure / 10**self.decimals for figure in minor], pa.float64())


def _grown(array: NDArray[Any], rows: int) -> NDArray[Any]:
    if len(array) >= rows:
        return array
    return np.concatenate((array, np.zeros((rows - len(array), array.shape[1]), dtype=array.dtype)))


def _chosen(values: list[str], places: NDArray[np.int64]) -> pa.Array:
    """A column of texts from a list, by reference to the distinct ones."""
    distinct = list(dict.fromkeys(values))
    codes = np.array([distinct.index(value) for value in values], dtype=np.int32)
    return pa.DictionaryArray.from_arrays(codes[places], pa.array(distinct, pa.string()))
