"""Reading the extract: sources, types, damage, and chunks that do not matter."""

from __future__ import annotations

import hashlib
from datetime import date, datetime
from decimal import Decimal
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from made_extract import made_policies

from portfolios.extract import Extract, ExtractError, open_extract

POLICIES = made_policies(211)


def content(extract: Extract, rows: int = 65_536, columns: tuple[str, ...] = ()) -> list[dict[str, object]]:
    chunks = extract.chunks(columns or extract.column_names, rows)
    return [chunk.policy(row) for chunk in chunks for row in range(len(chunk))]


EXPECTED = content(open_extract(POLICIES))


def write(folder: Path, name: str = "a.parquet", table: pa.Table = POLICIES, **how: object) -> Path:
    path = folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    pq.write_table(table, path, **how)
    return path


def test_content_is_that_of_the_table() -> None:
    assert POLICIES.to_pylist() == EXPECTED


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    cuts=st.lists(st.integers(0, 211), max_size=4),
    group=st.integers(1, 260),
    rows=st.integers(1, 260),
    dictionary=st.booleans(),
    page=st.sampled_from([200, 1 << 20]),
)
def test_layout_does_not_matter(
    tmp_path_factory: pytest.TempPathFactory,
    cuts: list[int],
    group: int,
    rows: int,
    dictionary: bool,
    page: int,
) -> None:
    folder = tmp_path_factory.mktemp("layout")
    edges = [0, *sorted(cuts), 211]
    for place, (start, end) in enumerate(pairwise(edges)):
        write(folder, f"part-{place}.parquet", POLICIES.slice(start, end - start), row_group_size=group,
              use_dictionary=dictionary, data_page_size=page)  # fmt: skip
    extract = open_extract(folder)
    assert extract.rows == 211
    chunks = list(extract.chunks(extract.column_names, rows))
    starts = np.cumsum([0] + [chunk.n for chunk in chunks])
    assert [chunk.start for chunk in chunks] == starts[:-1].tolist()
    assert all(0 < chunk.n <= rows for chunk in chunks)
    assert [cells for chunk in chunks for cells in chunk.batch.to_pylist()] == EXPECTED
    whole = next(iter(open_extract(POLICIES).chunks(POLICIES.column_names)))
    np.testing.assert_array_equal(np.concatenate([chunk.hashes for chunk in chunks]), whole.hashes)
    for name in ("premium_pa", "term_years", "guarantee_years", "deferral_years"):
        np.testing.assert_array_equal(np.concatenate([chunk.number(name) for chunk in chunks]), whole.number(name))
    np.testing.assert_array_equal(
        np.concatenate([chunk.day("birth_date") for chunk in chunks]), whole.day("birth_date")
    )
    regions = [
        None if code < 0 else chunk.text("region")[1][code] for chunk in chunks for code in chunk.text("region")[0]
    ]
    assert regions == POLICIES["region"].to_pylist()


def test_many_small_row_groups_make_few_chunks(tmp_path: Path) -> None:
    write(tmp_path, row_group_size=5)
    assert len(list(open_extract(tmp_path).chunks(["policy_id", "region"], 100))) <= 4


def test_sources(tmp_path: Path) -> None:
    write(tmp_path, "in/b.parquet", POLICIES.slice(150))
    write(tmp_path, "in/a/deep.parquet", POLICIES.slice(0, 150))
    write(tmp_path, "in/_old.parquet")
    write(tmp_path, "in/.unfinished/x.parquet")
    (tmp_path / "in" / "notes.txt").write_text("not policies")
    folder = open_extract("in", tmp_path)
    assert [file.path for file in folder.files] == ["in/a/deep.parquet", "in/b.parquet"]
    assert [file.rows for file in folder.files] == [150, 61]
    assert folder.files[1].bytes == (tmp_path / "in" / "b.parquet").stat().st_size
    assert content(folder) == EXPECTED
    assert open_extract("in/b.parquet", tmp_path).rows == 61
    assert open_extract(tmp_path / "in" / "b.parquet").rows == 61
    assert content(open_extract("in/**/*.parquet", tmp_path)) == EXPECTED
    assert open_extract("i?/[b].parquet", tmp_path).rows == 61
    assert content(open_extract((tmp_path / "in").as_uri())) == EXPECTED
    assert open_extract((tmp_path / "in" / "b.parquet").as_uri()).rows == 61


def test_memory_and_frames() -> None:
    assert content(open_extract(POLICIES.combine_chunks().to_batches()[0]), 100) == EXPECTED
    frame = POLICIES.to_pandas(date_as_object=False)
    got = content(open_extract(frame))
    assert [{**row, "smoker": bool(row["smoker"])} for row in got] == EXPECTED
    assert open_extract(frame).files[0].path == "in memory"


