"""From the tables of an XTbML file to one rate table: what the axes mean and which tables belong together."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Literal

import numpy as np

from .rate_table import RateTable, Rows, TableError
from .select_rows import SelectBy, by_entry_age, check_rate, consecutive_ages, keying, without_blank_ends
from .xtbml import Axis, XtbmlTable

Meaning = Literal["age", "entry age", "attained age", "duration", "calendar year", "part of a year", "unknown"]

# The archive's own files write "Duration", "Duation" and "Year" for the same thing, so words are looked for.
_MEANINGS: tuple[tuple[str, Meaning], ...] = (
    (r"attained", "attained age"),
    (r"(issue|entry|select) *age|age at (issue|entry|selection)", "entry age"),
    (r"\bage\b", "age"),
    (r"\bdurat|\bduat|policy *year", "duration"),
    (r"\b(month|week|day|quarter)s?\b", "part of a year"),
    (r"\byears?\b", "duration"),
)
AGES = ("age", "entry age", "attained age")

# Contents whose figures are something else than yearly rates, though some lie between 0 and 1.
_NO_RATES = {
    "projection scale": "factors of improvement",
    "selection factor": "factors on the rates of another table",
    "claim cost": "amounts of claim",
}

# International notation in a table's own words: q_[x-t]+t is keyed by attained age x, q_[x]+t by entry age x.
_NOTATION: tuple[tuple[str, SelectBy], ...] = (
    (r"q *\[ *x *- *t *\] *\+ *t", "attained age"),
    (r"q *\[ *x *\] *\+ *t", "entry age"),
)


def meaning(axis: Axis) -> Meaning:
    """Return what an axis counts, from its identifier and name."""
    words = axis.name.lower()
    found: Meaning = next((what for pattern, what in _MEANINGS if re.search(pattern, words)), "unknown")
    if found == "duration" and axis.ticks and axis.ticks[0] >= 1000:
        return "calendar year"
    return found


def yearly_by_duration(file: str, table: XtbmlTable) -> list[float]:
    """Return the rates of a table by policy year, from the first. Raises TableError for any other table."""
    if [meaning(axis) for axis in table.axes] != ["duration"]:
        raise TableError(f"{file}: table {table.number} is by {by_axes(table)}, not by policy year")
    ticks = table.axes[0].ticks
    if ticks != tuple(range(1, len(ticks) + 1)):
        raise TableError(f"{file}: policy years go {_some(ticks)}; they must be 1, 2, 3 ...")
    for year, rate in zip(ticks, table.values, strict=True):
        if np.isnan(rate):
            raise TableError(f"{file}: no rate for policy year {year}; a lapse table needs every year")
        check_rate(float(rate), f"{file}, policy year {year}")
    return [float(rate) for rate in table.values]


def rate_table(
    file: str, tables: Sequence[XtbmlTable], wanted: int | str | None, select_by: SelectBy | None
) -> RateTable:
    """Return the rates of the wanted table, or of a select and an ultimate table together if none is named.

    wanted: number of the table in the file, from 1, or its title. Raises TableError for a table that is not
    there or not of yearly rates by age, and for several tables that do not belong together.
    """
    select, ultimate = _pair(file, tables, wanted)
    one = select or ultimate
    assert one is not None
    for words, what in _NO_RATES.items():
        if words in one.kind.lower():
            raise TableError(f"{file}: a table of '{one.kind}' holds {what}, not yearly rates")
    rows, first_entry = _select_rows(file, select, select_by) if select else (np.empty((0, 0)), 0)
    rates, first = _ultimate_rates(file, ultimate) if ultimate else (np.empty(0), 0)
    alone = wanted is not None and len(tables) > 1
    title = one.title if alone else one.name
    return RateTable(
        title or one.name or one.title or f"table {one.number}",
        rates,
        first,
        rows,
        first_entry,
        kind=one.kind,
        reference=one.reference,
        file=file,
    )


def _pair(
    file: str, tables: Sequence[XtbmlTable], wanted: int | str | None
) -> tuple[XtbmlTable | None, XtbmlTable | None]:
    """Return the select and the ultimate table that are meant, either of which may be absent."""
    if wanted is not None or len(tables) == 1:
        table = tables[0] if wanted is None else named_table(file, tables, wanted)
        return (table, None) if _role(table) == "select" else (None, table)
    if len(tables) == 2:
        for select, ultimate in (tables, tables[::-1]):
            plain = len(ultimate.axes) == 1 and meaning(ultimate.axes[0]) in AGES
            sure = len(select.axes) == 2 or _role(ultimate) == "ultimate"
            if _role(select) == "select" and plain and _role(ultimate) != "select" and sure:
                return select, ultimate
    raise TableError(f"{file}: several tables; name one with 'table', by number or title: {_list(tables)}")


def _role(table: XtbmlTable) -> str:
    """Return "select", "ultimate", or nothing where neither the axes nor the words say it."""
    if len(table.axes) == 2:
        return "select"
    durations = [axis.ticks[0] for axis in table.beside if meaning(axis) == "duration" and axis.ticks]
    if durations:
        return "select" if durations[0] == 1 else "ultimate"
    said = {word for word in ("select", "ultimate") if word in table.title.lower()}
    return said.pop() if len(said) == 1 else ""


def named_table(file: str, tables: Sequence[XtbmlTable], wanted: int | str) -> XtbmlTable:
    """Return the table with a number in the file, from 1, or a title. Raises TableError unless there is one."""
    words = " ".join(str(wanted).split()).lower()
    fit = [table for table in tables if words in (str(table.number), table.title.lower())]
    if not fit and len(tables) == 1 and words == tables[0].name.lower():
        fit = list(tables)
    if len(fit) != 1:
        said = "several tables" if fit else "no table"
        raise TableError(f"{file}: {said} with number or title '{wanted}'; there are: {_list(tables)}")
    return fit[0]


def _select_rows(file: str, table: XtbmlTable, asked: SelectBy | None) -> tuple[Rows, int]:
    kinds = [meaning(axis) for axis in table.axes]
    values, axes = table.values, list(table.axes)
    if len(kinds) == 2 and kinds[0] not in AGES:
        values, axes, kinds = values.T, axes[::-1], kinds[::-1]
    if kinds[0] not in AGES or kinds[1:] not in ([], ["duration"]):
        raise TableError(f"{file}: table {table.number} is by {by_axes(table)}, not by age and policy year")
    durations = axes[1].ticks if len(axes) == 2 else (1,)
    if durations != tuple(range(durations[0], durations[0] + len(durations))) or durations[0] not in (0, 1):
        raise TableError(f"{file}: table {table.number}: durations go {_some(durations)}, not 1, 2, 3 ...")
    rows = values.reshape(len(axes[0].ticks), len(durations))
    first = _ages(file, table, axes[0])
    for row, column in np.argwhere((rows < 0) | (rows > 1))[:1]:
        place = f"{file}: table {table.number}, age {first + row}, duration {durations[column]}"
        check_rate(float(rows[row, column]), place)
    # In a single year of selection, entry age and attained age are the same.
    place = f"{file}: table {table.number}"
    by = keying(place, _said(table, kinds[0]), asked) if len(durations) > 1 else "entry age"
    return by_entry_age(rows, first, by)


def _said(table: XtbmlTable, kind: Meaning) -> SelectBy | None:
    if kind == "entry age" or kind == "attained age":
        return kind
    words = table.title.lower()
    return next((by for pattern, by in _NOTATION if re.search(pattern, words)), None)


def _ultimate_rates(file: str, table: XtbmlTable) -> tuple[Rows, int]:
    if meaning(table.axes[0]) not in AGES:
        raise TableError(f"{file}: table {table.number} is by {by_axes(table)}, not by age")
    first = _ages(file, table, table.axes[0])
    for row in np.flatnonzero((table.values < 0) | (table.values > 1))[:1]:
        check_rate(float(table.values[row]), f"{file}: table {table.number}, age {first + row}")
    return without_blank_ends(table.values, first)


def _ages(file: str, table: XtbmlTable, axis: Axis) -> int:
    return consecutive_ages(axis.ticks, [f"{file}: table {table.number}"] * len(axis.ticks))


def by_axes(table: XtbmlTable) -> str:
    """Say what the axes of a table count."""
    kinds = [(meaning(axis), axis.name) for axis in table.axes]
    return " and ".join(f"'{name}'" if kind == "unknown" else kind for kind, name in kinds)


def _some(ticks: Sequence[int]) -> str:
    return ", ".join(map(str, ticks[:4])) + (" ..." if len(ticks) > 4 else "")


def _list(tables: Sequence[XtbmlTable]) -> str:
    # What tells the tables of a file apart mostly stands at the end of a long title.
    shown = [f"{one.number} '{'... ' * (len(one.title) > 80)}{one.title[-80:]}'" for one in tables[:12]]
    return ", ".join(shown) + (f" and {len(tables) - 12} more" if len(tables) > 12 else "")
