"""Scales of improvement from XTbML files: by age alone, or by age and calendar year."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .rate_table import Rows, TableError
from .select_rows import consecutive_ages
from .xtbml import Axis, XtbmlTable
from .xtbml_axes import AGES, by_axes, meaning, named_table

CONTENT = "projection scale"
"""What a file of such scales says that it holds."""


def scale_values(
    file: str, tables: Sequence[XtbmlTable], wanted: int | str | None = None
) -> tuple[int, tuple[int, ...], Rows]:
    """Return first age, calendar years (none where the scale is by age alone) and figures, shape (ages, years or 1).

    wanted: number of the table in the file, from 1, or its title; needed where there are several. Raises TableError
    for a table that is not there, holds something else, or leaves ages, years or figures out.
    """
    if wanted is None and len(tables) > 1:
        raise TableError(f"{file}: {len(tables)} tables; name one: table = {{ file = ..., table = 1 }}")
    table = tables[0] if wanted is None else named_table(file, tables, wanted)
    if table.kind and CONTENT not in table.kind.lower():
        raise TableError(f"{file}: a table of '{table.kind}' holds no scale of improvement; name another file")
    kinds = [meaning(axis) for axis in table.axes]
    axes, values = list(table.axes), table.values
    if len(kinds) == 2 and kinds[1] in AGES:
        kinds, axes, values = kinds[::-1], axes[::-1], values.T
    if kinds[0] not in AGES or kinds[1:] not in ([], ["calendar year"]):
        raise TableError(f"{file}: table {table.number} is by {by_axes(table)}, not by age, or age and calendar year")
    first = consecutive_ages(axes[0].ticks, [f"{file}: table {table.number}"] * len(axes[0].ticks))
    years = _years(f"{file}: table {table.number}", axes[1]) if len(axes) == 2 else ()
    values = values.reshape(len(axes[0].ticks), max(1, len(years)))
    for row, column in np.argwhere(np.isnan(values))[:1].tolist():
        when = f", year {years[column]}" if years else ""
        raise TableError(f"{file}: table {table.number}: no figure for age {first + row}{when}; fill it in")
    return first, years, values


def _years(place: str, axis: Axis) -> tuple[int, ...]:
    first, last = axis.ticks[0], axis.ticks[-1]
    if axis.ticks != tuple(range(first, last + 1)):
        raise TableError(f"{place}: the calendar years leave some out; give every year from {first} to {last}")
    return axis.ticks
