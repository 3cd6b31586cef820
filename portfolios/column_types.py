"""What the types of an extract's columns may hold: text, numbers, days or flags."""

from __future__ import annotations

from typing import Literal

import pyarrow as pa
from pyarrow import types

from .columns import BY_NAME

ColumnKind = Literal["text", "number", "day", "flag"]

WORDS: dict[str, str] = {
    "text": "text (or whole numbers)",
    "number": "numbers (whole, floating or decimal)",
    "day": "dates (date32, date64 or timestamp)",
    "flag": "true or false",
}


def stored_kind(kind: pa.DataType) -> ColumnKind | None:
    """Return what a type holds, or None where it is nested, binary or otherwise of no use here.

    A column that is null throughout has the type null and counts as text.
    """
    if types.is_dictionary(kind):
        kind = kind.value_type
    if is_text(kind) or types.is_null(kind):
        return "text"
    if types.is_integer(kind) or types.is_floating(kind) or types.is_decimal(kind):
        return "number"
    if types.is_date(kind) or types.is_timestamp(kind):
        return "day"
    return "flag" if types.is_boolean(kind) else None


def is_text(kind: pa.DataType) -> bool:
    """Say whether a type holds text."""
    return bool(types.is_string(kind) or types.is_large_string(kind) or types.is_string_view(kind))


def wanted_kind(name: str) -> ColumnKind | None:
    """Return what the registry wants in a column, or None where it does not list it."""
    column = BY_NAME.get(name)
    if column is None:
        return None
    return "text" if column.kind == "text" else "day" if column.kind == "date" else "number"


def kind_of(name: str, stored: pa.DataType) -> ColumnKind:
    """Return what a column holds: what the registry says, else what its type says."""
    return wanted_kind(name) or stored_kind(stored) or "text"


def serves(stored: pa.DataType, wanted: ColumnKind) -> bool:
    """Say whether values of a stored type can be read as the wanted kind."""
    inner = stored.value_type if types.is_dictionary(stored) else stored
    if types.is_null(inner):
        return True
    if wanted == "text":
        return is_text(inner) or bool(types.is_integer(inner))
    return stored_kind(stored) == wanted


def same_storage(one: pa.DataType, other: pa.DataType) -> bool:
    """Say whether two files may store one column so: widths may differ, the kind may not."""
    one_kind, other_kind = stored_kind(one), stored_kind(other)
    return one_kind == other_kind or types.is_null(one) or types.is_null(other)
