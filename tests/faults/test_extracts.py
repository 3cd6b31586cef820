"""Extracts that are damaged, of the wrong types or short of a column."""

from __future__ import annotations

import shutil
import struct
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
import pytest
from fault_office import EXTRACT, Office

NEEDED = (
    "policy_id", "product", "status", "birth_date", "commencement_date", "sex", "policy_class", "term_years",
    "premium_years", "deferral_years", "guarantee_years", "premium_pa", "premium_frequency", "single_premium",
    "sum_assured", "annuity_pa", "annuity_frequency", "escalation",
)  # fmt: skip
"""Columns that the demo's designs, basis or groups look at."""

DAMAGED = f"{EXTRACT.as_posix()}: cannot be read as Parquet: "
REMEDY = "it may be cut short, damaged or of another format: write it again"


def footer(content: bytes) -> int:
    """Return where the footer of a Parquet file starts."""
    (length,) = struct.unpack("<I", content[-8:-4])
    return len(content) - 8 - int(length)


def cut_footer(content: bytes) -> bytes:
    return content[: footer(content)]


def without_pages(content: bytes) -> bytes:
    return content[:4] + content[footer(content) :]


def zeroed_pages(content: bytes) -> bytes:
    return content[:4] + bytes(footer(content) - 4) + content[footer(content) :]


def half(content: bytes) -> bytes:
    return content[: len(content) // 2]


def text(content: bytes) -> bytes:
    return b"policy_id;product;sum_assured\nA-1;LARBOARD;100000\n" * 20


@pytest.mark.parametrize("damage", [cut_footer, without_pages, zeroed_pages, half, text, lambda content: b""])
def test_damaged_files(office: Office, damage: object) -> None:
    path = office.folder / EXTRACT
    path.write_bytes(damage(path.read_bytes()))  # type: ignore[operator]
    said = office.refused()
    assert said.startswith(DAMAGED)
    assert REMEDY in said


def test_one_damaged_file_of_several(office: Office) -> None:
    path = office.folder / EXTRACT
    second = path.with_name("part-00001.parquet")
    second.write_bytes(without_pages(path.read_bytes()))
    assert office.refused().startswith("inforce/part-00001.parquet: cannot be read as Parquet: ")


def test_no_file_at_all(office: Office) -> None:
    (office.folder / EXTRACT).unlink()
    assert "inforce: the folder holds no Parquet file (*.parquet)" in office.refused()
    shutil.rmtree(office.folder / "inforce")
    assert "inforce: there is no such file or folder" in office.refused()


def test_no_policy(office: Office) -> None:
    office.write(office.extract().slice(0, 0))
    said = office.reserve()
    assert (said.code, said.err.strip()) == (1, "the extract holds no policies")
    assert not office.out.parent.exists()


def wrong(column: pa.ChunkedArray, name: str) -> pa.Array:
    """Return values of a type that the column must not have."""
    if pa.types.is_string(column.type):
        return pa.array(np.arange(len(column)) / 7)
    if name.endswith("_date"):
        return pc.cast(column, pa.string())
    return pc.fill_null(pc.cast(column, pa.string()), "none")


@pytest.mark.parametrize("name", NEEDED)
def test_wrong_types(office: Office, name: str) -> None:
    table = office.extract()
    place = table.schema.get_field_index(name)
    changed = wrong(table.column(name), name)
    office.write(table.set_column(place, name, changed))
    said = office.refused()
    if name in ("sex", "policy_class") and "for: key" in said:
        # Groups and rules may use columns of any kind; this rule asks for text.
        assert "statutory.toml: mortality, rule 1, for: key" in said
        assert "compare like with like" in said
    else:
        assert f"{EXTRACT.as_posix()}: column '{name}' is of type {changed.type}; it should hold " in said


@pytest.mark.parametrize("name", NEEDED)
def test_a_missing_column_with_a_near_name(office: Office, name: str) -> None:
    table = office.extract()
    office.write(table.rename_columns([f"{column}s" if column == name else column for column in table.column_names]))
    assert f"{EXTRACT.as_posix()}: there is no column '{name}'; did you mean '{name}s'?" in office.refused()


def test_a_column_twice(office: Office) -> None:
    table = office.extract()
    office.write(table.append_column("premium_pa", table.column("sum_assured")))
    assert "column 'premium_pa' occurs 2 times; keep one of them" in office.refused()


def test_a_column_of_the_extracts_own_as_an_amount(office: Office) -> None:
    """A column that the registry does not list must hold numbers too where a design takes it as an amount."""
    office.replace("designs/larboard.toml", '"sum_assured"', '"region"')
    said = office.refused()
    assert f"{EXTRACT.as_posix()}: column 'region' is of type string; it should hold numbers" in said


def test_files_that_do_not_agree(office: Office) -> None:
    table = office.extract()
    place = table.schema.get_field_index("region")
    other = table.set_column(place, "region", pa.array(np.arange(len(table))))
    pq.write_table(other, office.folder / "inforce" / "part-00001.parquet")
    office.replace("month-end.toml", '"sex"]', '"region"]')
    said = office.refused()
    assert "inforce/part-00001.parquet: column 'region' is of type int64, but string in" in said
    assert "write all files with one type" in said


@pytest.mark.slow
def test_one_bad_row_of_a_million(office: Office, tmp_path: Path) -> None:
    good = office.extract().filter(pc.invert(pc.is_in(
        office.extract().column("policy_id"), pa.array(exceptions(office)))))  # fmt: skip
    block = pa.concat_tables([good] * (50_000 // len(good)))
    times = -(-1_000_000 // len(block))
    with pq.ParquetWriter(office.folder / EXTRACT, good.schema) as writer:
        for number in range(times):
            places = pa.array(np.arange(len(block)) + number * len(block)).cast(pa.string())
            numbered = pc.binary_join_element_wise("M", places, "-")
            writer.write_table(block.set_column(0, "policy_id", numbered))
        bad = good.slice(0, 1).set_column(0, "policy_id", pa.array(["BAD-1"]))
        place = bad.schema.get_field_index("birth_date")
        writer.write_table(bad.set_column(place, "birth_date", pa.array([None], pa.date32())))
    said = office.reserve("--no-workbook")
    assert said.code == 0, said.err
    rows = pq.read_table(office.out / "exceptions.parquet").to_pylist()
    assert [(row["policy_id"], row["reason"], row["field"]) for row in rows] == [
        ("BAD-1", "date missing", "birth_date")
    ]
    assert pq.read_table(office.out / "policies", columns=["policy_id"]).num_rows == times * len(block)
    assert f"{times * len(block) + 1:,}" in said.out
    assert "does not close" not in said.out


def exceptions(office: Office) -> list[str]:
    """Return the identifiers of the policies that the demo gets wrong on purpose."""
    assert office.reserve("--no-workbook").code == 0
    found = pq.read_table(office.out / "exceptions.parquet").column("policy_id").to_pylist()
    shutil.rmtree(office.out)
    return [str(identifier) for identifier in found]
