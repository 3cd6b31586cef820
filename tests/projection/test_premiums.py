"""Premiums by equivalence and rate tables: closed forms, the plain twin, rounding, sizes, checks, alterations."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from assumptions.basis import Basis, BasisDocument, prepare_basis
from portfolios.demo_office import write_office
from portfolios.designs import Design
from projection.alteration import alter
from projection.documents import DocumentError, check_document, read_basis, read_designs, read_document
from projection.equivalence import INDEPENDENT, NEGATIVE, NOT_VALUED, solve
from projection.plain import plain_value
from projection.premium_cells import cells_of, policies_of
from projection.premium_document import PremiumDocument, Rounding
from projection.premium_rates import Premiums, premiums, rounded
from projection.settings import Settings
from projection.unrounded import Valuer

pytestmark = pytest.mark.compiled
"""Whole offices: without compilation they take minutes."""

SOLD = date(2026, 12, 1)
A, B, C, INTEREST = 0.0004, 7.6e-6, 1.1185, 0.0275

PREMIUM = {
    "name": "premium", "direction": "in", "amount": "premium_pa", "while": "alive", "to": "term_years",
    "a_year": "premium_frequency",
}  # fmt: skip
DEATH = {"name": "death", "direction": "out", "amount": "sum_assured", "on": "death", "to": "term_years"}
TERM = {"code": "TERM", "stream": [PREMIUM, DEATH]}


def basis(expense: list[dict[str, Any]] | None = None, **rule: Any) -> Basis:
    document = {
        "mortality": {"age": "last birthday", "rule": [{"table": {"law": "Makeham", "A": A, "B": B, "c": C}, **rule}]},
        "interest": {"rule": [{"flat": INTEREST}]},
        "expense": expense or [],
    }
    return prepare_basis(check_document(document, BasisDocument, "basis"))


def table(on: Basis, sold: dict[str, Any] = TERM, **changes: Any) -> Premiums:
    document = {
        "sale_date": SOLD,
        "designs": "",
        "design": sold["code"],
        "basis": "",
        "unknown": "premium_pa",
        "step": "year",
        "policy": {"premium_frequency": 1, "sum_assured": 100_000},
        "grid": {"age": {"from": 20, "to": 60, "step": 5}, "term_years": [10, 20]},
        **changes,
    }
    asked = check_document(document, PremiumDocument, "premium")
    return premiums(asked, [check_document(sold, Design, "design")], on)


def survival(age: float, years: float) -> float:
    """Makeham's survival: exp(-A t - B c^x (c^t - 1) / ln c) (Makeham 1860)."""
    return float(np.exp(-A * years - B * C**age * (C**years - 1) / np.log(C)))


def closed_form(age: float, term: int) -> float:
    """Yearly net premium for 1 at the end of the year of death: sum of v^(t+1) (tp - t+1p) over sum of v^t tp."""
    v = 1 / (1 + INTEREST)
    living = [survival(age, t) for t in range(term + 1)]
    benefit = sum(v ** (t + 1) * (living[t] - living[t + 1]) for t in range(term))
    return benefit / sum(v**t * living[t] for t in range(term))


def test_net_premiums_are_those_of_the_closed_form() -> None:
    found = table(basis()).table.to_pylist()
    assert len(found) == 18
    for row in found:
        expected = 100_000 * closed_form(row["age"], int(row["term_years"]))
        assert row["amount"] == pytest.approx(expected, rel=1e-12)
        assert row["value_of_benefits"] == pytest.approx(row["value_of_premiums"], rel=1e-12)


def test_gross_premiums_cover_expenses_and_net_ones_do_not() -> None:
    """An expense of 10 % of each premium and 30 a year: gross = (net + 30) / 0.9."""
    expense = [
        {"name": "share", "per": "premium", "rule": [{"first_year": 0.1, "later_years": 0.1}]},
        {"name": "upkeep", "per": "policy", "a_year": 1, "rule": [{"first_year": 30, "later_years": 30}]},
    ]
    gross, net = (
        np.array(table(basis(expense), equivalence=way).table.column("amount").to_pylist()) for way in ("gross", "net")
    )
    np.testing.assert_allclose(gross, (net + 30) / 0.9, rtol=1e-12)


