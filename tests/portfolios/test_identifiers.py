"""Hashes of identifiers, and those that occur more than once."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given
from hypothesis import strategies as st
from made_extract import made_policies

import portfolios.chunk
import portfolios.extract_parts
from portfolios.extract import open_extract
from portfolios.identifiers import Duplicates, byte_lengths, find_duplicates, identifier_hashes, members

MASK = (1 << 64) - 1


def plain_hash(text: str) -> int:
    """The same hash, one identifier at a time."""

    def mixed(value: int, factor: int) -> int:
        value = value * factor & MASK
        return value ^ value >> 32

    content, value = text.encode(), 0x6A09E667F3BCC909
    odd = 0x9E3779B97F4A7C15
    for at in range(0, len(content), 8):
        value = mixed(value ^ int.from_bytes(content[at : at + 8], "little"), odd)
    return mixed(mixed(value ^ len(content) * odd & MASK, 0xD6E8FEB86659FD93), odd)


IDS = st.lists(st.none() | st.text(max_size=30) | st.sampled_from(["A-0000001", "A-0000002", "=1+1", "<script>"]))


@given(IDS, st.integers(0, 5))
def test_hash_is_that_of_the_plain_one(ids: list[str | None], start: int) -> None:
    hashes = identifier_hashes(pa.array(ids, pa.string()).slice(start))
    assert hashes.tolist() == [plain_hash(text or "") for text in ids[start:]]


@given(st.integers(1, 25), st.integers(1, 50))
def test_equal_lengths_take_the_short_way_to_the_same_hash(length: int, count: int) -> None:
    ids = [f"{number:0{length}d}"[-length:] for number in range(count)]
    assert identifier_hashes(pa.array(ids)).tolist() == [plain_hash(text) for text in ids]


def test_hash_is_frozen() -> None:
    # Samples of old runs are chosen by these figures; a change of them is a change of the sample.
    assert [hex(value) for value in identifier_hashes(pa.array(["", "A-1", "TM-0000001-7"])).tolist()] == FROZEN


FROZEN = ["0xc19c9036a9f49a47", "0x776e401140851d93", "0xd32d69474648af82"]


def test_type_of_the_column_does_not_matter() -> None:
    plain = identifier_hashes(pa.array(["1", "22", None]))
    for array in (
        pa.array([1, 22, None]),
        pa.array(["1", "22", None], pa.large_string()),
        pa.array(["1", "22", None]).dictionary_encode(),
    ):
        np.testing.assert_array_equal(identifier_hashes(array), plain)


def test_a_null_hides_what_lies_behind_it() -> None:
    array = pa.StringArray.from_buffers(
        3, pa.py_buffer(np.array([0, 1, 3, 4], np.int32)), pa.py_buffer(b"axxb"), pa.py_buffer(b"\x05"), 1
    )
    assert array.to_pylist() == ["a", None, "b"]
    assert byte_lengths(array).tolist() == [1, 0, 1]
    assert identifier_hashes(array).tolist() == identifier_hashes(pa.array(["a", None, "b"])).tolist()


def test_hashes_spread() -> None:
    hashes = identifier_hashes(pa.array([f"TM-{number:07d}-{number % 10}" for number in range(200_000)]))
    assert len(np.unique(hashes)) == 200_000
    assert len(np.unique(hashes >> np.uint64(48))) > 60_000
    # The smallest hundred, which would be the sample, come from all over the extract.
    places = np.argsort(hashes)[:100]
    assert 70_000 < places.mean() < 130_000


@given(st.lists(st.integers(0, MASK)), st.lists(st.integers(0, MASK)))
def test_members(some: list[int], wanted: list[int]) -> None:
    wanted = sorted({*wanted, *some[::2]})
    got = members(np.array(some, np.uint64), np.array(wanted, np.uint64))
    assert got.tolist() == [value in wanted for value in some]


@given(st.lists(st.none() | st.sampled_from(["", "a", "b", "c", "d" * 20, "e"]) | st.text(max_size=3), max_size=40))
def test_duplicates(ids: list[str | None]) -> None:
    extract = open_extract(pa.table({"policy_id": pa.array(ids, pa.string())}))
    duplicates = find_duplicates(extract)
    times = Counter(text for text in ids if text)
    marks = [flag for chunk in extract.chunks(["policy_id"], 3) for flag in duplicates.mask(chunk.ids, chunk.hashes)]
    assert [mark for mark, text in zip(marks, ids, strict=True) if text] == [times[text] > 1 for text in ids if text]
    assert len(duplicates) == sum(count > 1 for count in times.values())


def test_none_in_a_large_extract() -> None:
    table = made_policies(3000)
    assert len(find_duplicates(open_extract(table))) == 0
    assert len(find_duplicates(open_extract(pa.concat_tables([table, table.slice(17, 2)])))) == 2


@pytest.mark.parametrize("in_files", [True, False])
def test_they_are_found_wherever_they_lie(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, in_files: bool) -> None:
    monkeypatch.setattr(portfolios.extract_parts, "_BLOCK_ROWS", 100)
    ids = [None if row % 50 == 3 else f"P-{row:04d}" for row in range(1000)]
    ids[5], ids[990], ids[400], ids[401], ids[999] = ids[612], "", "twins", "twins", ids[612]
    table = pa.table({"policy_id": pa.array(ids, pa.string())})
    if in_files:
        pq.write_table(table.slice(0, 410), tmp_path / "a.parquet", row_group_size=100)
        pq.write_table(table.slice(410, 0), tmp_path / "b.parquet")
        pq.write_table(table.slice(410), tmp_path / "c.parquet", row_group_size=70)
    extract = open_extract(tmp_path if in_files else table)
    duplicates = find_duplicates(extract, keep=3)
    hashes = identifier_hashes(pa.array([text for text in ids if text]))
    assert duplicates.hashes.tolist() == sorted(identifier_hashes(pa.array([ids[612], "twins"])).tolist())
    assert duplicates.smallest.tolist() == sorted(hashes.tolist())[:3]
    read = list(extract.near(["policy_id"], np.array([5, 400, 401, 612, 999])))
    assert sum(map(len, read)) < 600
    assert all(chunk.ids.to_pylist() == ids[chunk.start : chunk.start + len(chunk)] for chunk in read)
    rows = {chunk.start + row for chunk in read for row in range(len(chunk))}
    assert {5, 400, 401, 612, 999} <= rows


def test_equal_hashes_of_different_identifiers_are_told_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    def poor(ids: pa.Array) -> np.ndarray:
        return np.minimum(byte_lengths(ids), 4).astype(np.uint64)

    monkeypatch.setattr("portfolios.identifiers.identifier_hashes", poor)
    monkeypatch.setattr(portfolios.chunk, "identifier_hashes", poor)
    ids = ["a", "b", "cc", "cc", "dd", "eee", None, ""]
    extract = open_extract(pa.table({"policy_id": ids}))
    duplicates = find_duplicates(extract)
    assert duplicates.hashes.tolist() == [2]
    assert duplicates.spared == {"dd"}
    chunk = next(iter(extract.chunks(["policy_id"])))
    assert duplicates.mask(chunk.ids, chunk.hashes).tolist() == [text == "cc" for text in ids]


def test_no_duplicates_by_default() -> None:
    assert not Duplicates().mask(pa.array(["a"]), identifier_hashes(pa.array(["a"]))).any()
