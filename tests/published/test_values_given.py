"""Questions that give values in place of a table: contracts on tables made to have the given values.

Any table with them has the same answer, so the simplest is taken: a rate that stays the same up to the last age.
"""

from __future__ import annotations

from itertools import repeat
from math import exp
from pathlib import Path
from typing import Any

import pytest
from citations import cited
from contracts import ILLUSTRATIVE, annuity, expense, insurance, nearest_is_key, once, premium, printed, value
from scipy.optimize import brentq

LAST = 150
"""Highest age that a table may have."""


def rate_of_annuity(due: float, i: float, age: int) -> float:
    """The yearly rate up to the last age by which an annuity-due for life has a value."""

    def excess(rate: float) -> float:
        step = (1 - rate) / (1 + i)
        return (1 - step ** (LAST - age + 1)) / (1 - step) - due

    return float(brentq(excess, 0, 0.5, xtol=1e-15))


def table(folder: Path, first_age: int, rates: list[float]) -> list[dict[str, Any]]:
    """A mortality rule for rates from an age on, the last of them held to the last age."""
    held = [*rates, *repeat(rates[-1], LAST - first_age + 1 - len(rates))]
    path = folder / "rates.csv"
    path.write_text("age,rate\n" + "".join(f"{first_age + n},{rate!r}\n" for n, rate in enumerate(held)))
    return [{"table": str(path), "close": True}]


@cited("B10")
def test_reserve_from_a_loss(case: str, tmp_path: Path) -> None:
    figures = printed(case)
    rules = table(tmp_path, 45, [rate_of_annuity(13.4205, 0.05, 55)])
    assert value([annuity()], rules, 0.05, 55) == pytest.approx(13.4205, abs=1e-8)
    assert value([insurance()], rules, 0.05, 55) == pytest.approx(figures["A55"], abs=0.000005)
    # The loss of a death in year 11 is 4,450: 10,000 v^11 less 11 premiums in advance, both certain.
    paid = value([{**once(11, 10_000), "while": "certain"}], rules, 0.05, 45)
    level = (paid - 4450) / value([{**annuity(0, 11), "while": "certain"}], rules, 0.05, 45)
    held = value([insurance(amount=10_000), premium(amount=level)], rules, 0.05, 45, passed=10)
    assert held == pytest.approx(figures["10V"], abs=0.5)


@cited("B23")
def test_three_terms_of_woolhouse(case: str, tmp_path: Path) -> None:
    # The two annuities given imply an annuity-due of 8.5484 and mu + delta = 0.08. At 3 %, these fix the rate of the
    # first year, whose force stands for mu at commencement, and the one rate of all later years.
    first = 1 - 1.03 * exp(-0.08)
    later = rate_of_annuity((8.5484 - 1) / exp(-0.08), 0.03, 81)
    rules = table(tmp_path, 80, [first, later])

    def by_formula(times: int) -> float:
        return value([annuity(a_year=times, payments="Woolhouse 3")], rules, 0.03, 80)

    assert value([annuity()], rules, 0.03, 80) == pytest.approx(8.5484, abs=1e-8)
    assert by_formula(2) == pytest.approx(8.2934, abs=0.000005)
    assert by_formula(4) == pytest.approx(8.16715, abs=0.000005)
    found = by_formula(12)
    assert nearest_is_key(case, found, "a12")
    assert found == pytest.approx(printed(case)["a12"], abs=0.000005)


@cited("B66")
def test_premium_that_exhausts_an_account(case: str) -> None:
    # The account earns the rate of the basis and pays the cost of the amount at risk at its rates, so it is the
    # reserve of a term insurance; it ends at nothing if the premium is that of equivalence.
    items = [expense("policy", 50, 50)]
    outgo = value([insurance(0, 20, 100_000)], ILLUSTRATIVE, 0.06, 50, expenses=items)
    income = -value([premium(20)], ILLUSTRATIVE, 0.06, 50, expenses=[expense("premium", 0.05, 0.05)])
    assert nearest_is_key(case, outgo / income, "P")