def test_the_rate_is_per_unit_of_size_beside_the_fee() -> None:
    """With an expense of 30 a year and a policy fee of 30, the rate does not depend on the size."""
    expense = [{"name": "upkeep", "per": "policy", "a_year": 1, "rule": [{"first_year": 30, "later_years": 30}]}]
    bands = [{"from": 0, "at": 20_000}, {"from": 50_000, "at": 200_000}]
    size = {"column": "sum_assured", "per": 1000, "band": bands}
    found = table(basis(expense), policy={"premium_frequency": 1}, size=size, policy_fee=30, rounding={"to": 0.01})
    rows = found.table.to_pylist()
    assert found.shape == (9, 2, 2)
    for small, large in zip(rows[::2], rows[1::2], strict=True):
        assert (small["size_from"], small["size_at"]) == (0, 20_000)
        assert small["rate_unrounded"] == pytest.approx(large["rate_unrounded"], rel=1e-10)
        expected = 1000 * closed_form(small["age"], int(small["term_years"]))
        assert small["rate_unrounded"] == pytest.approx(expected, rel=1e-10)
        assert 0 <= small["rate"] - small["rate_unrounded"] < 0.01
        assert small["charged"] == pytest.approx(20 * small["rate"] + 30, rel=1e-14)


@pytest.mark.parametrize(
    ("way", "expected"),
    [("up", [1.25, 1.3, 1.3, -1.2]), ("down", [1.25, 1.25, 1.25, -1.25]), ("nearest", [1.25, 1.25, 1.3, -1.2])],
)
def test_rounding(way: Any, expected: list[float]) -> None:
    """1.25 within 1e-9 of a multiple stays one; half a step goes to the even multiple."""
    rates = np.array([1.25 + 1e-11, 1.26, 1.2751, -1.22])
    assert rounded(rates, Rounding(to=0.05, way=way)).tolist() == expected
    assert rounded(np.array([0.125, 0.375]), Rounding(to=0.25, way="nearest")).tolist() == [0.0, 0.5]


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, 400, 7)
    return place


UNKNOWNS = ("premium_pa", "sum_assured", "annuity_pa")


@pytest.mark.parametrize("unknown", UNKNOWNS)
def test_the_plain_twin_finds_the_target_met(office: Path, unknown: str) -> None:
    """Any amount of any design of the invented office, solved for so that the reserve is 1,000."""
    designs = read_designs(office / "designs")
    on = read_basis(office / "bases" / "statutory.toml")
    using = [design.code for design in designs if unknown in design.columns()]
    policies = pq.read_table(office / "inforce")
    chosen = [row for row in policies.to_pylist() if row["product"] in using][:60]
    policies = pa.Table.from_pylist(chosen, schema=policies.schema)
    settings = Settings(date(2026, 11, 30))
    found = solve(Valuer(policies, designs, on, settings), policies, unknown, 1000.0)
    by_code = {design.code: design for design in designs}
    met = 0
    for row, amount, why in zip(chosen, found.amount.tolist(), found.why, strict=True):
        if why:
            assert why in (NOT_VALUED, NEGATIVE, INDEPENDENT)
            continue
        plain = plain_value({**row, unknown: amount}, by_code[row["product"]], on, settings, payments=False)
        size = plain.benefits + plain.expenses + plain.premiums + 1000
        assert plain.reserve == pytest.approx(1000, abs=1e-10 * size)
        met += 1
    assert met > len(chosen) // 4