def test_mixed_frame_and_strange_source() -> None:
    with pytest.raises(ExtractError, match="mixed or unknown types"):
        open_extract(pd.DataFrame({"policy_id": ["a", 1]}))
    with pytest.raises(ExtractError, match="not 'int'"):
        open_extract(5)


@pytest.mark.parametrize(
    ("source", "words"),
    [
        ("absent.parquet", "no such file or folder"),
        ("empty", "holds no Parquet file"),
        ("empty/*.parquet", "no file fits the pattern"),
        ("file:///absent/absent.parquet", "no such file or folder"),
        ("unknown://a/b", "cannot be opened"),
        ("", "has no path"),
    ],
)
def test_nothing_found(tmp_path: Path, source: str, words: str) -> None:
    (tmp_path / "empty").mkdir()
    with pytest.raises(ExtractError, match=words):
        open_extract(source, tmp_path)


def test_broken_link_is_not_passed_over(tmp_path: Path) -> None:
    write(tmp_path)
    (tmp_path / "b.parquet").symlink_to(tmp_path / "gone.parquet")
    with pytest.raises(ExtractError, match=r"b\.parquet: cannot be read"):
        open_extract(tmp_path)


def test_not_parquet(tmp_path: Path) -> None:
    for name, bytes_ in (("zero", b""), ("text", b"policy_id,product\n1,TERM\n" * 9)):
        (tmp_path / f"{name}.parquet").write_bytes(bytes_)
        with pytest.raises(ExtractError, match=f"{name}.parquet: cannot be read as Parquet.*write it again"):
            open_extract(tmp_path / f"{name}.parquet")


def test_truncated(tmp_path: Path) -> None:
    path = write(tmp_path)
    path.write_bytes(path.read_bytes()[:-1000])
    with pytest.raises(ExtractError, match=r"a\.parquet: cannot be read"):
        open_extract(path)


def test_damage_found_while_streaming(tmp_path: Path) -> None:
    path = write(tmp_path, row_group_size=100, compression="snappy")
    bytes_ = bytearray(path.read_bytes())
    place = pq.ParquetFile(path).metadata.row_group(1).column(0).data_page_offset
    bytes_[place : place + 400] = b"\xff" * 400
    path.write_bytes(bytes_)
    extract = open_extract(path)
    with pytest.raises(ExtractError, match=r"a\.parquet: cannot be read as Parquet"):
        list(extract.chunks(["policy_id"], 50))


def test_cut_short_after_opening(tmp_path: Path) -> None:
    path = write(tmp_path, row_group_size=100)
    extract = open_extract(path)
    path.write_bytes(path.read_bytes()[:4000])
    with pytest.raises(ExtractError, match="cannot be read"):
        list(extract.chunks(extract.column_names, 50))


def test_missing_column_names_the_nearest(tmp_path: Path) -> None:
    extract = open_extract(write(tmp_path))
    with pytest.raises(ExtractError, match=r"no column 'sum_asured'; did you mean 'sum_assured'\?"):
        extract.need(["sum_asured"])
    with pytest.raises(ExtractError, match="no column 'zzz'; it has policy_id, product"):
        extract.chunks(["zzz"])
    extract.need(extract.column_names)


def test_every_fault_is_told_at_once(tmp_path: Path) -> None:
    with pytest.raises(ExtractError) as caught:
        open_extract(write(tmp_path)).need(["sum_asured", "birth_dat"])
    assert len(str(caught.value).splitlines()) == 2


@pytest.mark.parametrize(
    ("name", "array", "numbers"),
    [
        ("policy_id", pa.array([1.5]), ()),
        ("product", pa.array([date(2020, 1, 1)]), ()),
        ("birth_date", pa.array(["1980-01-01"]), ()),
        ("premium_pa", pa.array(["12"]), ()),
        ("term_years", pa.array([True]), ()),
        ("bonus_sum", pa.array(["12"]), ("bonus_sum",)),
        ("region", pa.array([[1]]), ()),
        ("region", pa.array([b"x"]), ()),
    ],
)
def test_wrong_type(name: str, array: pa.Array, numbers: tuple[str, ...]) -> None:
    with pytest.raises(ExtractError, match=f"column '{name}' is of type .*; it should hold"):
        open_extract(pa.table({name: array})).need([name], numbers)


