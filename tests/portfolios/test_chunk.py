"""Columns of a chunk as arrays."""

from __future__ import annotations

from datetime import date

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from portfolios.chunk import MISSING_DAY, Chunk

NUMBERS = {
    "int8": st.integers(-128, 127), "uint16": st.integers(0, 65_535), "int64": st.integers(-(2**53), 2**53),
    "float32": st.floats(width=32, allow_nan=False), "float64": st.floats(allow_nan=False),
}  # fmt: skip


def chunk_of(array: pa.Array, start: int = 0) -> Chunk:
    return Chunk(pa.RecordBatch.from_arrays([array], ["x"]).slice(start))


@given(st.data(), st.sampled_from(sorted(NUMBERS)), st.integers(0, 20))
def test_numbers_from_any_place_in_a_buffer(data: st.DataObject, kind: str, start: int) -> None:
    cells = data.draw(st.lists(st.none() | NUMBERS[kind], min_size=start, max_size=60))
    array = pa.array(cells, getattr(pa, kind)())
    numbers = chunk_of(array, start).number("x")
    expected = [np.nan if cell is None else float(cell) for cell in array.to_pylist()[start:]]
    np.testing.assert_array_equal(numbers, np.array(expected, dtype=np.float64))
    assert numbers.dtype == np.float64
    assert numbers.flags.writeable
    assert numbers.flags.c_contiguous


@given(st.lists(st.none() | st.dates()), st.sampled_from([pa.date32(), pa.date64(), pa.timestamp("us")]))
def test_days(cells: list[date | None], kind: pa.DataType) -> None:
    days = chunk_of(pa.array(cells, pa.date32()).cast(kind)).day("x")
    expected = [MISSING_DAY if cell is None else (cell - date(1970, 1, 1)).days for cell in cells]
    assert days.tolist() == expected
    assert days.dtype == np.int32
    assert days.flags.writeable


def test_a_time_zone_counts_as_the_date_there() -> None:
    late = pa.array([1_577_833_200], pa.timestamp("s", "UTC"))  # 2019-12-31 23:00 in Greenwich
    east = late.cast(pa.timestamp("s", "Asia/Tokyo"))
    assert chunk_of(late).value("x", 0) == date(2019, 12, 31)
    assert chunk_of(east).value("x", 0) == date(2020, 1, 1)


@given(st.lists(st.none() | st.sampled_from(["", "F", "M", "=1+1", "ä"])), st.booleans())
def test_text(cells: list[str | None], dictionary: bool) -> None:
    array = pa.array(cells, pa.string())
    codes, values = chunk_of(array.dictionary_encode() if dictionary else array).text("x")
    assert [None if code < 0 else values[code] for code in codes] == cells
    assert len(set(values)) == len(values)
    assert codes.dtype == np.int32
    assert codes.flags.writeable


def test_dictionaries_with_repeats_and_nulls_are_put_right() -> None:
    array = pa.DictionaryArray.from_arrays(pa.array([0, 1, 2, 3, None], pa.uint8()), pa.array(["a", "b", "a", None]))
    codes, values = chunk_of(array).text("x")
    assert values == ["a", "b"]
    assert codes.tolist() == [0, 1, 0, -1, -1]


def test_anything_serves_as_text() -> None:
    for array, expected in (
        (pa.array([1, None]), ["1", None]),
        (pa.array([True, None]), ["true", None]),
        (pa.array([date(2020, 2, 29), None]), ["2020-02-29", None]),
        (pa.array([5, None]).dictionary_encode(), ["5", None]),
    ):
        codes, values = chunk_of(array).text("x")
        assert [None if code < 0 else values[code] for code in codes] == expected


def test_bytes_that_are_not_text_do_not_stop_the_run() -> None:
    array = pa.array([b"\xff\xfe", b"ok"], pa.binary()).view(pa.string())
    assert chunk_of(array).text("x")[1] == ["��", "ok"]
    assert chunk_of(array).value("x", 0) == "��"


def test_flags_and_kinds() -> None:
    chunk = chunk_of(pa.array([True, None, False]))
    assert chunk.column_kind("x") == "flag"
    assert [chunk.value("x", row) for row in range(3)] == [True, None, False]
    np.testing.assert_array_equal(chunk.number("x"), [1, np.nan, 0])
    assert chunk_of(pa.array([1])).column_kind("x") == "number"
    assert chunk_of(pa.array([date(2020, 1, 1)])).column_kind("x") == "day"
    assert chunk_of(pa.array(["a"])).column_kind("x") == "text"
    batch = pa.RecordBatch.from_arrays([pa.array([7])], ["product"])
    assert Chunk(batch).column_kind("product") == "text"


def test_each_column_is_converted_once() -> None:
    chunk = chunk_of(pa.array([1, 2]))
    assert chunk.number("x") is chunk.number("x")
    with pytest.raises(KeyError):
        chunk.number("absent")