def test_why_there_is_no_amount() -> None:
    on = basis()
    policies = pa.table(
        {
            "policy_id": ["fine", "paid up", "unborn", "owed"],
            "product": ["TERM"] * 4,
            "status": ["in force"] * 4,
            "birth_date": [date(1986, 1, 1), date(1986, 1, 1), date(2030, 1, 1), date(1986, 1, 1)],
            "commencement_date": [SOLD] * 4,
            "term_years": [10.0] * 4,
            "premium_years": [10.0, 0.0, 10.0, 10.0],
            "premium_frequency": [1.0] * 4,
            "sum_assured": [1000.0] * 4,
            "premium_pa": [0.0] * 4,
        }
    )
    design = check_document({"code": "TERM", "stream": [{**PREMIUM, "to": "premium_years"}, DEATH]}, Design, "design")
    valuer = Valuer(policies, [design], on, Settings(SOLD, "year", "outstanding"))
    found = solve(valuer, policies, "premium_pa", np.array([0.0, 0.0, 0.0, 1e6]))
    assert found.why == ["", INDEPENDENT, NOT_VALUED, NEGATIVE]
    assert np.isfinite(found.amount).tolist() == [True, False, False, False]
    assert found.exceptions.column("policy_id").to_pylist() == ["unborn"]
    with pytest.raises(DocumentError, match="'annuity_pa' is not an amount of any stream; it has 'premium_pa'"):
        solve(valuer, policies, "annuity_pa")


def test_checks_find_what_is_wrong_and_nothing_else() -> None:
    """Premiums for a term rise with age and, at these ages, with the term; the other way round all steps are wrong."""
    right = table(basis(), checks={"rises_with": ["age", "term_years"], "smooth": 0.5})
    assert right.findings == ()
    wrong = table(basis(), checks={"falls_with": ["age"], "smooth": 0.5})
    assert {one.check for one in wrong.findings} == {"falls with age"}
    assert len(wrong.findings) == 8 * 2
    assert wrong.findings[0].cell == {"age": 25.0, "term_years": 10}
    # Five times the mortality from one age on is a bend in the table at the ages whose terms reach there.
    bent = table(basis(), checks={"smooth": 0.02})
    assert {one.check for one in bent.findings} == {"smooth"}


def test_a_band_whose_edge_is_the_better_bargain_is_found() -> None:
    expense = [{"name": "upkeep", "per": "policy", "a_year": 1, "rule": [{"first_year": 60, "later_years": 60}]}]
    size = {"column": "sum_assured", "band": [{"from": 0, "at": 20_000}, {"from": 50_000, "at": 100_000}]}
    grid = {"age": [40]}
    policy = {"premium_frequency": 1, "term_years": 10}
    found = table(basis(expense), policy=policy, grid=grid, size=size, rounding={"to": 0.01})
    (one,) = found.findings
    below, above = found.rates.tolist()
    assert below > above
    assert f"from {50_000 * above / below:,.2f} up to 50,000.00 of sum_assured" in one.said


