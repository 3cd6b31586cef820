"""Payments several times a year, and contracts on two lives.

Multiple choice: the option nearest to the value must be the key.
"""

from __future__ import annotations

from typing import Any

import pytest
from contracts import ILLUSTRATIVE as ILT
from contracts import STANDARD, annuity, insurance, nearest_is_key, once, premium, printed, refund, value

SIX = 0.06
MONTHLY = {"a_year": 12}
UDD = {"fractions": "uniform deaths"}


def test_b08_deferred_monthly_annuity_by_woolhouse() -> None:
    payments = annuity(10, 70, 12_000, **MONTHLY, payments="Woolhouse 2")
    outgo = value([payments, annuity(amount=300)], STANDARD, 0.05, 55)
    # Printed from factors of 4 places: 12,000 x 0.59342 x 0.00005 and more.
    assert outgo == pytest.approx(printed("B08")["EPV_ben_exp"], abs=1.0)
    due = value([annuity(0, 10)], STANDARD, 0.05, 55)
    assert due == pytest.approx(printed("B08")["adue_55:10"], abs=0.00005)
    assert nearest_is_key("B08", (outgo + 800) / due, "G")


@pytest.mark.parametrize(("terms", "figure", "tolerance"), [(2, 13.091457, 5e-7), (3, 13.086955, 2e-4)])
def test_b08_monthly_annuity_by_woolhouse(terms: int, figure: float, tolerance: float) -> None:
    # Recomputed by those who collected the cases, not printed in the source. The third term is theirs from the
    # law's force at 65, ours from the rates of the first year.
    streams = [annuity(0, 80, **MONTHLY, payments=f"Woolhouse {terms}")]
    assert value(streams, STANDARD, 0.05, 65) == pytest.approx(figure, abs=tolerance)


def test_b30_benefit_at_the_moment_of_death_and_quarterly_premiums() -> None:
    # Paid in the middle of the month of death, which comes within 0.001 % of the moment of death.
    benefit, when = insurance(amount=1000), {"claims": "middle of step", "step": "month", **UDD}
    level = value([benefit], ILT, SIX, 35, **when) / value([annuity(a_year=4)], ILT, SIX, 35, **when)
    held = value([benefit, premium(amount=level, a_year=4)], ILT, SIX, 35, passed=15, **when)
    assert nearest_is_key("B30", held, "15V")


def test_b58_monthly_annuity_with_uniform_deaths() -> None:
    assert nearest_is_key("B58", value([annuity(0, 20, **MONTHLY)], ILT, SIX, 35, **UDD), "a")


def test_b60_deferred_stepped_annuity_with_refund() -> None:
    pattern = [{"years": 15, "share": 1.0}, {"share": 3.0}]
    paid = value([annuity(10, amount=12_000, pattern=pattern, **MONTHLY)], ILT, SIX, 37, **UDD)
    single = {**once(0), "name": "single", "direction": "in"}
    income = -value([single, refund("single", 10, share=0.8)], ILT, SIX, 37, **UDD)
    assert nearest_is_key("B60", paid / income, "NSP")


def test_b62_stepped_annuity_by_woolhouse() -> None:
    pattern = [{"years": 10, "share": 1.0}, {"share": 3.0}]
    stream = annuity(0, 80, 1200, pattern=pattern, payments="Woolhouse 2", **MONTHLY)
    assert nearest_is_key("B62", value([stream], ILT, SIX, 55), "EPV")


# Two lives


def test_b15_joint_life_annuity() -> None:
    stream = {**annuity(0, 10, paid="arrears"), "while": "both"}
    assert nearest_is_key("B15", value([stream], ILT, SIX, 30, other_age=40), "a")


def test_b64_premium_after_the_first_death_with_common_shock() -> None:
    # Forces of 0.05 and 0.07, of which the shock is 0.02. Premiums are paid continuously: half
    # in advance and half in arrears of each month; the benefit falls in the middle of the month of death.
    rules: list[dict[str, Any]] = [
        {"for": {"life": life}, "table": {"law": "Makeham", "A": force, "B": 1e-300, "c": 1.05, "last_age": 150}}
        for life, force in (("first", 0.05), ("second", 0.07))
    ]
    interest = {"flat": 0.0618365465}  # e^0.06 - 1
    more: dict[str, Any] = {"other_age": 20, "step": "month", "common_shock": 0.02, "claims": "middle of step"}
    benefit = {**insurance(amount=100_000), "on": "second death"}
    paid = [
        {**annuity(amount=0.5, paid=when, **MONTHLY), "while": word}
        for when in ("advance", "arrears")
        for word in ("first only", "second only")
    ]
    found = value([benefit], rules, interest, 20, **more) / value(paid, rules, interest, 20, **more)
    assert nearest_is_key("B64", found, "P")
