"""Shocked yield curves: closed forms, both ways of taking factors, and tents that add up to the parallel shift."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from shock_cases import after, basis

from assumptions.basis import Basis
from assumptions.interest import YieldCurve
from assumptions.shock_sets import KeyRates
from assumptions.shocked_curves import ForwardMoved, SpotMoved
from projection.documents import read_shocks

FORMS: list[dict[str, Any]] = [
    {"flat": 0.04},
    {"flat": -0.01},
    {"forward": [0.01, 0.05, 0.02, 0.03]},
    {"spot": {"1": 0.01, "2.5": 0.03, "10": 0.02}},
    {"svensson": {"beta0": 0.03, "beta1": -0.02, "beta2": 0.01, "beta3": 0.015, "tau1": 1.7, "tau2": 9.5}},
    {"smith_wilson": {"spot": {"1": 0.01, "20": 0.03}, "ultimate": 0.042, "alpha": 0.12}},
]
CHANGES: list[dict[str, Any]] = [
    {"how": "absolute", "amount": 0.01},
    {"how": "relative", "by_maturity": {"1": 0.75, "2": 0.65, "20": 0.29}},
    {"how": "relative", "by_maturity": {"1": 0.7, "20": 0.26}, "at_least": 0.01},
    {"how": "absolute", "amount": -0.005, "maturities": {"from": 3, "to": 12}},
    {"how": "replaced", "by_maturity": {"1": 0.02, "30": 0.035}},
    {"how": "absolute", "amount": 0.01, "rates": "forward"},
    {"how": "relative", "amount": -0.3, "rates": "forward", "maturities": {"from": 5}},
]
TIMES = np.concatenate(([0.0, 1 / 365, 0.3], np.arange(1, 1824) / 12))


def curve(form: dict[str, Any], *changes: dict[str, Any]) -> YieldCurve:
    return after(of(form), *({"what": "interest", **change} for change in changes)).curves[0]


def of(form: dict[str, Any]) -> Basis:
    return basis(interest={"rule": [form]})


def spot(held: YieldCurve, t: float) -> float:
    return math.expm1(held.integral(t) / t)


@pytest.mark.parametrize("change", CHANGES, ids=str)
@pytest.mark.parametrize("form", FORMS, ids=lambda form: next(iter(form)))
def test_one_factor_and_many_agree(form: dict[str, Any], change: dict[str, Any]) -> None:
    made = curve(form, change)
    one_by_one = [made.factor(float(t)) for t in TIMES]
    np.testing.assert_allclose(made.factors(TIMES), one_by_one, rtol=2e-13)
    assert one_by_one[0] == 1


@pytest.mark.parametrize("form", FORMS, ids=lambda form: next(iter(form)))
def test_spot_rates_move_by_the_amount_at_every_maturity(form: dict[str, Any]) -> None:
    held, made = curve(form), curve(form, {"how": "absolute", "amount": 0.01})
    for t in (0.25, 1.0, 7.3, 40.0):
        assert spot(made, t) == pytest.approx(spot(held, t) + 0.01, abs=1e-14)


@pytest.mark.parametrize("form", FORMS, ids=lambda form: next(iter(form)))
def test_forward_rates_move_by_the_amount_year_by_year(form: dict[str, Any]) -> None:
    held, made = curve(form), curve(form, {"how": "absolute", "amount": 0.01, "rates": "forward"})
    for n in (1, 2, 11, 60):
        before, now = (one.factor(n - 1.0) / one.factor(float(n)) - 1 for one in (held, made))
        assert now == pytest.approx(before + 0.01, abs=1e-13)


def test_a_flat_curve_stays_flat_and_is_the_one_edited_by_hand() -> None:
    made = curve({"flat": 0.04}, {"how": "absolute", "amount": 0.01})
    assert made.flat
    assert not isinstance(made, SpotMoved | ForwardMoved)
    np.testing.assert_allclose(made.factors(TIMES), curve({"flat": 0.05}).factors(TIMES), rtol=1e-13)
    assert curve({"flat": 0.04}, {"how": "replaced", "amount": 0.03}) == curve({"flat": 0.03})
    assert curve(FORMS[3], {"how": "replaced", "amount": 0.03}) == curve({"flat": 0.03})


def test_forward_rates_edited_by_hand() -> None:
    made = curve({"forward": [0.01, 0.05, 0.02]}, {"how": "absolute", "amount": 0.01, "rates": "forward"})
    edited = curve({"forward": [0.02, 0.06, 0.03]})
    np.testing.assert_allclose(made.factors(TIMES), edited.factors(TIMES), rtol=1e-12)


@pytest.mark.parametrize("form", FORMS, ids=lambda form: next(iter(form)))
@pytest.mark.parametrize("rates", ["spot", "forward"])
def test_forth_and_back_is_the_base(form: dict[str, Any], rates: str) -> None:
    changes = [{"how": "absolute", "amount": amount, "rates": rates} for amount in (0.01, -0.01)]
    np.testing.assert_allclose(curve(form, *changes).factors(TIMES), curve(form).factors(TIMES), rtol=1e-12)


def test_negative_rates_are_not_lowered_and_rise_by_a_point_at_least() -> None:
    """Delegated Regulation (EU) 2015/35, Articles 166 and 167."""
    up, down = (shock.change[0].model_dump(exclude_unset=True) for shock in read_shocks("eu-interest-2015").shock)
    made = after(of({"flat": -0.01}), up).curves[0]
    assert [spot(made, t) for t in (1.0, 30.0)] == pytest.approx([0.0, 0.0], abs=1e-14)
    np.testing.assert_allclose(after(of({"flat": -0.01}), down).curves[0].factors(TIMES), 0.99**-TIMES, rtol=1e-13)
    made = after(of({"flat": 0.04}), up).curves[0]
    # 70 % at one year; 42 % at ten; 26 % at twenty, where 1.04 points are above one; at 55, half-way to 20 % at 90,
    # 23 % would be 0.92 points: one point.
    expected = [0.04 * 1.7, 0.04 * 1.42, 0.04 * 1.26, 0.05]
    assert [spot(made, t) for t in (1.0, 10.0, 20.0, 55.0)] == pytest.approx(expected, abs=1e-14)
    made = after(of({"flat": 0.04}), down).curves[0]
    expected = [0.04 * 0.25, 0.04 * (1 - 0.305), 0.04 * (1 - 0.245), 0.04 * 0.8]
    assert [spot(made, t) for t in (1.0, 10.5, 55.0, 120.0)] == pytest.approx(expected, abs=1e-14)


def test_tents_add_up_to_the_parallel_shift() -> None:
    tents = read_shocks("key-rates").key_rates[0]
    held = of(FORMS[3])
    added = np.zeros(len(TIMES) - 1)
    for one in tents.shocks():
        made = after(held, one.change[0].model_dump(exclude_unset=True)).curves[0]
        assert isinstance(made, SpotMoved)
        added += [made.move.change(0.02, float(t)) for t in TIMES[1:]]
    np.testing.assert_allclose(added, 0.01, rtol=1e-14)


def test_tents_one_after_the_other_are_the_parallel_shift() -> None:
    tents = KeyRates(name="k", years=[1, 5, 20], shift=0.01)
    changes = [one.change[0].model_dump(exclude={"what"}, exclude_unset=True) for one in tents.shocks()]
    parallel = curve(FORMS[3], {"how": "absolute", "amount": 0.01})
    np.testing.assert_allclose(curve(FORMS[3], *changes).factors(TIMES), parallel.factors(TIMES), rtol=1e-12)


def test_a_rate_that_leaves_its_range_is_an_error() -> None:
    with pytest.raises(ValueError, match=r"spot rate at maturity 0\.25 becomes -0\.5"):
        curve(FORMS[3], {"how": "absolute", "amount": -0.6})
    with pytest.raises(ValueError, match="forward rate of year 1 becomes 1"):
        curve(FORMS[2], {"how": "absolute", "amount": 1.0, "rates": "forward"})