def test_cells_are_policies_sold_on_the_day() -> None:
    document = check_document(
        {
            "sale_date": date(2028, 2, 29), "designs": "", "design": "TERM", "basis": "", "unknown": "premium_pa",
            "policy": {"premium_years": {"as": "term_years"}, "deferral_years": {"to_age": 65}, "class": "a"},
            "grid": {"sex": ["F", "M"], "age": {"from": 30, "to": 31, "step": 0.5}, "term_years": [10, 15]},
            "size": {"column": "sum_assured", "band": [{"from": 0, "at": 1}, {"from": 5, "at": 6}]},
        },
        PremiumDocument,
        "premium",
    )  # fmt: skip
    cells = cells_of(document)
    assert cells.num_rows == 2 * 3 * 2 * 2
    policies = policies_of(document, cells).to_pylist()
    first = policies[0]
    # Nobody is born on 29 February 1998; the birthday is the month's last day, so that the age is 30 on the day.
    assert first["birth_date"] == date(1998, 2, 28)
    assert policies[4]["birth_date"] == date(1997, 8, 29)
    assert (first["premium_years"], first["deferral_years"], first["class"]) == (10, 35, "a")
    assert [row["sum_assured"] for row in policies[:2]] == [1, 6]
    assert len({row["policy_id"] for row in policies}) == len(policies)


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"grid": {}}, "no axis"),
        ({"grid": {"age": []}}, "'age' is empty"),
        ({"grid": {"age": [40, 40]}}, "holds a value twice"),
        ({"grid": {"age": {"from": 60, "to": 20}}}, "backwards"),
        ({"grid": {"premium_pa": [1]}}, "'premium_pa' is worked out"),
        ({"policy": {"age": 3}}, "both in grid and in policy"),
        ({"policy_fee": 1.0}, "needs 'size'"),
        ({"checks": {"rises_with": ["sex"]}}, "'sex' in rises_with is no axis"),
        ({"grid": {"age": [40], "sex": ["F"]}, "checks": {"falls_with": ["sex"]}}, "no axis of rising numbers"),
        ({"policy": {"premium_years": {"as": "deferral"}}}, "goes by the axis 'deferral'"),
        ({"size": {"column": "premium_pa", "band": [{"at": 1}]}}, "per unit of itself"),
        ({"size": {"column": "sum_assured", "band": [{"from": 5, "at": 1}]}}, "lies outside it"),
        ({"grid": {"age": {"from": 0, "to": 100, "step": 0.001}, "n": {"from": 0, "to": 100}}}, "cells; at most"),
        ({"grid": {"age": [40.3]}}, "no age in years"),
        ({"grid": {"age": [40, "old"]}}, "mixes numbers and text"),
        ({"design": "NONE"}, "no design has the code 'NONE'"),
        ({"unknown": "annuity_pa"}, "'annuity_pa' is no amount of the design TERM; it has 'premium_pa', 'sum_assured'"),
        ({"size": {"column": "annuity_pa", "band": [{"at": 1}]}}, "'annuity_pa' is no amount of the design"),
        ({"policy": {"premium_frequency": 1}}, "no column 'sum_assured'.*give it in grid or policy"),
    ],
)
def test_what_is_wrong_with_a_document_is_said(changes: dict[str, Any], said: str) -> None:
    with pytest.raises(DocumentError, match=said):
        table(basis(), **changes)


def test_an_alteration_keeps_the_reserve(office: Path) -> None:
    """Longer terms at equal value on the office's basis; the twin finds the reserve unchanged."""
    designs = {design.code: design for design in read_designs(office / "designs")}
    on, settings = read_basis(office / "bases" / "statutory.toml"), Settings(date(2026, 11, 30))
    extract = pq.read_table(office / "inforce")
    rows = [row for row in extract.to_pylist() if row["product"] == "QUAYWARD"][:20]
    policies = pa.Table.from_pylist(rows, schema=extract.schema)
    longer = [row["term_years"] + 5 for row in rows]
    changes = {"term_years": longer, "premium_years": longer}
    found = alter(policies, changes, "premium_pa", list(designs.values()), on, settings, charge=25.0)
    kept = 0
    for row, years, before, amount, why in zip(
        rows, longer, found.before.tolist(), found.solved.amount.tolist(), found.solved.why, strict=True
    ):
        if why:
            continue
        altered = {**row, "term_years": years, "premium_years": years, "premium_pa": amount}
        after = plain_value(altered, designs["QUAYWARD"], on, settings, payments=False)
        assert after.reserve == pytest.approx(before - 25, abs=1e-9 * (after.benefits + 1))
        kept += 1
    assert kept > 10


def test_the_office_s_own_document_has_a_rate_in_every_cell(office: Path) -> None:
    document = read_document(office / "premium.toml", PremiumDocument)
    found = premiums(document, read_designs(office / "designs"), read_basis(office / document.basis))
    assert set(found.table.column("why").to_pylist()) == {""}
    assert np.isfinite(found.rates).all()
