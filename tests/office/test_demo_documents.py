"""The documents of the demo office: they read without a fault, and their tables are what they say."""

from __future__ import annotations

import csv
from datetime import date
from pathlib import Path

import pytest

import portfolios.demo_office
from assumptions.laws import Law, SelectFactor
from assumptions.tables import read_curve, read_lapse, read_rates
from portfolios.demo_products import PRODUCTS
from projection.documents import read_basis, read_designs, read_run

OFFICE = Path(portfolios.demo_office.__file__).with_name("office")
BASES = ("statutory", "best_estimate")
SELECT = SelectFactor(factor=0.8, years=2)
ASSURED = {
    "assured_f": Law(law="Makeham", A=0.0003, B=3.81e-6, c=1.1247, last_age=119, select=SELECT),
    "assured_m": Law(law="Makeham", A=0.0004, B=7.6e-6, c=1.1185, last_age=119, select=SELECT),
}
ANNUITANTS = {
    "Annuitant women": Law(law="Makeham", A=0.00015, B=2.02e-6, c=1.1281, last_age=119),
    "Annuitant men": Law(law="Makeham", A=0.0002, B=3.59e-6, c=1.1245, last_age=119),
}
# Half a unit of the last digit that the tables are written with.
HALF_A_DIGIT = 0.5e-7 + 1e-15


def test_every_design_reads_and_every_product_has_one() -> None:
    designs = read_designs(OFFICE / "designs")
    assert {design.code for design in designs} == {product.code for product in PRODUCTS}
    for design in designs:
        assert design.title
        assert "invented" in design.reference
        assert design.effective is not None


@pytest.mark.parametrize("name", BASES)
def test_every_basis_reads(name: str) -> None:
    basis = read_basis(OFFICE / "bases" / f"{name}.toml")
    assert "invented" in basis.title
    assert "invented" in basis.document.reference
    assert all(rates.closed for rates in basis.rates)


@pytest.mark.parametrize(("name", "basis"), [("month-end", "statutory"), ("month-end-best-estimate", "best_estimate")])
def test_every_run_document_reads(name: str, basis: str) -> None:
    run = read_run(OFFICE / f"{name}.toml")
    assert run.valuation_date == date(2026, 11, 30)
    assert (OFFICE / run.basis).stem == basis
    assert (OFFICE / run.designs).is_dir()
    assert "invented" in run.title


@pytest.mark.parametrize("name", ASSURED)
def test_tables_of_the_assured_come_from_their_law(name: str) -> None:
    law = ASSURED[name]
    table = read_rates(OFFICE / "tables" / f"{name}.csv", select_by="entry age")
    assert (table.first_age, table.final_age, table.closed) == (16, 120, True)
    for age in range(18, 118):
        for duration in (0, 1, 2):
            wanted = law.rate(age, duration)
            assert table.rate(age, duration) == pytest.approx(wanted, abs=HALF_A_DIGIT, rel=0)


@pytest.mark.parametrize("name", ANNUITANTS)
def test_tables_of_annuitants_come_from_their_law(name: str) -> None:
    table = read_rates(OFFICE / "tables" / "annuitants.xml", table=name)
    for age in range(16, 120):
        assert table.rate(age, 0) == pytest.approx(ANNUITANTS[name].rate(age, 0), abs=HALF_A_DIGIT, rel=0)


def test_lives_expect_a_plausible_age_and_annuitants_a_higher_one() -> None:
    assured = {name[-1]: _expected_age(law) for name, law in ASSURED.items()}
    annuitants = {"f": "Annuitant women", "m": "Annuitant men"}
    for sex, title in annuitants.items():
        assert 78 < assured[sex] < _expected_age(ANNUITANTS[title]) < 90
    assert assured["f"] > assured["m"]


def _expected_age(law: Law) -> float:
    living, years = 1.0, 0.0
    for age in range(law.final_age):
        rate = law.rate(age, 2) if age < 2 else law.rate(age - 2, 2)
        years += living * (1 - rate / 2)
        living *= 1 - rate
    return years


def test_curve_and_lapses_read() -> None:
    curve = read_curve(OFFICE / "tables" / "spot_november_2026.csv")
    assert all(0.02 < rate < 0.03 for rate in curve.values())
    lapses = read_lapse(OFFICE / "tables" / "lapses_term.csv")
    assert lapses == sorted(lapses, reverse=True)


def test_every_table_is_named_by_a_basis() -> None:
    named = {Path(name).name for basis in BASES for name in read_basis(OFFICE / "bases" / f"{basis}.toml").files}
    assert named == {path.name for path in (OFFICE / "tables").iterdir()}


def test_the_csv_tables_are_plain() -> None:
    with (OFFICE / "tables" / "assured_f.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == ["age", "select_0", "select_1", "ultimate"]
    assert [int(row["age"]) for row in rows] == list(range(16, 120))
