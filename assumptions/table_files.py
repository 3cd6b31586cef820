"""Columns of figures from CSV and Parquet files, each figure with the place that it stands at."""

from __future__ import annotations

import csv
import difflib
import io
import math
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from .rate_table import TableError

MAX_BYTES = 64 * 2**20
"""Largest table file that is read."""
MAX_ROWS = 100_000
"""Most rows of a table file."""

NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?", re.ASCII)
"""How a number may be written in a table, whatever the kind of file."""


@dataclass(frozen=True)
class Columns:
    """What a file holds: cells by column name (lower case), None if blank, and a place for each row.

    others: columns that are no numbers by their type, with the name of the type.
    """

    file: str
    cells: dict[str, list[Any]]
    places: list[str]
    others: dict[str, str] = field(default_factory=dict)

    def numbers(self, name: str, blanks: bool = False) -> list[float]:
        """Return a column as numbers, NaN for a blank cell where ``blanks`` are allowed.

        Raises TableError for a missing column, a cell that is no finite number, and a blank not allowed.
        """
        key = name.strip().lower()
        if key in self.others:
            raise TableError(f"{self.file}: column '{name}' holds {self.others[key]}, not numbers; convert it")
        if key not in self.cells:
            near = difflib.get_close_matches(key, self.cells, 1)
            hint = f"; did you mean '{near[0]}'?" if near else ""
            raise TableError(f"{self.file}: no column '{name}', only {', '.join(self.cells)}{hint}")
        return [self._number(key, row, cell, blanks) for row, cell in enumerate(self.cells[key])]

    def _number(self, name: str, row: int, cell: Any, blanks: bool) -> float:
        if cell is None and blanks:
            return math.nan
        text = "" if cell is None else str(cell)
        number = float(text) if NUMBER.fullmatch(text) else math.nan
        if not math.isfinite(number):
            said = f"'{text[:40]}' is no number" if text else "a blank cell"
            raise TableError(f"{self.file}, {self.places[row]}: column '{name}': {said}; write a figure")
        return number


def is_xml(path: Path | str) -> bool:
    """Say whether a file is XTbML, by its name."""
    return Path(path).suffix.lower() in (".xml", ".xtbml")


def file_bytes(path: Path | str) -> bytes:
    """Return what a table file holds. Raises TableError where it is unreadable or larger than MAX_BYTES."""
    try:
        with Path(path).open("rb") as file:
            content = file.read(MAX_BYTES + 1)
    except (OSError, ValueError) as fault:
        raise TableError(f"{path}: cannot be read: {getattr(fault, 'strerror', None) or fault}") from None
    if len(content) > MAX_BYTES:
        raise TableError(f"{path}: larger than {MAX_BYTES >> 20} MiB, the limit for a table file")
    return content


def read_columns(path: Path | str) -> Columns:
    """Read all columns of a CSV file (``.csv``) or a Parquet file (``.parquet``).

    Raises TableError for a file that is not there, of another kind, too large, or not in order.
    """
    ending = Path(path).suffix.lower()
    if ending not in (".csv", ".parquet"):
        raise TableError(f"{path}: tables end in .csv, .parquet, .xml or .xtbml, not '{ending}'")
    content = file_bytes(path)
    columns = _from_csv(str(path), content) if ending == ".csv" else _from_parquet(str(path), content)
    if not columns.places:
        raise TableError(f"{path}: no rows of figures")
    return columns


def _from_csv(file: str, content: bytes) -> Columns:
    # The csv module counts lines, blank ones and quoted breaks included, so a message can name the right one.
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        raise TableError(f"{file}: not UTF-8 text at byte {fault.start}; save it as CSV in UTF-8") from None
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows: list[list[str | None]] = []
    places: list[str] = []
    try:
        for raw in reader:
            row = [cell.strip() or None for cell in raw]
            if any(row):
                rows.append(row)
                places.append(f"line {reader.line_num}")
            if len(rows) > MAX_ROWS + 1:
                raise TableError(f"{file}: more than {MAX_ROWS} rows, the limit")
    except csv.Error as fault:
        raise TableError(f"{file}, line {reader.line_num}: {fault}; save the file as CSV again") from None
    if not rows:
        raise TableError(f"{file}: empty; it needs a line of column names and rows of figures")
    header = _header(file, rows[0])
    cells: dict[str, list[Any]] = {name: [] for name in header if name}
    for row, place in zip(rows[1:], places[1:], strict=True):
        if len(row) < len(header) or any(row[len(header) :]):
            raise TableError(f"{file}, {place}: {len(row)} cells under {len(header)} column names")
        for name, cell in zip(header, row, strict=False):
            if name:
                cells[name].append(cell)
    return Columns(file, cells, places[1:])


def _header(file: str, row: list[str | None]) -> list[str]:
    if len(row) == 1 and row[0] and (";" in row[0] or "\t" in row[0]):
        raise TableError(f"{file}: columns not parted by commas; save it with commas and decimal points")
    while row and not row[-1]:
        row = row[:-1]
    return _once(file, [(name or "").lower() for name in row])


def _once(file: str, names: list[str]) -> list[str]:
    for name in names:
        if name and names.count(name) > 1:
            raise TableError(f"{file}: column '{name}' is there twice; rename one")
    return names


def _from_parquet(file: str, content: bytes) -> Columns:
    import pyarrow as pa
    import pyarrow.parquet as pq

    try:
        source = pq.ParquetFile(pa.BufferReader(content))
        if source.metadata.num_rows > MAX_ROWS:
            raise TableError(f"{file}: more than {MAX_ROWS} rows, the limit")
        schema = source.schema_arrow
        _once(file, [name.strip().lower() for name in schema.names])
        # Numbers only: a text or a list, repeated, may fill the memory from a file of no size.
        numeric = [one.name for one in schema if _is_numeric(one.type)]
        table = source.read(columns=numeric)
    except (pa.ArrowException, OSError, UnicodeError) as fault:
        raise TableError(f"{file}: not a Parquet file that can be read: {fault}") from None
    rows = source.metadata.num_rows
    if numeric and table.num_rows != rows:
        raise TableError(f"{file}: {table.num_rows} rows where it says {rows}; write the file again")
    cells = {name.strip().lower(): table[name].to_pylist() for name in numeric}
    others = {one.name.strip().lower(): str(one.type) for one in schema if one.name not in numeric}
    return Columns(file, cells, [f"row {row}" for row in range(1, rows + 1)], others)


def _is_numeric(kind: Any) -> bool:
    import pyarrow.types as types

    return bool(types.is_integer(kind) or types.is_floating(kind) or types.is_decimal(kind))
