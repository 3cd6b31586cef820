"""Parquet files of the run folder, written as they come in and hashed on the way."""

from __future__ import annotations

import contextlib
import queue
import threading
from collections.abc import Iterable
from pathlib import Path
from types import TracebackType
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from projection.results import MONEY_COLUMNS

from .disk import RunFolderError
from .sealed_files import SealedFile, WrittenFile

ROWS_A_FILE = 1_000_000
ROWS_A_GROUP = 1 << 18
_WAITING_CHUNKS = 8
_BUFFER = 8 << 20
_BARE_SCHEMA = pa.schema(
    [("policy_id", pa.string()), ("product", pa.string()), *((name, pa.float64()) for name in MONEY_COLUMNS)]
)


def write_table(folder: Path, name: str, table: pa.Table) -> WrittenFile:
    """Write a whole table as one Parquet file of the run folder."""
    file = SealedFile(folder / name)
    try:
        pq.write_table(table, file, **parquet_options(table.schema))
    finally:
        file.close()
    return file.sealed(name, table.num_rows)


def parquet_options(schema: pa.Schema) -> dict[str, Any]:
    """Return the options that every file is written with.

    Money hardly repeats itself, so a dictionary and a compressor only cost time on it; text of few values
    gets a dictionary, identifiers are compressed.
    """
    floats = [field.name for field in schema if pa.types.is_floating(field.type)]
    words = [field.name for field in schema if field.name not in (*floats, "policy_id")]
    return {
        "use_dictionary": words or False,
        "compression": {field.name: "NONE" if field.name in floats else "SNAPPY" for field in schema},
        # Whether a column happened to be dictionary-encoded in memory is nothing to a reader.
        "store_schema": False,
        "write_statistics": True,
    }


class PolicyWriter:
    """Takes the per-policy results chunk by chunk and writes ``policies/part-00000.parquet`` and so on.

    Called as a sink from the thread that values; writing, compressing and hashing happen in a thread of its
    own, behind a queue of a few chunks, so that memory stays flat. Files hold 1,000,000 rows and row groups
    262,144 whatever the chunks, so that the bytes do not depend on them. An error of the writing thread is
    raised by the next call.
    """

    def __init__(self, folder: Path, rows_a_file: int = ROWS_A_FILE, rows_a_group: int = ROWS_A_GROUP) -> None:
        self.files: list[WrittenFile] = []
        self.rows = 0
        self._folder = folder
        self._rows_a_file = rows_a_file
        self._rows_a_group = rows_a_group
        self._queue: queue.Queue[pa.Table | None] = queue.Queue(_WAITING_CHUNKS)
        self._error: BaseException | None = None
        self._stopped = False
        self._complete = False
        self._waiting: list[pa.Table] = []
        self._waiting_rows = 0
        self._file: SealedFile | None = None
        self._buffer: Any = None
        self._writer: pq.ParquetWriter | None = None
        self._rows_in_file = 0
        self._schema = _BARE_SCHEMA
        (folder / "policies").mkdir(exist_ok=True)
        self._thread = threading.Thread(target=self._work, name="policy writer", daemon=True)
        self._thread.start()

    def __call__(self, chunk: pa.Table) -> None:
        """Take a chunk. Raises what the writing thread met."""
        self._raise()
        self.rows += chunk.num_rows
        self._queue.put(chunk)

    def __enter__(self) -> PolicyWriter:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._stopped = kind is not None
        self._end()

    def no_more(self) -> None:
        """Say that every chunk has come, without waiting; what is left is written meanwhile."""
        if not self._complete:
            self._complete = True
            self._queue.put(None)

    def finish(self) -> list[WrittenFile]:
        """Wait until everything is written; return the files. Raises what the writing thread met."""
        self._end()
        self._raise()
        return self.files

    def _end(self) -> None:
        self.no_more()
        self._thread.join()

    def _raise(self) -> None:
        if self._error is not None:
            error, self._stopped = self._error, True
            raise error

    def _work(self) -> None:
        while (chunk := self._queue.get()) is not None:
            if self._error is None and not self._stopped:
                self._attempt(chunk)
        if self._error is None and not self._stopped:
            self._attempt(None)
        self._abandon()

    def _attempt(self, chunk: pa.Table | None) -> None:
        try:
            if chunk is None:
                self._drain(everything=True)
                self._close_file()
                if not self.files:
                    self.files.append(write_table(self._folder, _part(0), self._schema.empty_table()))
            else:
                self._schema = chunk.schema
                self._waiting.append(chunk)
                self._waiting_rows += chunk.num_rows
                self._drain(everything=False)
        except BaseException as error:  # handed to the valuing thread, whatever it is
            self._error = error

    def _drain(self, everything: bool) -> None:
        while self._waiting_rows:
            wanted = min(self._rows_a_group, self._rows_a_file - self._rows_in_file)
            if self._waiting_rows < wanted and not everything:
                return
            self._write(self._take(min(wanted, self._waiting_rows)))

    def _take(self, rows: int) -> pa.Table:
        waiting = pa.concat_tables(self._waiting)
        rest = waiting.slice(rows)
        self._waiting = [rest] if rest.num_rows else []
        self._waiting_rows = rest.num_rows
        # One piece per row group: where pages end must not depend on how the chunks came.
        return waiting.slice(0, rows).unify_dictionaries().combine_chunks()

    def _write(self, group: pa.Table) -> None:
        if self._writer is None:
            self._file = SealedFile(self._folder / _part(len(self.files)))
            # Arrow writes page by page; each time it would have to wait for Python.
            self._buffer = pa.output_stream(self._file, buffer_size=_BUFFER)
            self._writer = pq.ParquetWriter(self._buffer, group.schema, **parquet_options(group.schema))
        self._writer.write_table(group, row_group_size=self._rows_a_group)
        self._rows_in_file += group.num_rows
        if self._rows_in_file == self._rows_a_file:
            self._close_file()

    def _abandon(self) -> None:
        """Close a file that nobody will read."""
        for part in (self._writer, self._buffer):
            if part is not None:
                with contextlib.suppress(Exception):
                    part.close()
        if self._file is not None:
            self._file.abandon()

    def _close_file(self) -> None:
        if self._writer is None or self._file is None:
            return
        self._writer.close()
        self._buffer.close()
        self._file.close()
        self.files.append(self._file.sealed(_part(len(self.files)), self._rows_in_file))
        self._writer, self._buffer, self._file, self._rows_in_file = None, None, None, 0


def check_rows(folder: Path, files: Iterable[WrittenFile], policies: int) -> None:
    """Raise RunFolderError unless the tables can be opened and hold the rows that were written.

    policies: how many rows the policies' files must hold together.
    """
    written = 0
    for file in files:
        try:
            rows = pq.read_metadata(folder / file.path).num_rows
        except (pa.ArrowException, OSError) as error:
            raise RunFolderError(f"{file.path}: was written but cannot be read back: {error}") from error
        if rows != file.rows:
            raise RunFolderError(f"{file.path}: holds {rows:,} rows, {file.rows:,} were written")
        written += rows if file.path.startswith("policies/") else 0
    if written != policies:
        raise RunFolderError(f"policies: {written:,} rows were written for {policies:,} policies valued")


def _part(number: int) -> str:
    return f"policies/part-{number:05d}.parquet"
