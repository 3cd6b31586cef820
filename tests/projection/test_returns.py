"""Premiums returned and value protection: closed forms, refusals, and the terms of the invented office's annuities."""

from __future__ import annotations

from datetime import date
from typing import Any

import pyarrow as pa
import pytest
from plain_cases import COMMENCED, MAKEHAM, basis, constant, design, policy, stream, value
from pydantic import ValidationError

import projection
from portfolios.designs import Design

PREMIUM = stream("premium", "premium_pa", direction="in", to=10)


PROTECTED = {"name": "protected", "direction": "out", "amount": 1000.0, "on": "death", "less": "annuity"}


def returning(name: str = "premium", interest: float | str = 0.0, **keys: Any) -> dict[str, Any]:
    made = {"name": "returned", "direction": "out", "returns": {"stream": name, "interest": interest}, **keys}
    return made if "on" in keys else {"while": "alive", "paid": "once", **made}


def by_engine(contract: Design, on: date = COMMENCED, step: Any = "year", **more: Any) -> float:
    """Value of the benefits by the engine; the twin has valued the policy beside it."""
    assumed = {"mortality": {"age": "exact", "rule": [{"table": MAKEHAM}]}}
    document = {**assumed, "interest": {"rule": [{"flat": 0.04}]}, "expense": more.pop("expense", [])}
    row = {**policy(**more), "status": "in force"}
    table = pa.table({name: [figure] for name, figure in row.items()})
    found = projection.value(table, [contract], document, on, step=step, due="outstanding", decimals=4)
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return float(found.policies["value_of_benefits"].to_pylist()[0])


def test_premiums_with_interest_at_the_rate_of_valuation_are_certain_on_death_or_survival() -> None:
    # Closed form: what is paid back with interest i on death within n years or at their end has the value of the
    # premiums: each premium, with survival to its date, is discounted for as long as it accumulates.
    at_end = {**returning(interest=0.04, **{"from": 10}), "name": "end"}
    contract = design(PREMIUM, returning(interest=0.04, on="death", to=10), at_end)
    found = value(contract, basis(constant(0.02)), premium_pa=700.0)
    assert found.benefits == pytest.approx(found.premiums, rel=1e-13)
    assert by_engine(contract, premium_pa=70_000.0) == pytest.approx(
        by_engine(design(stream("premiums", 70_000.0, to=10))), abs=1e-4
    )


def test_yearly_premiums_without_interest_are_an_increasing_insurance() -> None:
    # Closed form: P (IA)1_x:n, premiums 1, 2 ... n on death in the years 1, 2 ... n.
    contract = design(PREMIUM, returning(on="death", to=10))
    q, v = 0.02, 1 / 1.04
    expected = sum(100 * (k + 1) * v ** (k + 1) * (1 - q) ** k * q for k in range(10))
    assert value(contract, basis(constant(q)), premium_pa=100.0).benefits == pytest.approx(expected, rel=1e-13)


def test_monthly_premiums_due_at_the_start_of_the_month_of_death_count() -> None:
    # Closed form: in month n of 24 the n premiums of the months so far, of 10 each.
    premium = stream("premium", 120.0, direction="in", to=2, a_year=12)
    assumed = basis(constant(0.02))
    found = value(design(premium, returning(on="death", to=2, share=0.9)), assumed, step="month")
    stay, v = 0.98 ** (1 / 12), 1.04 ** (-1 / 12)
    expected = sum(0.9 * 10 * n * v**n * stay ** (n - 1) * (1 - stay) for n in range(1, 25))
    assert found.benefits == pytest.approx(expected, rel=1e-13)


def test_paid_once_counts_premiums_before_and_arrears_up_to_its_date() -> None:
    # Closed form: at 5 years, premiums in advance at 0 ... 4 and in arrears at 1 ... 5; interest to then.
    for paid, points in (("advance", range(5)), ("arrears", range(1, 6))):
        premium = stream("premium", 1000.0, direction="in", to=10, paid=paid)
        for step in ("year", "month"):
            found = by_engine(design(premium, returning(interest=0.03, **{"from": 5})), step=step)
            alive = by_engine(design(stream("one", 1.0e4, paid="once", start=5)), step=step) / 1e4
            expected = alive * sum(1000 * 1.03 ** (5 - point) for point in points)
            assert found == pytest.approx(expected, abs=0.02)  # the probability is known to 1e-8 from a rounded value


def test_single_premium_and_increasing_premiums() -> None:
    # Closed form: the sum of a geometric series, 3 % more each year, beside a single premium.
    single = stream("single", 500.0, direction="in", paid="once")
    contract = design(single, returning("single", on="death", to=3))
    q, v = 0.02, 1 / 1.04
    lives = [v ** (k + 1) * (1 - q) ** k * q for k in range(3)]
    assert value(contract, basis(constant(q))).benefits == pytest.approx(500 * sum(lives), rel=1e-13)
    rising = stream("premium", 100.0, direction="in", to=3, increase={"rate": 0.03})
    paid = [100 * (1.03 ** (k + 1) - 1) / 0.03 for k in range(3)]
    found = value(design(rising, returning(on="death", to=3)), basis(constant(q)))
    assert found.benefits == pytest.approx(sum(a * b for a, b in zip(paid, lives, strict=True)), rel=1e-13)


