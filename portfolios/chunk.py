"""A piece of the extract: columns as arrays, each converted when it is first asked for."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
from pyarrow import types

from .column_types import ColumnKind, kind_of
from .identifiers import identifier_hashes

MISSING_DAY = int(np.iinfo(np.int32).min)
"""Stands for a missing date; it is earlier than every date."""

FIRST_DAY = MISSING_DAY + 1
LAST_DAY = int(np.iinfo(np.int32).max)

_PER_DAY = {"s": 86_400, "ms": 86_400_000, "us": 86_400_000_000, "ns": 86_400_000_000_000}

_WIDTHS = {
    **{f"{sign}int{bits}": np.dtype(f"{sign}int{bits}") for sign in ("", "u") for bits in (8, 16, 32, 64)},
    "float": np.dtype(np.float32),
    "double": np.dtype(np.float64),
}

# What to add to eight numbers for a byte of Arrow's validity bits: minus zero changes nothing, NaN erases.
_PENALTIES = np.where(np.arange(256)[:, None] >> np.arange(8) & 1, -0.0, np.nan)

Text = tuple[npt.NDArray[np.int32], list[str]]


class Chunk:
    """Some rows of the extract, in its order.

    start: row number of the first row, from 0. The converted columns are kept and shared between callers;
    they are writable so that compiled loops see one array type, but nobody should write to them. One thread
    at a time may use a chunk.
    """

    def __init__(self, batch: pa.RecordBatch, start: int = 0) -> None:
        self.batch = batch
        self.start = start
        self.n: int = batch.num_rows
        self._numbers: dict[str, npt.NDArray[np.float64]] = {}
        self._days: dict[str, npt.NDArray[np.int32]] = {}
        self._texts: dict[str, Text] = {}
        self._ids: pa.Array | None = None
        self._hashes: npt.NDArray[np.uint64] | None = None

    def __len__(self) -> int:
        return self.n

    @property
    def column_names(self) -> list[str]:
        """The columns that were read."""
        return list(self.batch.schema.names)

    def raw(self, name: str) -> pa.Array:
        """Return a column as it was read. Raises KeyError."""
        return self.batch.column(name)

    def column_kind(self, name: str) -> ColumnKind:
        """Return what a column holds: what the registry says, else what its type says."""
        return kind_of(name, self.batch.schema.field(name).type)

    def is_whole(self, name: str) -> bool:
        """Say whether the type of a column admits only whole numbers."""
        return bool(types.is_integer(self.batch.schema.field(name).type))

    @property
    def ids(self) -> pa.Array:
        """The policy identifiers as an Arrow array of strings."""
        if self._ids is None:
            self._ids = as_strings(self.raw("policy_id"))
        return self._ids

    @property
    def hashes(self) -> npt.NDArray[np.uint64]:
        """Hash of each identifier, shape (n,); see ``identifiers.identifier_hashes``."""
        if self._hashes is None:
            self._hashes = identifier_hashes(self.ids)
        return self._hashes

    def text(self, name: str) -> Text:
        """Return a column as (codes, values): row i holds values[codes[i]]; the code is -1 where missing.

        The values are distinct; their order differs from chunk to chunk. Numbers, dates (ISO) and flags
        ('true', 'false') are turned into text.
        """
        if name not in self._texts:
            self._texts[name] = _encode(self.raw(name))
        return self._texts[name]

    def number(self, name: str) -> npt.NDArray[np.float64]:
        """Return a column as doubles, shape (n,), contiguous; NaN where missing. Flags become 0 and 1."""
        if name not in self._numbers:
            self._numbers[name] = _numbers(self.raw(name))
        return self._numbers[name]

    def day(self, name: str) -> npt.NDArray[np.int32]:
        """Return a column as days since 1970-01-01, shape (n,); MISSING_DAY where missing.

        The time of day is cut off; a timestamp with a time zone counts as the date in that zone.
        """
        if name not in self._days:
            self._days[name] = _days(self.raw(name))
        return self._days[name]

    def value(self, name: str, i: int) -> Any:
        """Return one cell as str, float, int, date, bool, or None where it is missing or NaN."""
        return _cell(self.raw(name), self.column_kind(name), i)

    def policy(self, i: int) -> dict[str, Any]:
        """Return one row: column to Python value."""
        return {name: self.value(name, i) for name in self.column_names}


def as_strings(array: pa.Array) -> pa.Array:
    """Return any array of scalars as an Arrow array of strings."""
    if types.is_dictionary(array.type):
        array = array.dictionary_decode()
    return array if types.is_string(array.type) else array.cast(pa.string())


def readable(strings: pa.Array) -> list[str | None]:
    """Return strings as a Python list; bytes that are not UTF-8 are replaced by a mark."""
    try:
        return list(strings.to_pylist())
    except UnicodeDecodeError:
        cells = strings.cast(pa.binary()).to_pylist()
        return [None if cell is None else cell.decode("utf-8", errors="replace") for cell in cells]


def _encode(array: pa.Array) -> Text:
    if not types.is_dictionary(array.type):
        array = as_strings(array).dictionary_encode()
    # Files may hold unsigned or narrow codes; a missing row may be a null code or a code of a null value.
    indices = array.indices
    if indices.null_count:
        indices = indices.cast(pa.int32()).fill_null(-1)
    codes = np.array(indices.to_numpy(zero_copy_only=False), dtype=np.int32)
    values = readable(as_strings(array.dictionary))
    if None in values or len(set(values)) < len(values):
        distinct = list(dict.fromkeys(value for value in values if value is not None))
        place = {value: code for code, value in enumerate(distinct)}
        moved = np.array([-1 if value is None else place[value] for value in values] + [-1], dtype=np.int32)
        return moved[codes], distinct
    return codes, [value for value in values if value is not None]


def _numbers(array: pa.Array) -> npt.NDArray[np.float64]:
    if types.is_dictionary(array.type):
        array = array.dictionary_decode()
    width = _WIDTHS.get(str(array.type))
    if width is None:
        array, width = array.cast(pa.float64()), np.dtype(np.float64)
    values, validity = array.buffers()[1], array.buffers()[0]
    if values is None or len(array) == 0:
        return np.full(len(array), np.nan)
    # Straight from the buffers: Arrow's own way takes five times as long where something is missing.
    start, end = array.offset, array.offset + len(array)
    numbers = np.frombuffer(values, dtype=width, count=end)[start:].astype(np.float64)
    if array.null_count and validity is not None:
        bits = np.frombuffer(validity, dtype=np.uint8, count=(end + 7) // 8)[start // 8 :]
        numbers += _PENALTIES.take(bits, axis=0).reshape(-1)[start % 8 :][: len(array)]
    return numbers


def _days(array: pa.Array) -> npt.NDArray[np.int32]:
    if types.is_dictionary(array.type):
        array = array.dictionary_decode()
    kind = array.type
    if types.is_date32(kind):
        ticks = array.view(pa.int32())
        return np.array(ticks.fill_null(MISSING_DAY) if ticks.null_count else ticks, dtype=np.int32)
    if types.is_null(kind):
        return np.full(len(array), MISSING_DAY, dtype=np.int32)
    if types.is_timestamp(kind) and kind.tz is not None:
        array = pc.local_timestamp(array)
    unit = "ms" if types.is_date64(kind) else kind.unit
    ticks = array.view(pa.int64())
    whole = ticks.fill_null(0).to_numpy() // _PER_DAY[unit]
    days: npt.NDArray[np.int32] = np.clip(whole, FIRST_DAY, LAST_DAY).astype(np.int32)
    if ticks.null_count:
        days[ticks.is_null().to_numpy(zero_copy_only=False)] = MISSING_DAY
    return days


def _cell(array: pa.Array, kind: ColumnKind, i: int) -> Any:
    one = array.slice(i, 1)
    if kind == "day":
        days = int(_days(one)[0])
        return date.fromordinal(719_163 + days) if -719_162 <= days <= 2_932_896 else None
    if kind == "text":
        return readable(as_strings(one))[0]
    value = one[0].as_py()
    if kind == "number" and value is not None and not isinstance(value, int):
        value = float(value)
    return None if isinstance(value, float) and value != value else value
