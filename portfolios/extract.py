"""The extract: the policies of a run, read in pieces with flat memory."""

from __future__ import annotations

import difflib
import os
from collections.abc import Generator, Iterable, Iterator
from typing import Any

import pyarrow as pa
import pyarrow.compute as pc

from .chunk import Chunk
from .column_types import WORDS, ColumnKind, same_storage, serves, stored_kind, wanted_kind
from .extract_parts import FilePart, Part, Rows, TablePart
from .sources import ExtractError, InputFile, find_files

__all__ = ["CHUNK_ROWS", "Extract", "ExtractError", "InputFile", "open_extract"]

CHUNK_ROWS = 65_536
"""Rows in a chunk: enough to spread the cost of a call, few enough to stay in the processor's cache."""


def open_extract(source: Any, folder: str | os.PathLike[str] = ".") -> Extract:
    """Open an extract. Reads the footers of its files, no policy.

    source: a Parquet file, a folder of them, a pattern or a URI (relative ones lie in ``folder``), or an
    Arrow table or record batch, or a DataFrame. Files are taken in order of name. Raises ExtractError where
    nothing is found or a file is no readable Parquet.
    """
    if isinstance(source, str | os.PathLike):
        return Extract([FilePart(place) for place in find_files(source, folder)])
    return Extract([TablePart(_as_table(source))])


def _as_table(source: Any) -> pa.Table:
    if isinstance(source, pa.Table):
        return source
    if isinstance(source, pa.RecordBatch):
        return pa.Table.from_batches([source])
    # A DataFrame is known by its class, so that pandas is not imported for those who do not use it.
    if type(source).__module__.split(".")[0] == "pandas" and hasattr(source, "columns"):
        try:
            return pa.Table.from_pandas(source, preserve_index=False)
        except (pa.ArrowException, TypeError, ValueError) as error:
            text = "; ".join(str(part) for part in error.args)
            raise ExtractError(f"the DataFrame has a column of mixed or unknown types: {text}") from error
    raise ExtractError(f"an extract is a path, an Arrow table or a DataFrame, not '{type(source).__name__}'")


