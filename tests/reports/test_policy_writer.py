from __future__ import annotations

import hashlib
from itertools import pairwise
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest
import reports_examples as examples
from hypothesis import given, settings
from hypothesis import strategies as st

from reports.disk import RunFolderError
from reports.sealed_files import SealedFile, WrittenFile, digest_of
from reports.tables import PolicyWriter, check_rows, write_table

RESULTS = examples.policies(2_500)


def written(folder: Path, cuts: list[int], rows_a_file: int = 1_000, rows_a_group: int = 300) -> list[WrittenFile]:
    edges = [0, *sorted(cuts), RESULTS.num_rows]
    with PolicyWriter(folder, rows_a_file, rows_a_group) as writer:
        for start, end in pairwise(edges):
            writer(RESULTS.slice(start, end - start))
        return writer.finish()


def test_files_row_groups_and_seals(tmp_path: Path) -> None:
    files = written(tmp_path, [7, 1_200])
    assert [(file.path, file.rows) for file in files] == [
        ("policies/part-00000.parquet", 1_000),
        ("policies/part-00001.parquet", 1_000),
        ("policies/part-00002.parquet", 500),
    ]
    groups = pq.ParquetFile(tmp_path / files[0].path).metadata
    assert [groups.row_group(i).num_rows for i in range(groups.num_row_groups)] == [300, 300, 300, 100]
    for file in files:
        content = (tmp_path / file.path).read_bytes()
        assert (file.sha256, file.bytes) == (hashlib.sha256(content).hexdigest(), len(content))
    assert pq.read_table(tmp_path / "policies").equals(RESULTS)


@settings(max_examples=15, deadline=None)
@given(cuts=st.lists(st.integers(0, RESULTS.num_rows), max_size=8))
def test_bytes_do_not_depend_on_the_chunks(tmp_path_factory: pytest.TempPathFactory, cuts: list[int]) -> None:
    whole = written(tmp_path_factory.mktemp("whole"), [])
    assert written(tmp_path_factory.mktemp("cut"), cuts) == whole


def test_dictionary_columns_are_plain_text_to_a_reader(tmp_path: Path) -> None:
    coded = RESULTS.set_column(1, "product", RESULTS["product"].dictionary_encode())
    with PolicyWriter(tmp_path) as writer:
        writer(coded)
        writer.finish()
    assert pq.read_table(tmp_path / "policies").schema.equals(RESULTS.schema)


def test_no_policy_valued_gives_one_empty_file(tmp_path: Path) -> None:
    with PolicyWriter(tmp_path) as writer:
        files = writer.finish()
    assert [file.rows for file in files] == [0]
    assert "reserve" in pq.read_table(tmp_path / "policies").column_names


def test_an_error_of_the_writing_thread_reaches_the_valuing_one(tmp_path: Path) -> None:
    with PolicyWriter(tmp_path, rows_a_group=10) as writer:
        writer(RESULTS.slice(0, 20))
        writer(pa.table({"policy_id": [1.5] * 20}))
        with pytest.raises(ValueError, match="schema"):
            writer.finish()


def test_an_error_of_the_valuing_thread_ends_the_writing_one(tmp_path: Path) -> None:
    writer = PolicyWriter(tmp_path, rows_a_group=10)
    writer(RESULTS.slice(0, 25))
    writer.__exit__(ZeroDivisionError, ZeroDivisionError(), None)
    assert not writer._thread.is_alive()


def test_a_whole_table_is_sealed(tmp_path: Path) -> None:
    file = write_table(tmp_path, "totals.parquet", RESULTS)
    assert digest_of(tmp_path / "totals.parquet") == (file.sha256, file.bytes)
    assert pq.read_table(tmp_path / "totals.parquet").equals(RESULTS)


def test_a_sealed_file_counts_what_it_wrote(tmp_path: Path) -> None:
    file = SealedFile(tmp_path / "file")
    assert (file.write(b"abc"), file.write(memoryview(b"de")), file.tell()) == (3, 2, 5)
    file.close()
    assert file.closed
    assert digest_of(tmp_path / "file") == (file.sealed("file").sha256, 5)


def test_what_was_written_is_read_back_before_the_run_counts(tmp_path: Path) -> None:
    files = written(tmp_path, [])
    check_rows(tmp_path, files, RESULTS.num_rows)
    with pytest.raises(RunFolderError, match=r"2,500 rows were written for 2,501 policies"):
        check_rows(tmp_path, files, RESULTS.num_rows + 1)
    (tmp_path / files[1].path).write_bytes(b"PAR1")
    with pytest.raises(RunFolderError, match="cannot be read back"):
        check_rows(tmp_path, files, RESULTS.num_rows)
