"""The parts of an extract: Parquet files and tables in memory."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.parquet as pq

from .column_types import is_text
from .sources import ExtractError, InputFile, Place, first_line

Rows = npt.NDArray[np.int64]

# Bytes read ahead of each column: a row group is never held as a whole, however large it is.
_BUFFER = 1 << 18
_HASH_BLOCK = 1 << 20
_BLOCK_ROWS = 65_536


class Part(Protocol):
    """One file of the extract, or what stands for it."""

    file: InputFile
    schema: pa.Schema

    def batches(self, columns: list[str], rows: int) -> Iterator[pa.RecordBatch]:
        """Read columns in batches of at most ``rows`` rows."""

    def pieces(self, columns: list[str], rows: Rows) -> Iterator[tuple[int, pa.RecordBatch]]:
        """Read the pieces in which some rows lie, each with the number of its first row; rows are ascending."""

    def digest(self) -> str:
        """Return the SHA-256."""


class FilePart:
    """A Parquet file. Raises ExtractError where it cannot be read."""

    def __init__(self, place: Place) -> None:
        self._place = place
        try:
            with pq.ParquetFile(place.path, filesystem=place.filesystem) as file:
                self._footer = file.metadata
                self.schema: pa.Schema = file.schema_arrow
        except (pa.ArrowException, OSError) as error:
            raise self._unreadable(error) from error
        self.file = InputFile(place.shown, self._footer.num_rows, place.bytes)

    def batches(self, columns: list[str], rows: int) -> Iterator[pa.RecordBatch]:
        """Read columns in batches of at most ``rows`` rows; text comes with its dictionary."""
        count = 0
        try:
            with self._open(columns) as file:
                for batch in file.iter_batches(batch_size=rows, columns=columns, use_threads=True):
                    count += batch.num_rows
                    yield batch.select(columns)
        except (pa.ArrowException, OSError) as error:
            raise self._unreadable(error) from error
        if count != self.file.rows:
            raise ExtractError(
                f"{self.file.path}: {count:,} rows were read where the file promises {self.file.rows:,}; "
                "it is damaged or was changed during the run: write it again"
            )

    def pieces(self, columns: list[str], rows: Rows) -> Iterator[tuple[int, pa.RecordBatch]]:
        """Read the row groups in which some rows lie, in batches, each with the number of its first row."""
        sizes = [self._footer.row_group(group).num_rows for group in range(self._footer.num_row_groups)]
        ends = np.cumsum(sizes)
        try:
            with self._open(columns) as file:
                for group in np.unique(np.searchsorted(ends, rows, side="right")).tolist():
                    start = int(ends[group]) - sizes[group]
                    for batch in file.iter_batches(row_groups=[group], columns=columns, use_threads=True):
                        yield start, batch.select(columns)
                        start += batch.num_rows
        except (pa.ArrowException, OSError) as error:
            raise self._unreadable(error) from error

    def digest(self) -> str:
        """Return the SHA-256 of the file, read in blocks."""
        digest = hashlib.sha256()
        try:
            with self._place.filesystem.open_input_stream(self._place.path, compression=None) as stream:
                while block := stream.read(_HASH_BLOCK):
                    digest.update(block)
        except (pa.ArrowException, OSError) as error:
            raise self._unreadable(error) from error
        return digest.hexdigest()

    def _open(self, columns: list[str]) -> Any:
        # An identifier is different in every row, so a dictionary of them would only cost.
        text = [name for name in columns if name != "policy_id" and is_text(self.schema.field(name).type)]
        return pq.ParquetFile(
            self._place.path, filesystem=self._place.filesystem, metadata=self._footer, read_dictionary=text,
            buffer_size=_BUFFER, pre_buffer=False,
        )  # fmt: skip

    def _unreadable(self, error: BaseException) -> ExtractError:
        return ExtractError(
            f"{self._place.shown}: cannot be read as Parquet: {first_line(error)}; it may be cut short, "
            "damaged or of another format: write it again"
        )


class TablePart:
    """A table in memory."""

    def __init__(self, table: pa.Table) -> None:
        self._table = table.replace_schema_metadata(None)
        self.schema: pa.Schema = self._table.schema
        self.file = InputFile("in memory", table.num_rows, table.nbytes)

    def batches(self, columns: list[str], rows: int) -> Iterator[pa.RecordBatch]:
        """Cut columns into batches of at most ``rows`` rows."""
        yield from self._table.select(columns).to_batches(max_chunksize=rows)

    def pieces(self, columns: list[str], rows: Rows) -> Iterator[tuple[int, pa.RecordBatch]]:
        """Cut out the blocks in which some rows lie, in batches, each with the number of its first row."""
        for block in np.unique(rows // _BLOCK_ROWS).tolist():
            start = block * _BLOCK_ROWS
            for batch in self._table.select(columns).slice(start, _BLOCK_ROWS).to_batches():
                yield start, batch
                start += batch.num_rows

    def digest(self) -> str:
        """Return the SHA-256 of the Arrow IPC stream in batches of 65,536 rows, without metadata."""
        sink = _HashingSink()
        with pa.ipc.new_stream(pa.PythonFile(sink, mode="w"), self.schema) as stream:
            for start in range(0, self._table.num_rows, _BLOCK_ROWS):
                rows = self._table.slice(start, _BLOCK_ROWS)
                stream.write_table(rows.unify_dictionaries().combine_chunks())
        return sink.digest.hexdigest()


class _HashingSink:
    """Takes what is written to it and keeps only the digest."""

    closed = False

    def __init__(self) -> None:
        self.digest = hashlib.sha256()
        self._size = 0

    def write(self, block: Any) -> int:
        self.digest.update(block)
        self._size += len(block)
        return len(block)

    def tell(self) -> int:
        return self._size

    def flush(self) -> None:
        """Nothing waits."""

    def close(self) -> None:
        """Nothing is open."""
