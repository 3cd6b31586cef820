"""Inflation as one rate, as rates from a date and by calendar year: levels by hand, and documents that are wrong."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

import projection
from assumptions.basis import BasisDocument, prepare_basis
from assumptions.inflation import Inflation, Prices, read_prices
from assumptions.rate_table import TableError
from projection.documents import DocumentError, read_basis

FROM = date(2026, 4, 30)


def prices(folder: Path = Path(), **keys: Any) -> Prices:
    """The level of prices of an inflation from April 2026."""
    return read_prices(Inflation.model_validate({"from": FROM, **keys}), folder)


def test_rates_by_years_from_the_date() -> None:
    made = prices(rates=[0.05, 0.03, 0.02])
    assert made.level(0) == 1
    assert made.level(12) == pytest.approx(1.05)
    assert made.level(18) == pytest.approx(1.05 * 1.03**0.5)
    assert made.level(60) == pytest.approx(1.05 * 1.03 * 1.02**3)  # the last rate is held
    assert made.level(-6) == pytest.approx(1.05**-0.5)  # and so is the first, back in time


def test_rates_by_calendar_year(tmp_path: Path) -> None:
    (tmp_path / "table.csv").write_text("year,rate\n2026,0.06\n2027,0.03\n")
    made = prices(tmp_path, table="table.csv")
    # From April to January, nine months at the rate of 2026; then a year of 2027, whose rate is held.
    assert made.level(9) == pytest.approx(1.06 ** (9 / 12))
    assert made.level(10) == pytest.approx(1.06 ** (9 / 12) * 1.03 ** (1 / 12))
    assert made.level(9 + 24) == pytest.approx(1.06 ** (9 / 12) * 1.03**2)
    assert made.level(-16) == pytest.approx(1.06 ** (-16 / 12))


@given(
    rates=st.lists(st.floats(-0.2, 0.3), min_size=1, max_size=5), month=st.integers(1, 12),
    first_year=st.none() | st.integers(2020, 2030), months=st.lists(st.integers(-40, 400), min_size=1, max_size=20),
)  # fmt: skip
def test_one_by_one_and_all_at_once(rates: list[float], month: int, first_year: int | None, months: list[int]) -> None:
    made = Prices(tuple(rates), 2026, month, first_year)
    assert made.levels(np.array(months)) == pytest.approx([made.level(n) for n in months], rel=1e-12)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("year,rate\n2026,0.03\n2028,0.03\n", "year 2028; calendar years go one by one"),
        ("year,rate\n2026,3\n", "rate 3 must lie above -0.5, up to 1; 3 % is 0.03"),
        ("year,rate\n1,0.03\n2,0.02\n", "within 1900 to 2200"),
        ("year,growth\n2026,0.03\n", "no column 'rate'"),
    ],
)
def test_wrong_tables(tmp_path: Path, text: str, said: str) -> None:
    (tmp_path / "table.csv").write_text(text)
    with pytest.raises(TableError, match=said):
        prices(tmp_path, table="table.csv")


@pytest.mark.parametrize(
    "keys",
    [{}, {"rate": 0.02, "rates": [0.02]}, {"rates": []}, {"rates": [0.02, 2.0]}, {"rate": 0.02, "table": "a.csv"}],
)
def test_wrong_documents(keys: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        prices(**keys)


BASIS = """
title = "Invented"
[mortality]
rule = [{ table = { law = "de Moivre", omega = 110 } }]
[interest]
rule = [{ flat = 0.0 }]
[[expense]]
name = "administration"
per = "policy"
a_year = 1
inflation = INFLATION
rule = [{ first_year = 0.0, later_years = 100.0 }]
"""


@pytest.mark.parametrize(
    ("inflation", "said"),
    [
        ('"prices"', "key 'inflation' is 'prices', but the basis has none; add [[inflation]]"),
        ("{ rates = [0.03, 7.0], from = 2026-01-01 }", "the rate 7 must lie above -0.5, up to 1"),
        ("{ from = 2026-01-01 }", "inflation needs one of 'rate', 'rates' and 'table'"),
        ('{ table = "nowhere.csv", from = 2026-01-01 }', "nowhere.csv"),
        ("{ rates = 0.03, from = 2026-01-01 }", "key 'rates' is 0.03"),
    ],
)
def test_errors_name_file_and_place(tmp_path: Path, inflation: str, said: str) -> None:
    path = tmp_path / "basis.toml"
    path.write_text(BASIS.replace("INFLATION", inflation))
    with pytest.raises(DocumentError) as caught:
        read_basis(path)
    assert "basis.toml" in str(caught.value)
    assert said in str(caught.value)


def reserve(growth: Any, **more: Any) -> float:
    """Value of 100 at each anniversary from the first to the fourth, on a life that can hardly die, at no interest."""
    law = {"law": "Makeham", "A": 1e-12, "B": 1e-300, "c": 1.05, "last_age": 119}
    expense = {"name": "e", "per": "policy", "a_year": 1, "rule": [{"first_year": 0.0, "later_years": 1e6}]}
    basis = {
        "mortality": {"rule": [{"table": law}]}, "interest": {"rule": [{"flat": 0.0}]},
        "expense": [{**expense, "inflation": growth}], **more,
    }  # fmt: skip
    stream = {"name": "s", "direction": "out", "amount": 1.0, "while": "alive", "to": 5, "a_year": 1}
    row = {
        "policy_id": "Q1", "product": "P", "status": "in force", "birth_date": date(1990, 1, 1),
        "commencement_date": date(2026, 1, 1),
    }  # fmt: skip
    table = pa.Table.from_pylist([row])
    found = projection.value(table, [{"code": "P", "stream": [stream]}], basis, date(2026, 1, 1), sample=1)
    assert found.outcome.sample.policies == 1
    return float(found.policies["value_of_expenses"][0].as_py()) / 1e6


def test_expenses_grow_along_the_curve() -> None:
    growth = {"rates": [0.05, 0.03, 0.02], "from": date(2026, 1, 1)}
    expected = 1.05 * (1 + 1.03 * (1 + 1.02 * (1 + 1.02)))
    assert reserve(growth) == pytest.approx(expected, abs=1e-7)
    assert reserve("prices", inflation=[{"name": "prices", **growth}]) == pytest.approx(expected, abs=1e-7)
    flat = {"rate": 0.03, "from": date(2026, 1, 1)}
    assert reserve({"rates": [0.03], "from": date(2026, 1, 1)}) == reserve(flat)


def test_the_digest_knows_the_table(tmp_path: Path) -> None:
    def digest(rate: float) -> str:
        (tmp_path / "table.csv").write_text(f"year,rate\n2026,{rate}\n")
        named = {"name": "prices", "table": "table.csv", "from": FROM}
        document = {
            "mortality": {"rule": [{"table": {"law": "de Moivre", "omega": 110}}]},
            "interest": {"rule": [{"flat": 0.02}]}, "inflation": [named],
        }  # fmt: skip
        return prepare_basis(BasisDocument.model_validate(document), tmp_path).digest

    assert digest(0.02) != digest(0.03)


def index_linked(commenced: date, on: date, start: float, clock: str, growth: dict[str, Any]) -> list[float]:
    """Cash flows by year of an annuity of 1,000,000 a year that follows an index, from the valuation date."""
    law = {"law": "Makeham", "A": 1e-12, "B": 1e-300, "c": 1.05, "last_age": 119}
    basis = {
        "mortality": {"rule": [{"table": law}]}, "interest": {"rule": [{"flat": 0.0}]},
        "inflation": [{"name": "prices", **growth}],
    }  # fmt: skip
    stream = {
        "name": "annuity", "direction": "out", "amount": 1e6, "while": "alive", "from": start, "to": start + 5,
        "a_year": 1, "increase": {"index": "prices"}, "clock": clock,
    }  # fmt: skip
    row = {
        "policy_id": "Q1", "product": "P", "status": "in force", "birth_date": date(1990, 1, 1),
        "commencement_date": commenced,
    }  # fmt: skip
    found = projection.value(pa.Table.from_pylist([row]), [{"code": "P", "stream": [stream]}], basis, on, sample=1)
    assert found.outcome.sample.policies == 1
    return [round(flow["amount"] / 1e6, 6) for flow in found.cash_flows.to_pylist()]


def test_benefits_follow_an_index_on_their_anniversaries() -> None:
    growth = {"rates": [0.05, 0.03], "from": date(2026, 11, 30)}
    # In payment since March 2025; the amount is the one paid since March 2026, so that the rise of March 2027 covers a
    # whole year: eight months at the first rate, held back in time, and four at it; the next ones eight and four.
    level = [1.05, 1.05 * 1.05 ** (8 / 12) * 1.03 ** (4 / 12)]
    level.append(level[-1] * 1.03)
    found = index_linked(date(2025, 3, 15), date(2026, 11, 30), 0, "stream", growth)
    assert found == pytest.approx(level, abs=1e-6)
    # Deferred: from its start on by the clock of the stream, or also before by that of commencement.
    stream = index_linked(date(2025, 3, 15), date(2026, 11, 30), 3, "stream", growth)
    # March 2028 to March 2029 lies wholly in the second year from the date and later.
    assert stream == pytest.approx([1.03**n for n in range(5)], abs=1e-6)
    commencement = index_linked(date(2025, 3, 15), date(2026, 11, 30), 3, "commencement", growth)
    assert commencement[0] == pytest.approx(level[1], abs=1e-6)
    assert commencement[1] / commencement[0] == pytest.approx(1.03, abs=1e-6)


def test_an_index_at_one_rate_is_an_increase_at_that_rate() -> None:
    growth = {"rate": 0.03, "from": date(2020, 1, 1)}
    found = index_linked(date(2026, 1, 1), date(2026, 1, 1), 0, "stream", growth)
    assert found == pytest.approx([1.03, 1.03**2, 1.03**3, 1.03**4], abs=1e-6)


def test_an_index_that_the_basis_lacks() -> None:
    basis = {"title": "Invented", "mortality": {"rule": [{"table": {"law": "de Moivre", "omega": 110}}]},
             "interest": {"rule": [{"flat": 0.0}]}}  # fmt: skip
    stream = {"name": "annuity", "direction": "out", "amount": 1.0, "while": "alive", "increase": {"index": "prices"}}
    row = {"policy_id": "Q1", "product": "P", "status": "in force", "birth_date": date(1990, 1, 1),
           "commencement_date": date(2026, 1, 1)}  # fmt: skip
    with pytest.raises(DocumentError, match="design P, stream 'annuity', increase: key 'index' is 'prices'"):
        projection.value(
            pa.Table.from_pylist([row]), [{"code": "P", "stream": [stream]}], basis, date(2026, 1, 1), sample=1
        )