def test_value_protection_is_the_price_less_instalments_until_they_reach_it() -> None:
    # Closed form: price 1000, instalments of 300 at 0, 1, 2 ...: on death in the years 1 to 3, 700, 400, 100.
    annuity = stream("annuity", 300.0)
    protected = PROTECTED
    q, v = 0.02, 1 / 1.04
    expected = sum(left * v ** (k + 1) * (1 - q) ** k * q for k, left in enumerate((700, 400, 100)))
    assumed = basis(constant(q, last=1.0))
    found = value(design(annuity, protected), assumed)
    mine = sum(payment.value for payment in found.payments if payment.stream == "protected")
    assert mine == pytest.approx(expected, rel=1e-13)
    half = value(design(annuity, {**protected, "share": 0.5}), assumed)
    mine = sum(payment.value for payment in half.payments if payment.stream == "protected")
    assert mine == pytest.approx(200 * v * q, rel=1e-13)  # 500 less 300; the second instalment reaches it


def test_a_claim_costs_once_and_only_while_there_is_something_to_pay() -> None:
    # Closed form: instalments of 300 reach 500 in the second year; one claim of 25 in the first.
    streams = stream("annuity", 300.0), {**PROTECTED, "amount": 500.0}
    item = {"name": "claims", "per": "claim", "rule": [{"first_year": 25.0, "later_years": 40.0}]}
    found = value(design(*streams), basis(constant(0.02, last=1.0), expense=[item]))
    assert found.expenses == pytest.approx(25 * 0.02 / 1.04, rel=1e-13)
    assert by_engine(design(*streams), expense=[item]) == pytest.approx(by_engine(design(*streams)), abs=1e-4)


def test_a_later_valuation_counts_what_was_paid_before() -> None:
    # Closed form: on death in the third year, 3 premiums; valued after two years.
    contract = design(PREMIUM, returning(on="death", to=3))
    found = value(contract, basis(constant(0.02)), on=date(2028, 3, 10), premium_pa=100.0)
    assert found.benefits == pytest.approx(300 * 0.02 / 1.04, rel=1e-13)


TWO = {"code": "PIER", "states": "two lives"}
PENSION = {"name": "annuity", "direction": "out", "amount": "annuity_pa", "paid": "arrears", "a_year": 12}
PRICE = {"name": "protected", "direction": "out", "amount": "single_premium", "less": "annuity"}


def test_protection_after_the_second_death_needs_instalments_that_never_fall() -> None:
    level = [{**PENSION, "while": "either"}, {**PRICE, "on": "second death"}]
    assert Design.model_validate({**TWO, "stream": level}).named("protected").less == "annuity"
    falling = [{**PENSION, "while": "first"}, {**PRICE, "on": "second death"}]
    with pytest.raises(ValidationError, match="need not have been paid all the time"):
        Design.model_validate({**TWO, "stream": falling})
    assert Design.model_validate({**TWO, "stream": [falling[0], {**PRICE, "on": "death of first"}]})


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({"on": "death", "returns": {"stream": "premiums"}}, "looks back at 'premiums', which is not there"),
        ({"on": "death", "returns": {"stream": "back"}}, "must be a stream with terms of its own"),
        ({"on": "death", "returns": {"stream": "premium"}, "amount": 5.0}, "takes no 'amount'"),
        ({"on": "death", "returns": {"stream": "premium"}, "increase": {"rate": 0.1}}, "takes no 'increase'"),
        ({"on": "death", "returns": {"stream": "premium", "interest": 2.0}}, "outside -0.5 to 1"),
        ({"while": "alive", "returns": {"stream": "premium"}}, "needs a stream paid on a move or once"),
        (
            {"on": "death", "less": "premium", "amount": 5.0, "returns": {"stream": "premium"}},
            "one of 'returns' and 'less'",
        ),
        ({"on": "death", "less": "premium"}, "needs 'direction' and 'amount'"),
    ],
)
def test_what_makes_no_sense_is_refused(keys: dict[str, Any], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        design(PREMIUM, {"name": "back", "direction": "out", **keys})


def test_the_proportion_of_an_instalment_up_to_the_date_of_death() -> None:
    # Closed form: quarterly instalments of 30 in arrears; deaths in the first, second and third month of a quarter get
    # a sixth, a half and five sixths of one.
    annuity = stream("annuity", 120.0, paid="arrears", a_year=4, to=5)
    part = {"name": "to death", "direction": "out", "on": "death", "to": 5, "proportion": "annuity"}
    found = value(design(annuity, part), basis(constant(0.02)), step="month")
    mine = [payment for payment in found.payments if payment.stream == "to death"]
    assert [one.amount * one.relative for one in mine if one.survival > 0][:4] == pytest.approx([5, 15, 25, 5])
    stay, v = 0.98 ** (1 / 12), 1.04 ** (-1 / 12)
    parts = [5 + 10 * (n % 3) for n in range(60)]
    expected = sum(part * v ** (n + 1) * stay**n * (1 - stay) for n, part in enumerate(parts))
    assert sum(one.value for one in mine) == pytest.approx(expected, rel=1e-13)
    assert by_engine(design(annuity, part), step="month") > 0  # the twin has valued it beside the engine


def test_the_proportion_of_a_yearly_instalment_with_yearly_steps_is_a_half() -> None:
    # Closed form: the mean over the year of death.
    annuity = stream("annuity", 100.0, paid="arrears", to=5)
    part = {"name": "to death", "direction": "out", "on": "death", "to": 5, "proportion": "annuity"}
    found = value(design(annuity, part), basis(constant(0.02)))
    expected = sum(50 * 1.04 ** -(k + 1) * 0.98**k * 0.02 for k in range(5))
    assert sum(one.value for one in found.payments if one.stream == "to death") == pytest.approx(expected, rel=1e-13)


def test_a_proportion_needs_arrears_and_a_death() -> None:
    part = {"name": "to death", "direction": "out", "proportion": "premium"}
    with pytest.raises(ValidationError, match="not paid in arrears"):
        design(PREMIUM, {**part, "on": "death"})
    with pytest.raises(ValidationError, match="paid on a death"):
        design(PREMIUM, {**part, "on": "lapse"})
