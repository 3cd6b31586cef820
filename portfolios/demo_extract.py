"""The extract of the invented demo office: blocks of policies as Arrow batches, parts of Parquet."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.parquet as pq

from .demo_faults import spoil_block
from .demo_policies import NUMBERS, TEXTS, Block, draw_block
from .demo_rates import Whole

Progress = Callable[[int, int], None]

BLOCK_ROWS = 131_072
PART_ROWS = 1_000_000
MOST_POLICIES = 100_000_000
_COUNTS = ("premium_frequency", "annuity_frequency")
_AMOUNTS = ("premium_pa", "single_premium", "sum_assured", "annuity_pa")
_FEW_VALUES = [*TEXTS, *(name for name in NUMBERS if name not in _AMOUNTS)]
_ORDER = (
    "policy_id",
    "product",
    "status",
    "birth_date",
    "commencement_date",
    "sex",
    *NUMBERS,
    "channel",
    "region",
    "policy_class",
)


def write_extract(folder: Path, policies: int, seed: int, progress: Progress | None) -> None:
    """Write the policies into part files of a folder, in order of identifier, one row group for each block.

    While one block is written the next is drawn; no more than two are in memory. ``progress`` is called with
    the policies written so far and all of them.
    """
    folder.mkdir()
    for part, first in enumerate(range(0, policies, PART_ROWS)):
        end = min(first + PART_ROWS, policies)
        # The thread is left before the writer, which must not be closed while it writes.
        with _writer(folder / f"part-{part:05d}.parquet") as writer, ThreadPoolExecutor(1) as thread:
            pending: Future[None] | None = None
            for start in range(first, end, BLOCK_ROWS):
                batch = block_batch(start, min(BLOCK_ROWS, end - start), policies, seed)
                _finish(pending, start, policies, progress)
                pending = thread.submit(writer.write_batch, batch, BLOCK_ROWS)
            _finish(pending, end, policies, progress)


def _finish(pending: Future[None] | None, written: int, policies: int, progress: Progress | None) -> None:
    if pending is not None:
        pending.result()
        if progress is not None:
            progress(written, policies)


def _writer(path: Path) -> pq.ParquetWriter:
    # Without Arrow's own schema beside Parquet's, texts are read back as plain texts.
    return pq.ParquetWriter(path, _schema(), compression="snappy", use_dictionary=_FEW_VALUES, store_schema=False)


def _schema() -> pa.Schema:
    return pa.schema([pa.field(name, _type(name)) for name in _ORDER])


def _type(name: str) -> pa.DataType:
    if name in TEXTS:
        return pa.dictionary(pa.int8(), pa.string())
    if name == "policy_id":
        return pa.string()
    if name.endswith("_date"):
        return pa.date32()
    return pa.int32() if name in _COUNTS else pa.float64()


def block_batch(start: int, rows: int, policies: int, seed: int) -> pa.RecordBatch:
    """Return one block of the office's extract, wrong policies included."""
    block = draw_block(start, rows, seed)
    spoil_block(block, start, policies, seed)
    return pa.record_batch([_array(block, name) for name in _ORDER], schema=_schema())


def _array(block: Block, name: str) -> pa.Array:
    if name == "policy_id":
        return identifiers(block.issued)
    if name in TEXTS:
        return pa.DictionaryArray.from_arrays(block.codes[name], pa.array(TEXTS[name]))
    if name.endswith("_date"):
        return pa.array(block.days[name])
    values = block.numbers[name]
    missing = np.isnan(values)
    if name in _COUNTS:
        values = np.where(missing, 0, values).astype(np.int32)
    return pa.array(values, mask=missing)


def identifiers(issued: Whole) -> pa.Array:
    """Return texts like QM-000000123-4: the number in nine digits and a check digit.

    The check digit is the last digit of the sum of the digits, each times its place from the right plus 1.
    """
    digits = np.empty((9, len(issued)), dtype=np.uint8)
    rest = issued.astype(np.uint32)
    check = np.zeros(len(issued), dtype=np.uint32)
    for place in range(9):
        rest, digit = np.divmod(rest, np.uint32(10))
        digits[8 - place] = digit
        check += np.uint32(place + 2) * digit
    text = np.empty((len(issued), 14), dtype=np.uint8)
    text[:, :3] = np.frombuffer(b"QM-", dtype=np.uint8)
    text[:, 3:12] = digits.T + np.uint8(ord("0"))
    text[:, 12] = ord("-")
    text[:, 13] = check % np.uint32(10) + np.uint32(ord("0"))
    offsets: npt.NDArray[np.int32] = np.arange(0, 14 * len(issued) + 1, 14, dtype=np.int32)
    return pa.StringArray.from_buffers(len(issued), pa.py_buffer(offsets), pa.py_buffer(text))
