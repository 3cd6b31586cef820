"""The cells of a rate table as policies that are sold: one for each combination of the axes and size bands."""

from __future__ import annotations

from datetime import date
from itertools import product
from typing import Any

import pyarrow as pa

from .documents import DocumentError
from .plain_dates import monthiversary
from .premium_document import BAND, PremiumDocument, SameAs, ToAge

AGES = {"age": "birth_date", "second_age": "second_birth_date"}
"""Axes that stand for a date: the age on the day of sale, which is a birthday."""


def cells_of(document: PremiumDocument) -> pa.Table:
    """Return the axes of the table, one row for each cell, the last axis running fastest; then the size bands."""
    rows = list(product(*document.axes.values()))
    return pa.table({name: _column(name, [row[place] for row in rows]) for place, name in enumerate(document.axes)})


def policies_of(document: PremiumDocument, cells: pa.Table) -> pa.Table:
    """Return the cells as an extract: each a policy that commences on the day of sale.

    Raises DocumentError for an age that no calendar date of birth answers.
    """
    n = cells.num_rows
    same: dict[str, Any] = {
        "product": document.design,
        "status": "in force",
        "commencement_date": document.sale_date,
        **document.policy,
    }
    columns: dict[str, Any] = {"policy_id": pa.array([f"cell {row + 1}" for row in range(n)])}
    columns |= {name: _given(name, value, cells) for name, value in same.items()}
    for axis in document.grid:
        if axis in AGES:
            columns[AGES[axis]] = _births(document, axis, cells)
        else:
            columns[axis] = cells.column(axis)
    if document.size is not None:
        at = {band.from_: band.at for band in document.size.band}
        columns[document.size.column] = pa.array([at[start] for start in cells.column(BAND).to_pylist()], pa.float64())
    return pa.table(columns)


def _births(document: PremiumDocument, axis: str, cells: pa.Table) -> pa.Array:
    born: dict[float, date] = {}
    for age in document.values(axis):
        if not isinstance(age, int | float) or not 0 <= age <= 130 or abs(12 * age - round(12 * age)) > 1e-6:
            raise DocumentError(f"grid: axis '{axis}': {age!r} is no age in years, whole or in whole months")
        born[age] = monthiversary(document.sale_date, -round(12 * age))
    return pa.array([born[age] for age in cells.column(axis).to_pylist()], pa.date32())


def _column(name: str, values: list[Any]) -> pa.Array:
    if all(isinstance(value, int | float) for value in values):
        return pa.array([float(value) for value in values], pa.float64())
    if all(isinstance(value, str) for value in values):
        return pa.array(values, pa.string())
    raise DocumentError(f"grid: axis '{name}' mixes numbers and text")


def _given(name: str, value: Any, cells: pa.Table) -> pa.Array:
    """A column that is no axis: one value for all cells, or worked out from an axis."""
    if isinstance(value, SameAs):
        return cells.column(value.as_)
    if isinstance(value, ToAge):
        years = [value.to_age - age for age in cells.column("age").to_pylist()]
        if min(years) < 0:
            raise DocumentError(f"policy: '{name}' runs to age {value.to_age:g}, but the grid has higher ages")
        return pa.array(years, pa.float64())
    whole = isinstance(value, int) and not isinstance(value, bool)
    return pa.array([float(value) if whole else value] * cells.num_rows)
