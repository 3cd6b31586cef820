"""What a valuation gives back, before anybody lays it out for people."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import pyarrow as pa

from .settings import Settings

PARTS = ("benefits", "expenses", "premiums")
"""Parts of a reserve = benefits + expenses - premiums; commission counts with the expenses."""

MONEY_COLUMNS = ("reserve", "value_of_benefits", "value_of_expenses", "value_of_premiums")
"""Money columns of the per-policy results."""

PolicySink = Callable[[pa.Table], None]
"""Takes the per-policy results chunk by chunk, in the order of the extract."""


@dataclass(frozen=True)
class ControlTotal:
    """The in-force gate of one quantity: read = valued + exceptions, in minor units (or policies)."""

    name: str
    read: int
    valued: int
    exceptions: int

    @property
    def closes(self) -> bool:
        """Whether nothing was lost."""
        return self.read == self.valued + self.exceptions


@dataclass(frozen=True)
class SampleCheck:
    """The sample valued a second time by the plain twin.

    largest_difference is in currency, before rounding; relative to the sum of the absolute parts.
    """

    policies: int
    largest_difference: float
    largest_relative: float
    policy_id: str
    tolerance: float = 1e-9

    @property
    def passes(self) -> bool:
        """Whether both implementations agree."""
        return self.largest_relative <= self.tolerance


@dataclass(frozen=True)
class OnBasis:
    """What a further basis gave, for the same policies; fields as in ``Outcome``.

    name: as the run document calls it; its columns of the policies and totals end in it.
    """

    name: str
    title: str
    cash_flows: pa.Table
    total: dict[str, int]
    sample: SampleCheck
    conventions: tuple[tuple[str, str], ...]
    counts: dict[str, int] = field(default_factory=dict)


@dataclass(frozen=True)
class Outcome:
    """A finished valuation.

    totals: one row per group with ``policies``, the money columns and ``rounding``, money in currency rounded
    to the minor unit, then the same columns for each further basis with its name behind theirs. cash_flows: month
    (first day), product, stream, part, direction, amount; undiscounted expected amounts. exceptions: policy_id,
    product, reason, field, value, rule; one row per policy not valued. total: sums over all policies in minor units,
    by money column. further: what the further bases gave.
    """

    settings: Settings
    totals: pa.Table
    cash_flows: pa.Table
    exceptions: pa.Table
    control: tuple[ControlTotal, ...]
    total: dict[str, int]
    sample: SampleCheck
    group_by: tuple[str, ...]
    conventions: tuple[tuple[str, str], ...]
    counts: dict[str, int] = field(default_factory=dict)
    """How many distinct curves, cells and policy-months the valuation met."""
    timings: dict[str, float] = field(default_factory=dict)
    """Seconds by phase."""
    notes: tuple[str, ...] = ()
    """Counted peculiarities for the first page: closed tables, held rates and the like."""
    further: tuple[OnBasis, ...] = ()

    @property
    def read(self) -> int:
        """Policies in the extract."""
        return self.control[0].read

    @property
    def valued(self) -> int:
        """Policies with a reserve."""
        return self.control[0].valued

    @property
    def closes(self) -> bool:
        """Whether every control total closes."""
        return all(total.closes for total in self.control)


Progress = Callable[[int, int], None]
"""Called with policies done and policies in all."""


def no_progress(done: int, total: int) -> None:
    """Say nothing."""


def as_money(minor: int, decimals: int) -> float:
    """Return minor units as the nearest double in currency."""
    return float(minor / 10**decimals)


JSON = dict[str, Any]