class Extract:
    """The policies of a run; made by ``open_extract``."""

    def __init__(self, parts: list[Part]) -> None:
        self._parts = parts
        self.files: tuple[InputFile, ...] = tuple(part.file for part in parts)
        self.rows: int = sum(file.rows for file in self.files)

    @property
    def column_names(self) -> tuple[str, ...]:
        """Columns of the first file, in its order."""
        return tuple(self._parts[0].schema.names)

    def column_kind(self, name: str) -> ColumnKind | None:
        """Return what a column holds, None where it is nested or binary. Raises ExtractError if missing."""
        return wanted_kind(name) or stored_kind(self._type(name))

    def need(self, columns: Iterable[str], numbers: Iterable[str] = ()) -> None:
        """Check that columns are there, once in each file, and can be read as what they are used for.

        columns: what the registry says of them holds, others may be anything but nested or binary; numbers:
        columns that must hold numbers whether the registry lists them or not. Raises ExtractError with every
        fault, one a line.
        """
        wanted: dict[str, ColumnKind | None] = {name: wanted_kind(name) for name in columns}
        wanted.update(dict.fromkeys(numbers, "number"))
        faults = [fault for name, kind in wanted.items() for fault in self._faults(name, kind)]
        if faults:
            raise ExtractError("\n".join(faults))

    def chunks(self, columns: Iterable[str], rows: int = CHUNK_ROWS) -> Generator[Chunk, None, None]:
        """Read columns in chunks of at most ``rows`` rows, in order.

        A chunk ends where the next piece of a file would not fit any more; no result may depend on that.
        Raises ExtractError at once for a missing column and later for a file that turns out to be damaged.
        """
        if rows < 1:
            raise ValueError(f"a chunk of {rows} rows makes no sense; it should be 1 or more")
        names = list(dict.fromkeys(columns))
        faults = [fault for name in names for fault in self._faults(name, None)]
        if faults:
            raise ExtractError("\n".join(faults))
        return self._chunks(names, rows)

    def near(self, columns: Iterable[str], rows: Rows) -> Iterator[Chunk]:
        """Read only the pieces of the extract in which some rows lie.

        rows: row numbers from 0, ascending. Raises ExtractError like ``chunks``.
        """
        names, before = list(columns), 0
        for part in self._parts:
            inside = rows[(rows >= before) & (rows < before + part.file.rows)] - before
            if len(inside):
                yield from (Chunk(batch, before + start) for start, batch in part.pieces(names, inside))
            before += part.file.rows

    def find(self, policy_id: str) -> list[Chunk]:
        """Return each row with this identifier as a chunk of its own; more than one if it is not unique.

        The chunks hold every column that can be read.
        """
        found: set[int] = set()
        for chunk in self.chunks(["policy_id"]):
            there = pc.indices_nonzero(pc.equal(chunk.ids, policy_id)).to_pylist()
            found.update(chunk.start + row for row in there)
        if not found:
            return []
        usable = [name for name in self.column_names if not any(self._faults(name, None))]
        policies: list[Chunk] = []
        for chunk in self.chunks(usable):
            inside = sorted(row - chunk.start for row in found if 0 <= row - chunk.start < chunk.n)
            policies += [Chunk(chunk.batch.slice(row, 1), chunk.start + row) for row in inside]
            if len(policies) == len(found):
                break
        return policies

    def digests(self) -> dict[str, str]:
        """Return path to SHA-256 of each file, read in blocks (the lock is released: call it in a thread).

        An extract from memory has the path ``in memory`` and the digest of its Arrow IPC stream in batches of
        65,536 rows without metadata.
        """
        return {part.file.path: part.digest() for part in self._parts}

    def _chunks(self, names: list[str], rows: int) -> Generator[Chunk, None, None]:
        start = 0
        for batch in _gathered(self._batches(names, rows), rows):
            yield Chunk(batch, start)
            start += batch.num_rows

    def _batches(self, names: list[str], rows: int) -> Iterator[pa.RecordBatch]:
        for part in self._parts:
            if part.file.rows:
                yield from part.batches(names, rows)

    def _type(self, name: str) -> pa.DataType:
        if name not in self._parts[0].schema.names:
            raise ExtractError(self._missing(name, self._parts[0]))
        return self._parts[0].schema.field(name).type

    def _faults(self, name: str, wanted: ColumnKind | None) -> Iterator[str]:
        first: Part | None = None
        for part in self._parts:
            times = part.schema.names.count(name)
            if times != 1:
                yield (
                    self._missing(name, part)
                    if times == 0
                    else (f"{part.file.path}: column '{name}' occurs {times} times; keep one of them")
                )
                return
            kind = part.schema.field(name).type
            fault = _type_fault(name, kind, wanted)
            if fault:
                yield f"{part.file.path}: {fault}"
                return
            if first is not None and not same_storage(first.schema.field(name).type, kind):
                yield (
                    f"{part.file.path}: column '{name}' is of type {kind}, but "
                    f"{first.schema.field(name).type} in {first.file.path}; write all files with one type"
                )
                return
            if first is None and not pa.types.is_null(kind):
                first = part

    def _missing(self, name: str, part: Part) -> str:
        near = difflib.get_close_matches(name, part.schema.names, n=1)
        remedy = f"did you mean '{near[0]}'?" if near else f"it has {_listed(part.schema.names)}"
        return f"{part.file.path}: there is no column '{name}'; {remedy}"


def _type_fault(name: str, kind: pa.DataType, wanted: ColumnKind | None) -> str:
    if wanted is not None and not serves(kind, wanted):
        return f"column '{name}' is of type {kind}; it should hold {WORDS[wanted]}"
    if stored_kind(kind) is None:
        return f"column '{name}' is of type {kind}; it should hold text, numbers, dates, or true and false"
    return ""


def _listed(names: list[str]) -> str:
    shown = ", ".join(names[:20])
    return shown + (f" and {len(names) - 20} more" if len(names) > 20 else "") if names else "no columns"


def _gathered(batches: Iterator[pa.RecordBatch], rows: int) -> Iterator[pa.RecordBatch]:
    """Join small batches, so that many small files or row groups do not make many small chunks."""
    waiting: list[pa.RecordBatch] = []
    count = 0
    for batch in batches:
        if waiting and (count + batch.num_rows > rows or batch.schema != waiting[0].schema):
            yield from _joined(waiting)
            waiting, count = [], 0
        waiting.append(batch)
        count += batch.num_rows
    yield from _joined(waiting)


def _joined(waiting: list[pa.RecordBatch]) -> list[pa.RecordBatch]:
    if len(waiting) <= 1:
        return waiting
    table = pa.Table.from_batches(waiting).unify_dictionaries().combine_chunks()
    return [batch for batch in table.to_batches() if batch.num_rows]
