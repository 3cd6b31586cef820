"""The profits of one policy: closed forms, identities, and the arithmetic of arrays as a second way."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from plain_cases import basis, constant, design, policy, stream, value

from assumptions.basis import Basis
from projection.plain_profit import PlainProfit, plain_profit
from projection.profit_measures import present_value
from projection.profit_vector import emerging

LAPSES = {"lapse": {"timing": "each step", "rule": [{"rates": [0.1, 0.05]}]}}

TERM = design(
    stream("premium", 15.0, direction="in", to=5, a_year=1),
    stream("cover", 1000.0, on="death", to=5),
)
MIXED = design(
    stream("premium", 30.0, direction="in", to=5, a_year=4),
    stream("cover", 1000.0, on="death", to=10),
    stream("at the end", 500.0, start=10, paid="once"),
    stream("income", 20.0, start=5, to=12, a_year=12, guarantee=3),
    stream("fee", 1.0, to=12, a_year=2, paid="arrears", certain=True),
)


def profits(contract: Any, experience: Basis, reserving: Basis, **how: Any) -> PlainProfit:
    return plain_profit(policy(), contract, experience, reserving, **how)


def test_a_term_assurance_by_its_definition() -> None:
    """Closed form: signature of year t = p^(t-1) (G (1 + i) - S q), without reserves."""
    assumed = basis(constant(0.01), age="last birthday", i=0.06)
    found = profits(TERM, assumed, assumed, step="year", reserves="none")
    expected = [0.0, *(0.99 ** (t - 1) * (15 * 1.06 - 1000 * 0.01) for t in range(1, 6))]
    np.testing.assert_allclose(found.signature, expected, rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(found.vector[1:], 15 * 1.06 - 10, rtol=1e-12)


def test_the_arrays_give_the_same() -> None:
    """The other way to the same profits: projection.profit_vector, on the reserves that the twin holds."""
    experience, reserving = basis(constant(0.01), i=0.06), basis(constant(0.013), i=0.03)
    found = profits(TERM, experience, reserving, step="year")
    shares = np.array(found.in_force)
    per_policy = np.array(found.reserves) / shares
    arrays = emerging(np.full(5, 15.0), np.full(5, 10.0), 0.06, per_policy, shares)
    np.testing.assert_allclose(arrays.signature, found.signature, rtol=0, atol=1e-11)


@pytest.mark.parametrize("step", ["month", "year"])
@pytest.mark.parametrize("contract", [TERM, MIXED])
def test_on_the_experience_basis_all_profit_emerges_at_outset(contract: Any, step: Any) -> None:
    """Thiele: with reserves on the experience basis nothing is left for later periods."""
    assumed = basis(constant(0.01), i=0.04, **LAPSES)
    found = profits(contract, assumed, assumed, step=step)
    np.testing.assert_allclose(found.signature[1:], 0, atol=1e-10)
    worth = value(contract, assumed, step=step).reserve
    assert found.signature[0] == pytest.approx(-worth, abs=1e-10)


@pytest.mark.parametrize("period", ["month", "year"])
@pytest.mark.parametrize("claims", ["end of step", "middle of step", {"delay_months": 2}])
def test_at_the_earned_rate_the_value_does_not_depend_on_reserves(period: Any, claims: Any) -> None:
    experience = basis(constant(0.01), i=0.04, claims={"paid": claims}, **LAPSES)
    reserving = basis(constant(0.013), i=0.02)
    rate = 0.04 if period == "year" else 1.04 ** (1 / 12) - 1
    with_them = profits(MIXED, experience, reserving, period=period)
    without = profits(MIXED, experience, reserving, period=period, reserves="none")
    worth = -value(MIXED, experience, step="month").reserve
    assert any(abs(held) > 1 for held in with_them.reserves)
    assert present_value(with_them.signature, rate) == pytest.approx(worth, abs=1e-9)
    assert present_value(without.signature, rate) == pytest.approx(worth, abs=1e-9)


def test_each_profit_adds_up() -> None:
    experience, reserving = basis(constant(0.01), i=0.04, **LAPSES), basis(constant(0.013), i=0.02)
    found = profits(MIXED, experience, reserving)
    for t, profit in enumerate(found.signature):
        before = found.reserves[t - 1] if t else 0.0
        parts = sum(row[t] for row in found.flows.values()) + found.interest[t] - (found.reserves[t] - before)
        assert profit == pytest.approx(parts, abs=1e-10)
