"""Premiums by equivalence, and reserves of one policy at later durations.

A premium is the ratio of two values, since a value is linear in it. Multiple choice: the option nearest to the
value must be the key.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from contracts import ILLUSTRATIVE as ILT
from contracts import (
    SELECT,
    STANDARD,
    annuity,
    expense,
    insurance,
    nearest_is_key,
    once,
    premium,
    printed,
    refund,
    value,
)
from open_tables import FOLDER

from assumptions.laws import Law

FIVE, SIX = 0.05, 0.06


def rates_file(folder: Path, first_age: int, rates: list[float], close: bool = False) -> list[dict[str, Any]]:
    """A mortality rule for yearly rates from an age on, as a CSV file."""
    path = folder / "rates.csv"
    rows = [f"{first_age + n},{rate!r}" for n, rate in enumerate(rates)]
    path.write_text("\n".join(["age,rate", *rows]) + "\n")
    return [{"table": str(path), "close": close}]


def endowment(years: int, amount: float = 1.0) -> list[dict[str, Any]]:
    """An amount at death within so many years, or at their end."""
    return [insurance(0, years, amount), once(years, amount)]


# Premiums


def test_a14_with_profits_endowment() -> None:
    # Simple bonus of 4 % a year added at the start of every year, including the first: 1.04, 1.08 ... 1.20.
    table = {"file": str(FOLDER / "t258.xml"), "select_by": "entry age"}
    bonus = {"clock": "commencement"}
    steps = [{"years": 1, "share": 1 + 0.04 * year} for year in range(1, 6)]
    benefits = [insurance(0, 5, 10_000, pattern=steps, **bonus), once(5, 10_000 * 1.2)]
    cost = value(benefits, table, 0.04, 60)
    net = [
        {**premium(5), "name": "premium"},
        {"kind": "expense", "of": "premium", "pattern": [{"years": 1, "share": 0.6}, {"share": 0.05}]},
    ]
    income = -value(net, table, 0.04, 60)
    assert cost / income == pytest.approx(printed("A14")["premium"], abs=0.5)


def test_b01_deferred_annuity_with_refund() -> None:
    paid = value([annuity(20, amount=30_000)], STANDARD, FIVE, 40)
    single = {**once(0), "name": "single", "direction": "in"}
    income = -value([single, refund("single", 20)], STANDARD, FIVE, 40)
    # Printed from entries of 5 digits: 20E40 = 0.36663 to within 0.000005, that is 1.4 in 100,000.
    assert paid / income == pytest.approx(printed("B01")["premium"], rel=2.5e-5)


def test_b02_whole_life() -> None:
    found = 10_000 * value([insurance()], STANDARD, FIVE, 62) / value([annuity()], STANDARD, FIVE, 62)
    assert found == pytest.approx(printed("B02")["P"], abs=0.005)


def test_b03_level_equivalent_of_stepped_expenses() -> None:
    stepped = value([once(0, 40), annuity(0, 10, 5), annuity(0, 20, 5)], STANDARD, FIVE, 60)
    # Printed from annuities of 4 places, ten of them in all.
    assert stepped == pytest.approx(printed("B03")["numerator"], abs=0.001)
    assert stepped / value([annuity()], STANDARD, FIVE, 60) == pytest.approx(printed("B03")["level"], abs=0.005)


def test_b11_natural_premiums_after_20_years() -> None:
    found = 1000 * value([insurance(0, 20)], ILT, SIX, 40) / value([annuity(0, 20)], ILT, SIX, 40)
    assert nearest_is_key("B11", found, "pi")


def test_b16_extra_mortality_in_one_year(tmp_path: Path) -> None:
    law = Law.model_validate(ILT)
    rules = rates_file(tmp_path, 60, [0.015, *(law.rate(age, 0) for age in range(61, 130))], close=True)
    found = 1000 * value([insurance()], rules, SIX, 60) / value([annuity()], rules, SIX, 60)
    assert nearest_is_key("B16", found, "P")


def test_b21_two_pay_term_with_expenses(tmp_path: Path) -> None:
    rules = rates_file(tmp_path, 40, [0.1, 0.15, 0.2])
    single = value([insurance(0, 3, 10_000)], rules, FIVE, 40)
    assert single == pytest.approx(printed("B21")["single_benefit_premium"], abs=0.5)
    # Per policy and per 1,000 of the sum; settlement 20 and 1 per 1,000.
    items = [expense("policy", 25 + 45, 10 + 15), expense("claim", 30, 30)]
    outgo = value([insurance(0, 3, 10_000)], rules, FIVE, 40, expenses=items)
    commission = {"kind": "commission", "of": "premium", "pattern": [{"years": 1, "share": 0.2}, {"share": 0.1}]}
    income = -value([{**premium(2), "name": "premium"}, commission], rules, FIVE, 40)
    assert nearest_is_key("B21", outgo / income, "G")


def test_b22_expected_margins_of_an_endowment() -> None:
    items = [expense("premium", 0.35, 0.05), expense("policy", 20 + 150, 5 + 15)]
    found = value([premium(20, 495), *endowment(20, 10_000)], ILT, SIX, 50, expenses=items)
    assert nearest_is_key("B22", -found, "EPV")


# Reserves


def test_b05_net_gross_and_expense_reserves() -> None:
    figures = printed("B05")
    benefit = [insurance(amount=100_000)]
    net = value(benefit, STANDARD, FIVE, 45) / value([annuity()], STANDARD, FIVE, 45)
    # Printed from A_45 = 0.15161: 100,000 x 0.000005 / 17.8162.
    assert net == pytest.approx(figures["Pn"], abs=0.029)
    assert 977.6 - net == pytest.approx(figures["Pe"], abs=0.034)
    items = [expense("premium", 0.6, 0.02), expense("policy", 500, 50)]
    net_reserve = value([*benefit, premium(amount=net)], STANDARD, FIVE, 45, passed=5)
    gross_reserve = value([*benefit, premium(amount=977.6)], STANDARD, FIVE, 45, passed=5, expenses=items)
    # From entries of 5 and 4 places: 100,000 times 0.000005, and 977.6 times 0.00005.
    assert net_reserve == pytest.approx(figures["5Vn"], abs=0.55)
    assert gross_reserve == pytest.approx(figures["5Vg"], abs=0.55)
    assert gross_reserve - net_reserve == pytest.approx(figures["5Ve"], abs=0.5)


def test_b10_premium_from_a_given_loss() -> None:
    # The reserve of the same question rests on an annuity of a table that is not named.
    # The loss of a death in year 11 is 4,450: 10,000 v^11 less 11 premiums in advance, both certain.
    paid = value([{**once(11, 10_000), "while": "certain"}], STANDARD, FIVE, 45)
    spread = value([{**annuity(0, 11), "while": "certain"}], STANDARD, FIVE, 45)
    level = (paid - 4450) / spread
    assert level == pytest.approx(printed("B10")["P"], abs=0.005)


def test_b27_full_preliminary_term(tmp_path: Path) -> None:
    rules = rates_file(tmp_path, 50, [0.05, 0.06, 0.07])
    renewal = value([insurance(0, 2, 10_000)], rules, 0.04, 51) / value([annuity(0, 2)], rules, 0.04, 51)
    income = {**premium(3, renewal), "from": 1}
    assert nearest_is_key("B27", value([insurance(0, 3, 10_000), income], rules, 0.04, 50, passed=2), "2V")


def test_b32_gross_less_net_reserve(tmp_path: Path) -> None:
    rules, benefit = rates_file(tmp_path, 50, [0.1, 0.11, 0.12]), insurance(0, 3, 10_000)
    items = [expense("policy", 15, 7.5)]
    loads = [expense("premium", 0.25, 0.05)]
    net = value([benefit], rules, FIVE, 50) / value([annuity(0, 3)], rules, FIVE, 50)
    gross = value([benefit], rules, FIVE, 50, expenses=items) / -value([premium(3)], rules, FIVE, 50, expenses=loads)
    net_reserve = value([benefit, premium(3, net)], rules, FIVE, 50, passed=1)
    gross_reserve = value([benefit, premium(3, gross)], rules, FIVE, 50, passed=1, expenses=items + loads)
    assert nearest_is_key("B32", gross_reserve - net_reserve, "diff")


def test_b34_amount_at_risk_of_an_increasing_benefit() -> None:
    benefit = insurance(0, 5, 1000, increase={"rate": 1.0, "kind": "simple"})
    settlement, loads = [expense("claim", 50, 50)], [expense("premium", 0.2, 0.05)]
    # The exercise gives the reserve at 4, and so the premium.
    outgo = value([benefit], ILT, SIX, 40, passed=4, expenses=settlement)
    gross = (outgo - 6.275) / -value([premium(5)], ILT, SIX, 40, passed=4, expenses=loads)
    held = value([benefit, premium(5, gross)], ILT, SIX, 40, passed=3, expenses=settlement + loads)
    assert held == pytest.approx(7.6677, abs=0.00005)  # recomputed by those who collected the cases
    assert nearest_is_key("B34", 3000 + 50 - held, "NAR year 3")


def test_b39_renewal_premium_of_full_preliminary_term() -> None:
    found = 25_000 * value([insurance(0, 19)], ILT, SIX, 46) / value([annuity(0, 19)], ILT, SIX, 46)
    assert nearest_is_key("B39", found, "P_ren")


def test_b41_full_preliminary_term_reserve_of_an_endowment() -> None:
    due = value([annuity(0, 29)], ILT, SIX, 71)
    # Printed from a difference of table entries, each rounded.
    assert due == pytest.approx(printed("B41")["adue_71:29"], abs=0.00001)
    renewal = value(endowment(29, 1000), ILT, SIX, 71) / due
    income = {**premium(30, renewal), "from": 1}
    found = value([*endowment(30, 1000), income], ILT, SIX, 70, passed=10)
    assert nearest_is_key("B41", found, "10V_FPT")


def test_b43_net_less_full_preliminary_term_reserve() -> None:
    level, renewal = (value([insurance()], ILT, SIX, age) / value([annuity()], ILT, SIX, age) for age in (25, 26))
    held = [
        value([insurance(amount=5000), premium(amount=5000 * paid)], ILT, SIX, 25, passed=5)
        for paid in (level, renewal)
    ]
    assert nearest_is_key("B43", held[0] - held[1], "diff")


def test_b45_paid_up_sum() -> None:
    level = value(endowment(20), ILT, SIX, 45) / value([annuity(0, 20)], ILT, SIX, 45)
    held = value([*endowment(20, 20_000), premium(20, 20_000 * level)], ILT, SIX, 45, passed=8)
    assert held == pytest.approx(5367.329, abs=0.0005)  # the reserve that the solution prints
    assert nearest_is_key("B45", held / value(endowment(12), ILT, SIX, 53), "paid_up")


def test_e02_second_moment_on_a_forward_curve(tmp_path: Path) -> None:
    # The second moment of 5,000 v(t) is 5,000^2 at twice the force of interest.
    rules = rates_file(tmp_path, 50, [0.005, 0.006, 0.007])
    doubled = {"forward": [(1 + forward) ** 2 - 1 for forward in (0.03, 0.032, 0.035)]}
    assert nearest_is_key("E02", 5000**2 * value([insurance(0, 3)], rules, doubled, 50), "E[Z^2]")


def test_b36_one_monthly_step_after_a_quarterly_premium() -> None:
    # The reserve at 2 3/4 is given, before a premium of 460 with 10 % of expenses; one month on, by the recursion.
    month: dict[str, Any] = {"passed": 2.75, "step": "month", "fractions": "uniform deaths"}
    risk = value([insurance(0, 34 / 12, 500_000)], SELECT, FIVE, 50, **month)
    stay = value([once(34 / 12)], SELECT, FIVE, 50, **month)
    assert nearest_is_key("B36", (3091 + 0.9 * 460 - risk) / stay, "V")
