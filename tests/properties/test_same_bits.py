"""The same bits whatever the order, the pieces and the threads, on the invented office.

Reserves, totals and cash flows are compared as bits, not as numbers that are near to each other.
"""

from __future__ import annotations

from collections import defaultdict
from pathlib import Path
from random import Random
from typing import Any, ClassVar

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from table_bits import bits

import projection.valuation
from assumptions.basis import Basis
from portfolios.demo_office import write_office
from portfolios.designs import Design
from portfolios.extract import CHUNK_ROWS, open_extract
from projection.documents import read_basis, read_designs, read_run
from projection.plans import Plans
from projection.results import Outcome
from projection.settings import Settings
from projection.tally import Tally

POLICIES = 1_500
GROUPS = ("product", "sex")
Found = tuple[pa.Table, Outcome]
"""Per-policy results, and the rest."""

RUNS = ("month-end.toml", "month-end-best-estimate.toml")


class Office:
    """What one run document of the office values, and the extract."""

    def __init__(self, folder: Path, name: str, step: Any) -> None:
        run = read_run(folder / name)
        self.designs: list[Design] = read_designs(folder / run.designs)
        self.basis: Basis = read_basis(folder / run.basis)
        self.settings = Settings(run.valuation_date, step, run.due, run.decimals)
        self.table: pa.Table = pq.read_table(folder / run.extract)

    def value(self, extract: Any, *, chunk_rows: int = CHUNK_ROWS, threads: int = 1) -> Found:
        pieces: list[pa.Table] = []
        found = projection.valuation.value_extract(
            open_extract(extract), self.designs, self.basis, self.settings, group_by=GROUPS, sample=2,
            sink=pieces.append, threads=threads, chunk_rows=chunk_rows,
        )  # fmt: skip
        return pa.concat_tables(pieces), found


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, POLICIES, 5)
    return place


@pytest.fixture(scope="module", params=[(RUNS[0], "month"), (RUNS[1], "month"), (RUNS[0], "year")], ids=str)
def office(request: pytest.FixtureRequest, folder: Path) -> Office:
    return Office(folder, *request.param)


@pytest.fixture(scope="module")
def whole(office: Office) -> Found:
    found = office.value(office.table)
    assert found[0].num_rows > 0.9 * POLICIES
    assert found[1].exceptions.num_rows > 0
    return found


def check_same(one: Found, other: Found, *, ordered: bool = True) -> None:
    """Compare all figures; not ordered: the policies may come in another order, nothing else."""
    by = [("policy_id", "ascending")]
    for left, right in ((one[0], other[0]), (one[1].exceptions, other[1].exceptions)):
        if ordered:
            assert bits(left).equals(bits(right))
        assert bits(left).sort_by(by).equals(bits(right).sort_by(by))
    assert bits(one[1].totals).equals(bits(other[1].totals))
    assert bits(one[1].cash_flows).equals(bits(other[1].cash_flows))
    assert one[1].total == other[1].total
    assert one[1].control == other[1].control


@pytest.mark.parametrize("seed", [1, 2])
def test_shuffled_rows(office: Office, whole: Found, seed: int) -> None:
    order = list(range(POLICIES))
    Random(seed).shuffle(order)
    check_same(whole, office.value(office.table.take(order)), ordered=False)


@pytest.mark.parametrize(("rows", "threads"), [(13, 1), (64, 2), (501, 1), (501, 2), (POLICIES, 2)])
def test_chunks_and_threads(office: Office, whole: Found, rows: int, threads: int) -> None:
    check_same(whole, office.value(office.table, chunk_rows=rows, threads=threads))


def test_one_file_against_several(office: Office, whole: Found, tmp_path: Path) -> None:
    (tmp_path / "several").mkdir()
    pq.write_table(office.table, tmp_path / "one.parquet", row_group_size=POLICIES)
    for number, (begin, end, group) in enumerate(
        ((0, 1, 1), (1, 411, 100), (411, 1_200, 13), (1_200, POLICIES, 1_000))
    ):
        piece = tmp_path / "several" / f"{number}.parquet"
        pq.write_table(
            office.table.slice(begin, end - begin), piece, row_group_size=group, use_dictionary=number % 2 > 0
        )
    for place in ("one.parquet", "several"):
        check_same(whole, office.value(tmp_path / place, threads=2))


class Kept(Tally):
    """A tally that leaves behind the exact cash flows by line and share, before the table rounds them."""

    exact: ClassVar[dict[Any, Any]] = {}

    def flows_table(self, plans: Plans, year: int, month: int) -> pa.Table:
        Kept.exact = defaultdict(int)
        lines = list(plans.lines)
        for (_, shares), account in plans.accounts.items():
            for line, share in shares:
                Kept.exact[lines[line].product, lines[line].stream, share] += self.flows[account]
        return super().flows_table(plans, year, month)


def by_key(table: pa.Table, keys: int, first: str) -> dict[tuple[Any, ...], Any]:
    """Minor units (or policies) by the first columns of a table, from the column named on."""
    rows = zip(*(column.to_pylist() for column in table.columns), strict=True)
    begin = table.column_names.index(first)
    return {row[:keys]: np.array([round(100 * figure) for figure in row[begin:]]) for row in rows}


def test_two_parts_add_up_to_the_whole(office: Office, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(projection.valuation, "Tally", Kept)
    totals, exact, tables = [], [], []
    for table in (office.table, office.table[: POLICIES // 3], office.table[POLICIES // 3 :]):
        found = office.value(table)[1]
        totals.append(by_key(found.totals, len(GROUPS), "policies"))
        exact.append(Kept.exact)
        tables.append(by_key(found.cash_flows, 5, "amount"))
    assert totals[0].keys() == totals[1].keys() | totals[2].keys()
    for key, figures in totals[0].items():
        assert np.array_equal(figures, totals[1].get(key, 0) + totals[2].get(key, 0)), key
    for key in exact[0].keys() | exact[1].keys() | exact[2].keys():
        assert np.array_equal(exact[0][key], exact[1].get(key, 0) + exact[2].get(key, 0)), key
    # The table rounds a line to the minor unit in the whole and in either part: three times a half.
    for key in tables[0].keys() | tables[1].keys() | tables[2].keys():
        assert abs(tables[0].get(key, 0) - tables[1].get(key, 0) - tables[2].get(key, 0)) <= 1, key
