"""Sums that fall like the balance of a loan: against the schedule of the loan itself."""

from __future__ import annotations

from datetime import date
from typing import Any

import pytest
from plain_cases import basis, constant, design, stream, value
from pydantic import ValidationError

from portfolios.designs import Loan
from projection.relative import shape_of


def schedule(rate: float, term: int) -> list[float]:
    """Balance of a loan of 1 at the start of each period, by the schedule: interest added, instalment taken off."""
    instalment = rate / (1 - (1 + rate) ** -term) if rate else 1 / term
    balance = [1.0]
    for _ in range(term):
        balance.append(balance[-1] * (1 + rate) - instalment)
    return balance


def cover(loan: dict[str, Any], years: float = 5, **keys: Any) -> dict[str, Any]:
    return stream("cover", 1000.0, on="death", to=years, decrease=loan, **keys)


@pytest.mark.parametrize("rate", [0.05, 0.0, 0.11])
def test_a_year_at_a_time(rate: float) -> None:
    # Closed form: on death in year k + 1 the balance after k instalments.
    q, v = 0.02, 1 / 1.04
    expected = sum(1000 * left * v ** (k + 1) * (1 - q) ** k * q for k, left in enumerate(schedule(rate, 5)[:5]))
    found = value(design(cover({"loan": rate, "instalments": "yearly"})), basis(constant(q)))
    assert found.benefits == pytest.approx(expected, rel=1e-13)


def test_a_month_at_a_time_from_a_column_and_a_later_start() -> None:
    monthly = 1.05 ** (1 / 12) - 1
    contract = design(cover({"loan": "loan_rate"}, 6, start=1))
    found = value(contract, basis(constant(0.02)), on=date(2026, 3, 10), step="month", loan_rate=0.05)
    shares = [payment.relative for payment in found.payments]
    assert shares == pytest.approx(schedule(monthly, 60)[:60], rel=1e-12)


def test_the_row_of_the_engine_is_the_schedule() -> None:
    (contract,) = design(cover({"loan": 0.05})).stream
    shape = shape_of(contract)
    row = shape.row(0.0, 0, 60, 0.05)
    assert row[:60] == pytest.approx(schedule(1.05 ** (1 / 12) - 1, 60)[:60], rel=1e-12)
    assert not row[60:].any()


def test_a_rate_out_of_range() -> None:
    with pytest.raises(ValidationError, match=r"outside -0\.5 to 1"):
        Loan(loan=5.0)
