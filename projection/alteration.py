"""Alterations at equal value: a contract is changed, and one amount of it is found such that its reserve stays.

A policy that stops its premiums and keeps a paid-up sum, one whose term or sum is changed, one that is turned into
another product: the reserve before, less a charge, is the reserve after, both on the same basis and date.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.designs import Design

from .equivalence import Solved, solve, with_column
from .settings import Settings
from .unrounded import Valuer

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class Altered:
    """Policies after an alteration.

    before: reserve before, in currency, NaN where the policy was not valued; solved: the amount found for each, why
    there is none, and the values after.
    """

    before: Numbers
    solved: Solved

    @property
    def after(self) -> Numbers:
        """Reserve after the alteration, shape (n,)."""
        value = self.solved.value
        return np.asarray(value[:, 0] + value[:, 1] - value[:, 2])


def alter(
    policies: pa.Table,
    changes: Mapping[str, Any],
    unknown: str,
    designs: list[Design],
    basis: Basis,
    settings: Settings,
    *,
    charge: float = 0.0,
    net: bool = False,
    in_force: Collection[str] = ("in force",),
) -> Altered:
    """Alter policies at equal value.

    policies: with the columns of the extract; changes: column to its new value, one for all policies or an array;
    unknown: the amount to find, such as ``sum_assured`` for a paid-up sum or ``premium_pa`` for a new term; charge:
    taken from the reserve, in currency; net: without expenses and commission on either side. Raises DocumentError and
    ExtractError where what is given does not fit together.
    """
    before = Valuer(policies, designs, basis, settings, in_force).value(policies)
    reserve = before.net if net else before.reserve
    changed = policies
    for column, value in changes.items():
        changed = _with(changed, column, value)
    if unknown not in changed.column_names:
        changed = with_column(changed, unknown, np.zeros(changed.num_rows))
    valuer = Valuer(changed, designs, basis, settings, in_force)
    return Altered(reserve, solve(valuer, changed, unknown, np.nan_to_num(reserve) - charge, net))


def _with(policies: pa.Table, name: str, value: Any) -> pa.Table:
    if not isinstance(value, list | tuple | np.ndarray | pa.Array | pa.ChunkedArray):
        value = [value] * policies.num_rows
    column = value if isinstance(value, pa.Array | pa.ChunkedArray) else pa.array(value)
    if name not in policies.column_names:
        return policies.append_column(name, column)
    kind = policies.schema.field(name).type
    column = column if pa.types.is_integer(kind) and not pa.types.is_integer(column.type) else column.cast(kind)
    return policies.set_column(policies.schema.get_field_index(name), name, column)
