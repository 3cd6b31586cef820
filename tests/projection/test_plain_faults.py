"""Policies that the plain twin refuses to value, each with its reason and field."""

from __future__ import annotations

from datetime import date
from typing import Any

import pytest
from plain_cases import COMMENCED, Listed, basis, constant, design, stream, value

from projection.plain import NotValued

LATER = date(2026, 11, 30)
TERM = stream("death", "sum_assured", on="death", to="term_years")
GOOD: dict[str, Any] = {"term_years": 10.0, "sum_assured": 1000.0}


def refused(reason: str, contract: Any = None, assumed: Any = None, **asked: Any) -> NotValued:
    with pytest.raises(NotValued) as caught:
        value(contract or design(TERM), assumed or basis(), **{"on": LATER, "step": "month", **GOOD, **asked})
    assert caught.value.reason == reason
    assert reason in str(caught.value)
    return caught.value


@pytest.mark.parametrize(
    ("reason", "field", "columns"),
    [
        ("date missing", "birth_date", {"birth_date": None}),
        ("date missing", "commencement_date", {"commencement_date": None}),
        ("commences after the valuation date", "commencement_date", {"commencement_date": date(2027, 1, 1)}),
        ("commenced before birth", "birth_date", {"birth_date": date(2026, 5, 1)}),
        ("value missing", "sum_assured", {"sum_assured": None}),
        ("value missing", "sum_assured", {"sum_assured": float("nan")}),
        ("value missing", "sum_assured", {"sum_assured": "1000"}),
        ("amount negative", "sum_assured", {"sum_assured": -1.0}),
        ("value missing", "term_years", {"term_years": None}),
        ("duration not in whole months", "term_years", {"term_years": 10.01}),
        ("duration not in whole months", "term_years", {"term_years": -1.0}),
        ("matured", "product PIER", {"commencement_date": date(2001, 1, 1)}),
    ],
)
def test_policy(reason: str, field: str, columns: dict[str, Any]) -> None:
    assert refused(reason, **columns).field == field


def test_whole_years_on_a_move_with_yearly_steps() -> None:
    assert refused("duration not in whole years", step="year", term_years=9.5).value == 9.5
    value(design(TERM), basis(), LATER, "month", **{**GOOD, "term_years": 9.5})


def test_ends_and_periods() -> None:
    refused("end before start", design(stream("a", start=5, to="term_years")), term_years=4.0)
    refused(
        "duration not in whole periods",
        design(stream("a", a_year=4, to="term_years")),
        term_years=1.5 + 1 / 12,
    )
    # An age seldom lies a whole number of periods ahead.
    by_age = value(design(stream("a", a_year=1, to={"age": 41})), basis(), birth_date=date(1986, 1, 1))
    assert [payment.point for payment in by_age.payments] == [0]
    assert value(design(stream("a", to="term_years")), basis(), term_years=0.0).reserve == 0


@pytest.mark.parametrize("a_year", [3.0, 0.0])
def test_frequency(a_year: float) -> None:
    contract = design(stream("a", a_year="annuity_frequency", to=10))
    assert refused("frequency not 1 2 4 12", contract, annuity_frequency=a_year).value == a_year


@pytest.mark.parametrize("part", ["mortality", "lapse", "interest", "expense"])
def test_no_rule_fits(part: str) -> None:
    only = {"for": {"sex": "F"}}
    rules: dict[str, dict[str, Any]] = {
        "mortality": {"mortality_rule": only},
        "lapse": {"lapse": {"rule": [{"rates": [0.1], **only}]}},
        "interest": {"interest": {"rule": [{"flat": 0.03, **only}]}},
        "expense": {
            "expense": [{"name": "care", "per": "policy", "rule": [{"first_year": 1, "later_years": 1, **only}]}]
        },
    }
    assumed = basis(**rules[part])
    assert part in refused("no rule fits", assumed=assumed, sex="M").field
    value(design(TERM), assumed, LATER, "month", **{**GOOD, "sex": "F"})


def test_ages() -> None:
    refused(
        "age outside the tables",
        assumed=basis(constant(0.1), age="last birthday"),
        birth_date=date(2010, 1, 1),
    )
    select = Listed((0.1,) * 60, 20, select_years=2)
    refused("age not whole", assumed=basis(select), birth_date=date(1986, 1, 1))


def test_a_table_that_ends_before_the_contract() -> None:
    short = Listed((0.1,) * 10, 40)
    assert value(design(TERM), basis(short), **GOOD).reserve > 0
    assert refused("table ends too early", assumed=basis(short), term_years=11.0).value == 50
    refused("table ends too early", design(stream("annuity")), basis(short))
    # The last payment falls before the table's end, but the stream runs beyond it.
    refused("table ends too early", design(stream("annuity", to=11, a_year=1)), basis(short))
    # What is paid for certain asks no table.
    value(design(stream("certain", certain=True, to=50)), basis(short))
    # A closed one leaves nobody to pay.
    closed = basis(short, mortality_rule={"close": True})
    assert value(design(stream("annuity", to=30)), closed).payments[-1].survival == 0


def test_nobody_left() -> None:
    closed = basis(Listed((0.1, 1.0), 39), age="last birthday")
    refused("nobody alive at the valuation date", assumed=closed)
    all_lapse = basis(lapse={"rule": [{"rates": [1.0]}]})
    refused("nobody in force at the valuation date", assumed=all_lapse)
    assert value(design(TERM), all_lapse, COMMENCED, "month", **GOOD).reserve > 0


def test_dependent_rates_at_anniversaries_contradict_monthly_steps() -> None:
    lapse = {"timing": "anniversaries", "competing": "dependent rates", "rule": [{"rates": [0.1]}]}
    with pytest.raises(ValueError, match="dependent rates need"):
        value(design(TERM), basis(lapse=lapse), LATER, "month", **GOOD)
    assert value(design(TERM), basis(lapse=lapse), LATER, "year", **GOOD).reserve > 0
