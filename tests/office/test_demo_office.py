"""Writing the demo office: the same bytes from the same seed, a whole folder or none."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from portfolios import demo_office
from portfolios.demo_office import write_office
from projection.documents import read_basis, read_designs, read_run


def _digests(folder: Path) -> dict[str, str]:
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def test_a_run_finds_all_that_it_names(tmp_path: Path) -> None:
    write_office(tmp_path / "office", 500)
    for name in ("month-end.toml", "month-end-best-estimate.toml"):
        run = read_run(tmp_path / "office" / name)
        assert len(read_designs(tmp_path / "office" / run.designs)) == 12
        assert read_basis(tmp_path / "office" / run.basis).rates
        extract = pq.read_table(tmp_path / "office" / run.extract)
        assert extract.num_rows == 500
        assert set(run.group_by) <= set(extract.column_names)
        assert extract.schema.field("product").type == pa.string()


def test_same_seed_same_bytes(tmp_path: Path) -> None:
    for name, seed in (("a", 7), ("b", 7), ("c", 8)):
        write_office(tmp_path / name, 3_000, seed)
    assert _digests(tmp_path / "a") == _digests(tmp_path / "b")
    part = "inforce/part-00000.parquet"
    assert _digests(tmp_path / "a")[part] != _digests(tmp_path / "c")[part]


@pytest.mark.parametrize("policies", [1, 2, 19])
def test_a_very_small_office(tmp_path: Path, policies: int) -> None:
    write_office(tmp_path / "office", policies)
    assert pq.read_table(tmp_path / "office" / "inforce").num_rows == policies


def test_an_empty_folder_is_filled_and_a_used_one_refused(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    write_office(tmp_path / "empty", 50)
    assert (tmp_path / "empty" / "month-end.toml").is_file()
    before = _digests(tmp_path / "empty")
    with pytest.raises(FileExistsError, match="not empty"):
        write_office(tmp_path / "empty", 60)
    assert _digests(tmp_path / "empty") == before
    (tmp_path / "file").write_text("mine")
    with pytest.raises(FileExistsError, match="file"):
        write_office(tmp_path / "file", 50)
    assert (tmp_path / "file").read_text() == "mine"


def test_nothing_is_left_of_a_failure(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(demo_office, "write_extract", full)
    with pytest.raises(OSError, match="No space"):
        write_office(tmp_path / "office", 50)
    assert list(tmp_path.iterdir()) == []


def test_an_interruption_leaves_nothing(tmp_path: Path) -> None:
    def stop(done: int, total: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_office(tmp_path / "office", 200_000, progress=stop)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(("policies", "seed"), [(0, 1), (-5, 1), (100_000_001, 1), (10, -1)])
def test_numbers_out_of_range(tmp_path: Path, policies: int, seed: int) -> None:
    with pytest.raises(ValueError, match=r"must not be below|the demo office has"):
        write_office(tmp_path / "office", policies, seed)
    assert list(tmp_path.iterdir()) == []
