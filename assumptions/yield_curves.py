"""Yield curves in closed form: Svensson's (with Nelson and Siegel's as a case of it) and Smith and Wilson's.

Nelson and Siegel, Parsimonious Modeling of Yield Curves (1987); Svensson, Estimating and Interpreting Forward Interest
Rates (1994). Smith and Wilson, Fitting Yield Curves with Long Term Constraints (2001), as written down in EIOPA's
technical documentation of the risk-free interest rate term structures.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, field_validator, model_validator

from .items import Item

Years = NDArray[np.float64]

HORIZON = 155.0
"""Years for which a curve must hold."""

LAST_MATURITY = 150.0
"""Years of the longest spot rate of a Smith-Wilson curve."""

APART = 1 / 400
"""Years that its maturities lie apart at least: less than a day."""

MISSED = 1e-8
"""How far the price of a spot may be missed, relative to it."""


class Svensson(Item):
    """Parameters of Svensson's spot rates, or with ``beta3`` left out Nelson and Siegel's; 3 % is 0.03."""

    beta0: float = Field(ge=-0.5, le=1, description="rate in the long run")
    beta1: float = Field(0.0, ge=-1, le=1, description="rate at once, less that in the long run")
    beta2: float = Field(0.0, ge=-2, le=2, description="size of the first hump")
    beta3: float = Field(0.0, ge=-2, le=2, description="size of the second hump")
    tau1: float = Field(gt=0, le=100, description="years that place the first hump")
    tau2: float = Field(1.0, gt=0, le=100, description="years that place the second hump")
    compounding: Literal["annual", "continuous"] = Field("annual", description="what the spot rates are")


class SmithWilson(Item):
    """Spot rates that are met exactly, and the forward rate that the curve tends to beyond them."""

    spot: dict[float, float] | str = Field(
        description="annual spot rates by maturity in years, inline or a CSV or Parquet file with columns 'maturity' "
        "and 'rate'"
    )
    ultimate: float = Field(gt=-0.5, le=1, description="forward rate in the long run, annual effective")
    alpha: float | None = Field(None, gt=0, le=2, description="speed of convergence; absent: found")
    convergence: float | None = Field(
        None, gt=0, le=150, description="years by which the forward intensity has come within 'tolerance' of the "
        "ultimate one; the smallest 'alpha' that does it is taken"
    )  # fmt: skip
    tolerance: float = Field(0.0001, gt=0, le=0.01, description="distance at 'convergence'")
    least_alpha: float = Field(0.05, gt=0, le=1, description="smallest 'alpha' that may be found")

    @field_validator("spot", mode="before")
    @classmethod
    def _maturities(cls, value: Any) -> Any:
        return inline_spots(value) if isinstance(value, dict) else value

    @model_validator(mode="after")
    def _one_way(self) -> SmithWilson:
        if (self.alpha is None) == (self.convergence is None):
            raise ValueError("a Smith-Wilson curve needs one of 'alpha' and 'convergence'")
        return self


def inline_spots(given: dict[Any, Any]) -> dict[float, float]:
    """Return spot rates by maturity as a document holds them, whose keys are text.

    Raises ValueError for a maturity that is no number above 0 or is there twice, and for a rate that is no number.
    """
    spots: dict[float, float] = {}
    for key, rate in given.items():
        try:
            maturity = float(key)
        except (TypeError, ValueError):
            maturity = math.nan
        if not 0 < maturity < math.inf:
            raise ValueError(f"maturity '{key}' is no number of years above 0; write them like \"10\" = 0.03")
        if maturity in spots:
            raise ValueError(f"maturity '{key}' is there twice; give each once")
        if isinstance(rate, bool) or not isinstance(rate, int | float):
            raise ValueError(f"the spot rate at maturity '{key}' is {rate!r}; it should be a number")
        spots[maturity] = float(rate)
    return spots


@dataclass(frozen=True)
class SvenssonCurve:
    """Discount factors of Svensson's spot rates."""

    parameters: Svensson
    flat = False

    def spot(self, t: float) -> float:
        """Spot rate at a maturity t > 0 in years, term by term."""
        p = self.parameters
        first, second = t / p.tau1, t / p.tau2
        mean1, mean2 = -math.expm1(-first) / first, -math.expm1(-second) / second
        return p.beta0 + p.beta1 * mean1 + p.beta2 * (mean1 - math.exp(-first)) + p.beta3 * (mean2 - math.exp(-second))

    def integral(self, t: float) -> float:
        """H(t), the integral of the force of interest from 0 to t >= 0 in years."""
        if t == 0:
            return 0.0
        return t * (math.log1p(self.spot(t)) if self.parameters.compounding == "annual" else self.spot(t))

    def factor(self, t: float) -> float:
        """Discount factor v(t)."""
        return math.exp(-self.integral(t))

    def factors(self, years: Years) -> Years:
        """Discount factors for many t, from the integral of the instantaneous forward rate in closed form."""
        p = self.parameters
        gone1, gone2 = -np.expm1(-years / p.tau1), -np.expm1(-years / p.tau2)
        total = p.beta0 * years + (p.beta1 + p.beta2) * p.tau1 * gone1 + p.beta3 * p.tau2 * gone2
        total = total - p.beta2 * years * (1 - gone1) - p.beta3 * years * (1 - gone2)
        if p.compounding == "continuous":
            return np.asarray(np.exp(-total))
        spot = np.divide(total, years, out=np.zeros_like(total), where=years > 0)
        return np.asarray((1 + spot) ** -years)