@pytest.mark.parametrize(
    ("name", "array", "value"),
    [
        ("policy_id", pa.array([12]), "12"),
        ("policy_id", pa.array(["a"], pa.large_string()), "a"),
        ("policy_id", pa.array(["a"], pa.string_view()), "a"),
        ("policy_id", pa.array(["a"]).dictionary_encode(), "a"),
        ("product", pa.array([7], pa.uint8()), "7"),
        ("premium_pa", pa.array([Decimal("12.25")]), 12.25),
        ("premium_pa", pa.array([12], pa.uint64()), 12),
        ("premium_pa", pa.array([1.5], pa.float16()), 1.5),
        ("premium_pa", pa.array([float("nan")]), None),
        ("premium_pa", pa.nulls(1), None),
        ("birth_date", pa.nulls(1), None),
        ("product", pa.nulls(1), None),
        ("birth_date", pa.array([date(1960, 2, 29)], pa.date64()), date(1960, 2, 29)),
        ("birth_date", pa.array([datetime(1960, 2, 29, 23, 59)], pa.timestamp("ns")), date(1960, 2, 29)),
        ("birth_date", pa.array([datetime(1960, 2, 29, 23)], pa.timestamp("us", "UTC")), date(1960, 2, 29)),
        ("birth_date", pa.array([2**50], pa.timestamp("s")), None),
    ],
)
def test_accepted_types(tmp_path: Path, name: str, array: pa.Array, value: object) -> None:
    table = pa.table({name: array})
    sources: list[object] = [table]
    # Half floats and narrow decimals need not survive the way through a file in every release.
    if not pa.types.is_float16(array.type):
        sources.append(write(tmp_path, table=table))
    for source in sources:
        extract = open_extract(source)
        extract.need([name])
        (policy,) = content(extract)
        assert policy[name] == value
        chunk = next(iter(extract.chunks([name])))
        kind = chunk.column_kind(name)
        if kind == "number":
            assert np.array_equal(chunk.number(name), [np.nan if value is None else value], equal_nan=True)
        elif kind == "text":
            codes, values = chunk.text(name)
            assert [None if code < 0 else values[code] for code in codes] == [value]


def test_files_of_differing_types(tmp_path: Path) -> None:
    write(tmp_path, "a.parquet", pa.table({"policy_id": ["a"], "region": [1], "premium_pa": [1]}))
    write(tmp_path, "b.parquet", pa.table({"policy_id": ["b"], "region": ["n"], "premium_pa": [2.5]}))
    extract = open_extract(tmp_path)
    with pytest.raises(ExtractError, match=r"b\.parquet: column 'region' is of type string, but int64 in"):
        extract.need(["region"])
    extract.need(["policy_id", "premium_pa"])
    assert [row["premium_pa"] for row in content(extract, columns=("premium_pa",))] == [1, 2.5]


def test_column_missing_from_one_file(tmp_path: Path) -> None:
    write(tmp_path, "a.parquet", pa.table({"policy_id": ["a"], "region": ["n"]}))
    write(tmp_path, "b.parquet", pa.table({"policy_id": ["b"]}))
    with pytest.raises(ExtractError, match=r"b\.parquet: there is no column 'region'"):
        open_extract(tmp_path).need(["region"])


def test_column_twice() -> None:
    table = pa.Table.from_arrays([pa.array([1]), pa.array([2])], names=["a", "a"])
    with pytest.raises(ExtractError, match="'a' occurs 2 times"):
        open_extract(table).chunks(["a"])


def test_no_rows(tmp_path: Path) -> None:
    for source in (POLICIES.slice(0, 0), write(tmp_path, table=POLICIES.slice(0, 0))):
        extract = open_extract(source)
        assert extract.rows == 0
        assert list(extract.chunks(extract.column_names)) == []


def test_digests(tmp_path: Path) -> None:
    path = write(tmp_path)
    assert open_extract("a.parquet", tmp_path).digests() == {"a.parquet": hashlib.sha256(path.read_bytes()).hexdigest()}
    again = pa.concat_tables([POLICIES.slice(0, 10), POLICIES.slice(10)])
    one, two = open_extract(POLICIES).digests(), open_extract(again).digests()
    assert one == two
    assert open_extract(POLICIES.slice(1)).digests() != one


def test_find(tmp_path: Path) -> None:
    twice = pa.concat_tables([POLICIES, POLICIES.slice(3, 1)])
    extract = open_extract(write(tmp_path, table=twice))
    identifier = EXPECTED[3]["policy_id"]
    assert [chunk.policy(0) for chunk in extract.find(str(identifier))] == [EXPECTED[3], EXPECTED[3]]
    (found,) = extract.find(str(EXPECTED[200]["policy_id"]))
    assert (found.policy(0), found.start, found.n) == (EXPECTED[200], 200, 1)
    assert extract.find("nobody") == []


def test_senseless_chunk_size() -> None:
    with pytest.raises(ValueError, match="a chunk of 0 rows"):
        open_extract(POLICIES).chunks(["policy_id"], 0)
