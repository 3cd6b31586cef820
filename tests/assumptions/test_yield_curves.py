"""Yield curves in closed form: what they must meet, where they must go, and parameters that make no curve."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from assumptions.basis import prepare_basis
from assumptions.interest import InterestRule, YieldCurve, curve_of
from assumptions.yield_curves import SmithWilsonCurve, distance

SPOTS = {1.0: 0.021, 2.0: 0.0235, 5.0: 0.027, 10.0: 0.031, 20.0: 0.0325}


def curve(**keys: Any) -> YieldCurve:
    """The curve of an interest rule."""
    rule = InterestRule.model_validate(keys)
    return curve_of(rule, rule.smith_wilson.spot if rule.smith_wilson else None)  # type: ignore[arg-type]


def smith_wilson(spot: dict[float, float] | None = None, **keys: Any) -> SmithWilsonCurve:
    """A Smith-Wilson curve."""
    made = curve(smith_wilson={"spot": spot or SPOTS, "ultimate": 0.033, **keys})
    assert isinstance(made, SmithWilsonCurve)
    return made


@given(
    spots=st.dictionaries(st.integers(1, 40), st.floats(0.0, 0.06), min_size=1, max_size=8),
    alpha=st.floats(0.05, 0.6), ultimate=st.floats(0.02, 0.05),
)  # fmt: skip
@settings(deadline=None, max_examples=60)
def test_smith_wilson_meets_its_spots(spots: dict[int, float], alpha: float, ultimate: float) -> None:
    try:
        made = smith_wilson({float(m): rate for m, rate in spots.items()}, alpha=alpha, ultimate=ultimate)
    except ValueError:
        return  # steep spots can drive late factors below 0
    for maturity, rate in spots.items():
        assert made.factor(maturity) == pytest.approx((1 + rate) ** -maturity, abs=1e-12)
    years = np.array([0.0, 0.3, 1.0, 7.5, 33.0, 120.0])
    assert made.factors(years) == pytest.approx([made.factor(t) for t in years.tolist()], rel=1e-10, abs=1e-14)
    assert made.factor(0.0) == 1.0


def test_smith_wilson_with_the_ultimate_rate_as_spots_is_flat() -> None:
    made = smith_wilson(dict.fromkeys(SPOTS, 0.033), alpha=0.1)
    assert [made.factor(t) for t in (0.5, 7, 90)] == pytest.approx([1.033**-t for t in (0.5, 7, 90)], rel=1e-12)


def test_the_smallest_alpha_that_converges_is_found() -> None:
    made = smith_wilson(convergence=60.0, ultimate=0.06)
    assert made.alpha > 0.05
    assert distance(made, 60) <= 1e-4 < distance(smith_wilson(alpha=made.alpha - 3e-6, ultimate=0.06), 60)


def test_the_distance_is_that_of_the_forward_intensity() -> None:
    made, h = smith_wilson(alpha=0.08), 1e-3
    forward = math.log(made.factor(60 - h) / made.factor(60 + h)) / (2 * h)
    assert abs(forward - math.log(1.033)) == pytest.approx(distance(made, 60), rel=1e-4)


def test_a_floor_of_alpha() -> None:
    assert smith_wilson(convergence=60.0, tolerance=0.01).alpha == 0.05
    assert smith_wilson(convergence=60.0, tolerance=0.01, least_alpha=0.2).alpha == 0.2


@given(
    beta=st.tuples(st.floats(0.0, 0.06), st.floats(-0.05, 0.05), st.floats(-0.05, 0.05), st.floats(-0.05, 0.05)),
    tau=st.tuples(st.floats(0.3, 10), st.floats(1, 30)), compounding=st.sampled_from(["annual", "continuous"]),
)  # fmt: skip
@settings(deadline=None, max_examples=60)
def test_two_ways_to_svensson(beta: tuple[float, ...], tau: tuple[float, float], compounding: str) -> None:
    keys = {f"beta{n}": figure for n, figure in enumerate(beta)} | {"tau1": tau[0], "tau2": tau[1]}
    made = curve(svensson={**keys, "compounding": compounding})
    years = np.array([0.0, 1 / 12, 1.0, 10.0, 80.0, 150.0])
    assert made.factors(years) == pytest.approx([made.factor(t) for t in years.tolist()], rel=1e-10)


def test_svensson_limits() -> None:
    made = curve(svensson={"beta0": 0.03, "beta1": -0.01, "beta2": 0.02, "tau1": 2.0, "compounding": "continuous"})
    assert made.integral(1e-9) / 1e-9 == pytest.approx(0.02, rel=1e-6)
    assert made.integral(1e6) / 1e6 == pytest.approx(0.03, rel=1e-6)
    flat = curve(svensson={"beta0": 0.03, "tau1": 2.0})
    assert flat.factor(10) == pytest.approx(1.03**-10, rel=1e-14)


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ({"smith_wilson": {"spot": SPOTS, "ultimate": 0.03, "convergence": 15.0}}, "must lie beyond"),
        ({"smith_wilson": {"spot": SPOTS, "ultimate": 0.9, "convergence": 20.1}}, "no 'alpha' up to 2"),
        ({"smith_wilson": {"spot": {}, "ultimate": 0.03, "alpha": 0.1}}, "at least one maturity"),
        ({"svensson": {"beta0": -0.4, "beta1": -0.5, "tau1": 5.0}}, "must lie above -0.5"),
    ],
)
def test_figures_that_make_no_curve(keys: dict[str, Any], said: str) -> None:
    with pytest.raises(ValueError, match=said):
        curve(**keys)


@pytest.mark.parametrize(
    "keys",
    [
        {"smith_wilson": {"spot": SPOTS, "ultimate": 0.03}},
        {"smith_wilson": {"spot": SPOTS, "ultimate": 0.03, "alpha": 0.1, "convergence": 60.0}},
        {"svensson": {"beta0": 0.03, "tau1": 2.0}, "flat": 0.02},
        {"svensson": {"beta0": 3.0, "tau1": 2.0}},
    ],
)
def test_documents_that_are_wrong(keys: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        InterestRule.model_validate(keys)


def test_the_digest_knows_the_parameters() -> None:
    def digest(ultimate: float) -> str:
        rule = {"smith_wilson": {"spot": {"1": 0.01, "20": 0.03}, "ultimate": ultimate, "alpha": 0.1}}
        mortality = {"rule": [{"table": {"law": "de Moivre", "omega": 110}}]}
        return prepare_basis({"mortality": mortality, "interest": {"rule": [rule]}}).digest

    assert digest(0.03) != digest(0.031)
