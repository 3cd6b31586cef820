"""Increases by index and by calendar month: closed forms, and what an amount at the valuation date holds already."""

from __future__ import annotations

from datetime import date
from typing import Any

import pyarrow as pa
import pytest
from plain_cases import basis, constant, design, policy, stream, value
from pydantic import ValidationError

import projection
from assumptions.indices import Index
from portfolios.designs import Increase
from projection.documents import DocumentError
from projection.settings import Settings
from projection.sheet import convention_sheet

PRICES = {"name": "prices", "years": {"2027": 0.02, "2028": 0.07, "2029": -0.01}}


def amounts(increase: dict[str, Any], on: date = date(2026, 3, 10), **keys: Any) -> list[float]:
    """What the payments of a certain yearly annuity of 100 for 5 years amount to, those after a valuation date."""
    annuity = stream("annuity", 100.0, certain=True, to=5, increase=increase, **keys)
    cover = stream("cover", 1.0)
    found = value(design(annuity, cover), basis(constant(0.02, last=1.0), index=[PRICES]), on=on, step="month")
    return [payment.amount * payment.relative for payment in found.payments if payment.stream == "annuity"]


# Closed forms: the policy commences on 10 March 2026; its anniversaries fall into 2027, 2028, 2029 and 2030.


def test_an_index_runs_from_year_to_year_within_cap_and_floor() -> None:
    level = 100.0
    assert amounts({"index": "prices"}) == pytest.approx(
        [level, level * 1.02, level * 1.02 * 1.07, level * 1.02 * 1.07 * 0.99, level * 1.02 * 1.07 * 0.99**2]
    )
    assert amounts({"index": "prices", "floor": 0.0, "cap": 0.05}) == pytest.approx(
        [level, level * 1.02, level * 1.02 * 1.05, level * 1.02 * 1.05, level * 1.02 * 1.05]
    )
    assert amounts({"index": "prices", "share": 0.5, "plus": 0.01, "kind": "simple"}) == pytest.approx(
        [100, 102, 106.5, 107, 107.5]
    )


def test_an_amount_at_the_valuation_date_holds_the_increases_so_far() -> None:
    # On 10 March 2028 the second increase is in the amount already; 2029 and 2030 are to come.
    assert amounts({"index": "prices"}, on=date(2028, 3, 10)) == pytest.approx([100, 99, 98.01])
    assert amounts({"index": "prices"}, on=date(2028, 3, 9)) == pytest.approx([107, 105.93, 104.8707])
    fixed = {"rate": 0.03, "amount": "at the valuation date"}
    assert amounts(fixed, on=date(2028, 6, 1)) == pytest.approx([103, 103 * 1.03])
    assert amounts({"rate": 0.03}, on=date(2028, 6, 1)) == pytest.approx([100 * 1.03**3, 100 * 1.03**4])


def test_increases_in_a_calendar_month() -> None:
    # Payments of March, increases of April: the first in April 2026, so that March 2027 is increased once.
    april = {"rate": 0.03, "month": 4}
    assert amounts(april) == pytest.approx([100 * 1.03**n for n in range(5)])
    # In March they hold for the payment of that month, but not in the month of commencement.
    assert amounts({"rate": 0.03, "month": 3}) == pytest.approx([100 * 1.03**n for n in range(5)])
    # The index's rate is that of the increase's year: April 2026 (held from 2027), 2027, 2028.
    assert amounts({"index": "prices", "month": 4})[:4] == pytest.approx([100, 102, 102 * 1.02, 102 * 1.02 * 1.07])
    # On 1 April 2028 the increase of that month is in the amount.
    assert amounts({"index": "prices", "month": 4}, on=date(2028, 4, 1)) == pytest.approx([100, 99])


def test_a_level_index_is_a_yearly_rate() -> None:
    # Identity: an index of 3 % on an amount at commencement, valued at commencement, is an increase of 3 %.
    flat = {"name": "flat", "flat": 0.03}
    by_index, by_rate = (
        value(design(stream("annuity", increase=increase)), basis(constant(0.02, last=1.0), index=[flat])).benefits
        for increase in ({"index": "flat"}, {"rate": 0.03})
    )
    assert by_index == pytest.approx(by_rate, rel=1e-14)


def test_the_convention_sheet_prints_the_indices() -> None:
    settings = Settings(date(2026, 12, 31), "month", "settled")
    sheet = dict(convention_sheet(basis(index=[PRICES, {"name": "wages", "flat": 0.03}]), settings))
    assert "'prices' 2.0000%, 7.0000%, -1.0000% of 2027 to 2029" in sheet["indices"]
    assert sheet["indices"].endswith("'wages' 3.0000%")
    assert "indices" not in dict(convention_sheet(basis(), settings))


def test_a_missing_index_is_named() -> None:
    contract = design(stream("annuity", increase={"index": "wages"}))
    assumed = {"mortality": {"age": "exact", "rule": [{"table": {"law": "de Moivre", "omega": 100}}]}}
    document = {**assumed, "interest": {"rule": [{"flat": 0.0}]}, "index": [PRICES]}
    row = {**policy(), "status": "in force"}
    table = pa.table({name: [figure] for name, figure in row.items()})
    with pytest.raises(DocumentError, match="'wages', which the basis does not hold; it holds 'prices'"):
        projection.value(table, [contract], document, "2026-12-31")


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({}, "one of 'rate' and 'index'"),
        ({"rate": 0.1, "index": "prices"}, "one of 'rate' and 'index'"),
        ({"rate": 0.1, "cap": 0.1}, "takes no 'cap'"),
        ({"index": "prices", "amount": "at its start"}, "past rates are not known"),
        ({"index": "prices", "cap": 0.01, "floor": 0.02}, "floor 0.02 lies above cap 0.01"),
    ],
)
def test_increases_that_make_no_sense(keys: dict[str, Any], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        Increase.model_validate(keys)


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({}, "one of 'flat' and 'years'"),
        ({"years": {"2027": 0.1, "2029": 0.1}}, "consecutive"),
        ({"years": {"27": 0.1}}, "four digits"),
        ({"years": {"2027": 7.0}}, "outside"),
    ],
)
def test_indices_that_make_no_sense(keys: dict[str, Any], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        Index.model_validate({"name": "prices", **keys})
