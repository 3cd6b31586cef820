"""Published yields against discount factors read off policies: an amount paid for certain at a maturity."""

from __future__ import annotations

import math

import pytest
from contracts import STANDARD, once, printed, value

# Federal Reserve Board, data set feds200628 (Gurkaynak, Sack and Wright), record of 2026-03-06: percent, continuous.
PARAMETERS = {
    "beta0": 0.000118558051341, "beta1": 3.65507972187386, "beta2": -3.657398577533, "beta3": 16.4827863321283,
    "tau1": 5.33457685733225, "tau2": 14.4318194852304,
}  # fmt: skip
CURVE = {
    "svensson": {
        **{name: figure if name.startswith("tau") else figure / 100 for name, figure in PARAMETERS.items()},
        "compounding": "continuous",
    }
}


def factor(years: float) -> float:
    """The discount factor of a whole number of months."""
    return value([{**once(years), "while": "certain"}], STANDARD, CURVE, 40, step="month")


@pytest.mark.parametrize("years", [1, 2, 3, 5, 7, 10, 15, 20, 25, 30])
def test_e03_zero_yields(years: int) -> None:
    assert -100 * math.log(factor(years)) / years == pytest.approx(printed("E03")[f"SVENY{years:02d}"], abs=0.5e-4)


@pytest.mark.parametrize("years", [1, 2, 5, 10, 20, 30])
def test_e03_instantaneous_forwards(years: int) -> None:
    # The central difference over two months is within 0.0001 of the derivative; the print has 4 places.
    apart = math.log(factor(years - 1 / 12) / factor(years + 1 / 12)) * 6
    assert 100 * apart == pytest.approx(printed("E03")[f"SVENF{years:02d}"], abs=1.5e-4)


@pytest.mark.parametrize("years", [1, 2, 10, 30])
def test_e03_par_yields(years: int) -> None:
    # Coupons twice a year.
    half_years = [factor(n / 2) for n in range(1, 2 * years + 1)]
    found = 200 * (1 - half_years[-1]) / sum(half_years)
    assert found == pytest.approx(printed("E03")[f"SVENPY{years:02d}"], abs=0.5e-4)
