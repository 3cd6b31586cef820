"""Measures of signatures: closed forms, and general-purpose root finding as the outside judge."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from projection.profit_measures import discounted_payback, internal_rates, present_value
from projection.profit_vector import emerging, zeroised


def test_several_rates_by_their_polynomial() -> None:
    """Closed form: -(1 - 1.1 v)(1 - 1.2 v)(1 - 1.3 v) has rates of 10, 20 and 30%."""
    coefficients = -np.polynomial.polynomial.polyfromroots([1 / 1.1, 1 / 1.2, 1 / 1.3])
    found = internal_rates(coefficients)
    np.testing.assert_allclose(found.rates, [0.1, 0.2, 0.3], atol=1e-9)
    assert found.words == "3 internal rates of return (3 changes of sign): do not decide by it"


def test_none() -> None:
    assert internal_rates([1, 0, 2]).words == "no internal rate of return (no change of sign)"
    # By its discriminant: 1 - 2 v + 2 v^2 is never 0.
    assert internal_rates([1, -2, 2]).words == "no internal rate of return (2 changes of sign)"


@given(st.lists(st.floats(1, 1e4), min_size=1, max_size=60), st.floats(1, 1e5))
def test_one_change_of_sign_by_numpy(later: list[float], strain: float) -> None:
    """Judge: numpy.roots."""
    (rate,) = internal_rates([-strain, *later]).rates
    roots = np.roots([*later[::-1], -strain])
    positive = roots[(np.abs(roots.imag) < 1e-8 * np.abs(roots)) & (roots.real > 0)].real
    assert np.abs(1 / positive - 1 - rate).min() <= 1e-8 * (1 + rate)


def test_payback() -> None:
    assert discounted_payback([-100, 60, 60], 0.1) == 2
    assert discounted_payback([-100, 60, 40], 0.1) is None
    assert discounted_payback([5, 1], 0.1) == 0


@given(st.lists(st.floats(-50, 50), min_size=1, max_size=30), st.lists(st.floats(-50, 50), min_size=30, max_size=30))
def test_zeroised_reserves_leave_no_later_loss(start: list[float], outgo: list[float]) -> None:
    """From their definition: no loss after outset, and no reserve is held beside a profit."""
    n = len(start)
    shares = 0.95 ** np.arange(n + 1)
    held = zeroised(start, outgo[:n], 0.04, shares)
    found = emerging(start, outgo[:n], 0.04, held, shares)
    assert (held >= 0).all()
    assert held[-1] == 0
    assert (found.vector[1:] >= -1e-9).all()
    assert np.abs(found.vector[1:][held[:-1] > 0]).max(initial=0) <= 1e-9


def test_rates_below_minus_one_are_refused() -> None:
    with pytest.raises(ValueError, match="exceed -1"):
        present_value([1.0], -1)
