"""Several bases side by side: the same as one run for each, on the invented office.

Figures are compared as bits. The outside truth here is the run on one basis, which has checks of its own.
"""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from portfolios.demo_office import write_office
from portfolios.extract import CHUNK_ROWS, open_extract
from projection import Valuation, value, value_extract
from projection.documents import DocumentError, check_document, read_basis, read_designs
from projection.results import MONEY_COLUMNS, Outcome
from projection.run_document import RunDocument
from projection.settings import Settings

pytestmark = pytest.mark.compiled
"""Whole offices: without compilation they take minutes."""

DATE = "2026-11-30"
GROUPS = ("product", "sex")


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, 800, 3)
    return place


def valued(office: Path, main: str, *, further: tuple[str, ...] = (), **changes: Any) -> Valuation:
    bases = {name: office / "bases" / f"{name}.toml" for name in further}
    asked: dict[str, Any] = {"group_by": GROUPS, "sample": 2, "threads": 1, **changes}
    basis = changes.pop("basis", office / "bases" / f"{main}.toml")
    asked.pop("basis", None)
    return value(office / "inforce", office / "designs", basis, DATE, further_bases=bases, **asked)


@pytest.fixture(scope="module")
def both(office: Path) -> Valuation:
    return valued(office, "statutory", further=("best_estimate",))


def renamed(table: pa.Table, columns: tuple[str, ...]) -> pa.Table:
    """The figures of the further basis under the names that they have in a run of its own."""
    chosen = table.select([f"{name}_best_estimate" for name in columns])
    return chosen.rename_columns(list(columns))


def test_each_basis_gives_what_a_run_of_its_own_gives(office: Path, both: Valuation) -> None:
    own, other = valued(office, "statutory"), valued(office, "best_estimate")
    assert own.policies.num_rows > 700
    names = own.policies.column_names
    assert both.policies.select(names).equals(own.policies)
    assert both.totals.select(own.totals.column_names).equals(own.totals)
    assert both.cash_flows.equals(own.cash_flows)
    assert renamed(both.policies, MONEY_COLUMNS).equals(other.policies.select(MONEY_COLUMNS))
    figures = (*MONEY_COLUMNS, "rounding")
    assert renamed(both.totals, figures).equals(other.totals.select(figures))
    (further,) = both.outcome.further
    assert further.cash_flows.equals(other.cash_flows)
    assert further.total == other.outcome.total != own.outcome.total
    assert further.conventions == other.outcome.conventions
    assert both.outcome.control == own.outcome.control


@pytest.mark.parametrize(("chunk_rows", "threads"), [(64, 1), (97, 2), (CHUNK_ROWS, 2)])
def test_pieces_and_threads_change_no_bit(office: Path, both: Valuation, chunk_rows: int, threads: int) -> None:
    pieces: list[pa.Table] = []
    bases = [read_basis(office / "bases" / f"{name}.toml") for name in ("statutory", "best_estimate")]
    found: Outcome = value_extract(
        open_extract(office / "inforce"),
        read_designs(office / "designs"),
        bases[0],
        Settings(both.outcome.settings.valuation_date),
        further={"best_estimate": bases[1]},
        group_by=GROUPS,
        sample=2,
        sink=pieces.append,
        threads=threads,
        chunk_rows=chunk_rows,
    )
    assert pa.concat_tables(pieces).equals(both.policies)
    assert found.totals.equals(both.totals)
    assert found.further[0].cash_flows.equals(both.outcome.further[0].cash_flows)


def refusing(office: Path, products: list[str]) -> dict[str, Any]:
    """A basis whose interest has a rule for some products only."""
    rules = [{"for": {"product": products}, "flat": 0.02}]
    mortality = {"rule": [{"table": {"law": "Makeham", "A": 0.0004, "B": 0.00003, "c": 1.1}}]}
    return {"title": "Some products only", "mortality": mortality, "interest": {"rule": rules}}


def test_what_one_basis_refuses_is_valued_on_none(office: Path, both: Valuation) -> None:
    """Whichever of the two it is: the policy is out of all sums, and listed once with the basis that refuses it."""
    some = ["MARRAM", "EBBSTONE", "QUAYWARD"]
    narrow, wide = refusing(office, some), office / "bases" / "statutory.toml"
    first = valued(office, "", basis=narrow, further=("statutory",))
    second = value(
        office / "inforce",
        office / "designs",
        wide,
        DATE,
        further_bases={"narrow": narrow},
        group_by=GROUPS,
        sample=2,
        threads=1,
    )
    kept = [row for row in both.policies.to_pylist() if row["product"] in some]
    assert 0 < len(kept) < both.policies.num_rows
    for found in (first, second):
        assert found.policies.column("policy_id").to_pylist() == [row["policy_id"] for row in kept]
        assert found.outcome.closes
        assert found.outcome.read == both.outcome.read
        assert found.exceptions.num_rows == found.outcome.read - len(kept)
    assert second.policies.column("reserve").to_pylist() == [row["reserve"] for row in kept]
    assert first.policies.column("reserve_statutory").to_pylist() == [row["reserve"] for row in kept]
    # Cash flows hold those that are kept and nobody else.
    alone = [row for row in both.cash_flows.to_pylist() if row["product"] in some]
    assert second.cash_flows.to_pylist() == alone
    assert first.outcome.further[0].cash_flows.to_pylist() == alone
    said = {row["rule"] for row in second.exceptions.to_pylist() if row["reason"] == "no rule fits"}
    assert said == {"on basis 'narrow': a rule of interest must fit"}
    assert "a rule of interest must fit" in first.exceptions.column("rule").to_pylist()


@pytest.mark.parametrize("name", ["Best", "best estimate", "1st", "", "_x", "reserve-a", "b" * 32])
def test_a_name_that_cannot_stand_in_a_column_is_an_error(office: Path, name: str) -> None:
    with pytest.raises(DocumentError, match="small letters, digits and '_'"):
        value(
            office / "inforce",
            office / "designs",
            office / "bases" / "statutory.toml",
            DATE,
            further_bases={name: refusing(office, [])},
        )
    run = {
        "valuation_date": date(2026, 11, 30),
        "extract": "x",
        "designs": "d",
        "basis": "b",
        "further_bases": {name: "c"},
    }
    with pytest.raises(DocumentError, match="small letters, digits and '_'"):
        check_document(run, RunDocument, "run")


def test_a_group_may_not_be_called_like_a_result_of_a_further_basis(office: Path) -> None:
    with pytest.raises(DocumentError, match="reserve_best_estimate"):
        valued(office, "statutory", further=("best_estimate",), group_by=("reserve_best_estimate",))


def test_the_extract_holds_what_every_basis_asks(office: Path) -> None:
    """A column that only a further basis looks at is needed all the same."""
    asking = refusing(office, ["MARRAM"])
    asking["interest"]["rule"] = [{"for": {"branch": "north"}, "flat": 0.02}]
    with pytest.raises(ValueError, match="branch"):
        value(
            office / "inforce",
            office / "designs",
            office / "bases" / "statutory.toml",
            DATE,
            further_bases={"x": asking},
        )


def test_columns_are_those_of_the_files(office: Path, both: Valuation) -> None:
    extract = pq.read_table(office / "inforce")
    assert not set(both.policies.column_names[3:]) & set(extract.column_names)