@dataclass(frozen=True)
class SmithWilsonCurve:
    """Discount factors P(t) = exp(-w t) + sum of zeta_i W(t, u_i), w the ultimate intensity."""

    maturities: tuple[float, ...]
    weights: tuple[float, ...]
    alpha: float
    intensity: float
    flat = False

    def factor(self, t: float) -> float:
        """Discount factor v(t) for t >= 0 in years, term by term."""
        found = math.exp(-self.intensity * t)
        for u, weight in zip(self.maturities, self.weights, strict=True):
            low, high = min(t, u), max(t, u)
            # exp(-a high) sinh(a low), written so that nothing overflows.
            bend = (math.exp(-self.alpha * (high - low)) - math.exp(-self.alpha * (high + low))) / 2
            found += weight * math.exp(-self.intensity * (t + u)) * (self.alpha * low - bend)
        return found

    def integral(self, t: float) -> float:
        """H(t) = -ln v(t)."""
        return -math.log(self.factor(t))

    def factors(self, years: Years) -> Years:
        """Discount factors for many t."""
        u = np.array(self.maturities)
        values = wilson(years[:, None], u[None, :], self.alpha, self.intensity) @ np.array(self.weights)
        return np.asarray(np.exp(-self.intensity * years) + values)


def wilson(t: Years, u: Years, alpha: float, intensity: float) -> Years:
    """Wilson's function W(t, u), symmetric and positive definite."""
    low, high = np.minimum(t, u), np.maximum(t, u)
    bend = (np.exp(-alpha * (high - low)) - np.exp(-alpha * (high + low))) / 2
    return np.asarray(np.exp(-intensity * (t + u)) * (alpha * low - bend))


def svensson_curve(parameters: Svensson) -> SvenssonCurve:
    """Return the curve. Raises ValueError where a spot rate falls to -50 % or below within the horizon."""
    curve = SvenssonCurve(parameters)
    for t in (n / 4 for n in range(1, int(4 * HORIZON))):
        if curve.spot(t) <= -0.5:
            raise ValueError(
                f"key 'svensson' gives the spot rate {curve.spot(t):.4g} at {t:g} years; it must lie above -0.5: "
                "correct beta0 to beta3, tau1 and tau2"
            )
    return curve


def smith_wilson_curve(document: SmithWilson, spot: dict[float, float]) -> SmithWilsonCurve:
    """Fit the curve to spot rates by maturity, in years and above 0.

    Raises ValueError where no alpha up to 2 brings the forward rate close enough to the ultimate one in time, and
    where a discount factor within the horizon is not above 0.
    """
    if document.alpha is not None:
        curve = _fitted(document, spot, document.alpha)
    else:
        curve = _fitted(document, spot, _least_alpha(document, spot))
    u = np.array(sorted(spot))
    missed = np.abs(curve.factors(u) * (1 + np.array([spot[maturity] for maturity in u.tolist()])) ** u - 1)
    if not missed.max() <= MISSED:
        raise ValueError(
            f"key 'smith_wilson': with alpha {curve.alpha:g} the spot rates are met to {missed.max():.1g} only; "
            "take a larger 'alpha', or maturities further apart"
        )
    years = np.arange(0.0, HORIZON, 0.25)
    below = years[~(curve.factors(years) > 0)]
    if len(below):
        raise ValueError(
            f"key 'smith_wilson' gives no discount factor above 0 for {below[0]:g} years; correct the spot rates, or "
            "take another 'alpha'"
        )
    return curve


def _fitted(document: SmithWilson, spot: dict[float, float], alpha: float) -> SmithWilsonCurve:
    u = np.array(sorted(spot))
    if u[-1] > LAST_MATURITY or (len(u) > 1 and np.diff(u).min() < APART):
        raise ValueError(
            f"key 'spot': maturities of a Smith-Wilson curve are at most {LAST_MATURITY:g} years, and a day or more "
            "apart; leave some out"
        )
    intensity = math.log1p(document.ultimate)
    prices = np.array([(1 + spot[maturity]) ** -maturity for maturity in u.tolist()])
    try:
        weights = np.linalg.solve(wilson(u[:, None], u[None, :], alpha, intensity), prices - np.exp(-intensity * u))
    except np.linalg.LinAlgError:
        raise ValueError(f"key 'alpha' is {alpha:g}; no curve meets the spot rates; take a larger one") from None
    return SmithWilsonCurve(tuple(u.tolist()), tuple(weights.tolist()), alpha, intensity)


def distance(curve: SmithWilsonCurve, t: float) -> float:
    """How far the forward intensity at t, beyond all maturities, lies from the ultimate one."""
    pulls = (
        weight * math.exp(-curve.intensity * (t + u) - curve.alpha * t) * math.sinh(curve.alpha * u)
        for u, weight in zip(curve.maturities, curve.weights, strict=True)
    )
    return abs(curve.alpha * sum(pulls) / curve.factor(t))


def _least_alpha(document: SmithWilson, spot: dict[float, float]) -> float:
    until = float(document.convergence or 0)
    if until <= max(spot):
        raise ValueError(
            f"key 'convergence' is {until:g}; it must lie beyond the last spot rate, at {max(spot):g} years"
        )

    def near(alpha: float) -> bool:
        return distance(_fitted(document, spot, alpha), until) <= document.tolerance

    low, high = document.least_alpha, 2.0
    if near(low):
        return low
    if not near(high):
        raise ValueError(
            f"key 'tolerance' is {document.tolerance:g}; no 'alpha' up to 2 comes so near to the ultimate rate by "
            f"'convergence', {until:g} years; allow more of either"
        )
    while high - low > 1e-6:
        middle = (low + high) / 2
        low, high = (low, middle) if near(middle) else (middle, high)
    # Rounded up to six places, as the published ones are.
    return math.ceil(high * 1e6) / 1e6
