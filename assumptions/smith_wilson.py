"""Smith and Wilson's yield curve: it meets spot rates exactly and tends to an ultimate forward rate.

Smith and Wilson, Fitting Yield Curves with Long Term Constraints (2001), as written down in EIOPA's technical
documentation of the methodology to derive the risk-free interest rate term structures. With w = ln(1 + ultimate),

    v(t) = exp(-w t) + sum of zeta_i W(t, u_i),   W(t, u) = exp(-w (t + u)) (alpha min - exp(-alpha max) sinh(alpha min)),

min and max those of t and u, and the weights zeta_i such that v meets the spot rates at the maturities u_i.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, field_validator, model_validator

from .items import Item
from .spot_rates import HORIZON, by_maturity, check_spots

Years = NDArray[np.float64]

MOST_ALPHA = 2.0
"""Largest alpha that a document may state or that is looked for."""

_MET = 1e-12
"""How closely spot rates are met; for maturities below a year, their discount factors."""


class SmithWilson(Item):
    """Spot rates that are met exactly, and the forward rate that the curve tends to beyond them."""

    spot: dict[float, float] | str = Field(
        description="annual effective spot rates by maturity in years, inline or a CSV or Parquet file with columns "
        "'maturity' and 'rate'"
    )
    ultimate: float = Field(gt=-0.5, le=1, description="forward rate in the long run, annual effective")
    alpha: float | None = Field(None, gt=0, le=MOST_ALPHA, description="speed of convergence; absent: found")
    convergence: float | None = Field(
        None, gt=0, le=150, description="years by which the forward intensity has come within 'tolerance' of the "
        "ultimate one; the smallest 'alpha' that does it is taken"
    )  # fmt: skip
    tolerance: float = Field(0.0001, gt=0, le=0.01, description="distance at 'convergence'")
    least_alpha: float = Field(0.05, gt=0, le=1, description="smallest 'alpha' that may be found")

    _keys = field_validator("spot", mode="before")(by_maturity)

    @model_validator(mode="after")
    def _one_way(self) -> SmithWilson:
        if (self.alpha is None) == (self.convergence is None):
            raise ValueError("a Smith-Wilson curve needs one of 'alpha' and 'convergence'")
        if self.alpha is not None:
            for name in ("tolerance", "least_alpha"):
                if getattr(self, name) != type(self).model_fields[name].default:
                    raise ValueError(f"'{name}' goes with 'convergence', and 'alpha' is given; take one of them out")
        if isinstance(self.spot, dict):
            self.check(self.spot)
        return self

    def check(self, spot: dict[float, float]) -> None:
        """Raise ValueError for spot rates, inline or read from the file, that this curve cannot be fitted to."""
        last = check_spots(spot)[-1]
        if last > HORIZON:
            raise ValueError(f"maturity {last:g} lies beyond {HORIZON:g} years, where no curve is looked at")
        if self.convergence is not None and self.convergence <= last:
            raise ValueError(f"'convergence' at {self.convergence:g} years is not beyond the last maturity, {last:g}")


@dataclass(frozen=True)
class SmithWilsonCurve:
    """Discount factors of a fitted curve.

    maturities: u_i in years, in order; weights: zeta_i; intensity: w, the ultimate force of interest.
    """

    maturities: tuple[float, ...]
    weights: tuple[float, ...]
    alpha: float
    intensity: float
    flat = False

    def factor(self, t: float) -> float:
        """Discount factor v(t) for t >= 0 in years, term by term as it is defined."""
        alpha, found = self.alpha, math.exp(-self.intensity * t)
        for u, weight in zip(self.maturities, self.weights, strict=True):
            least, most = min(t, u), max(t, u)
            wilson = alpha * least - math.exp(-alpha * most) * math.sinh(alpha * least)
            found += weight * math.exp(-self.intensity * (t + u)) * wilson
        return found

    def integral(self, t: float) -> float:
        """Integral of the force of interest from 0 to t >= 0 in years, -ln v(t)."""
        return -math.log(self.factor(t))

    @cached_property
    def _sums(self) -> tuple[Years, Years, Years, Years]:
        # What the first k maturities and the others contribute, for every k.
        u = np.array(self.maturities)
        c, bent = np.array(self.weights) * np.exp(-self.intensity * u), self.alpha * u
        before = [np.concatenate(([0.0], np.cumsum(c * part))) for part in (bent, np.sinh(bent))]
        after = [np.concatenate((np.cumsum((c * part)[::-1])[::-1], [0.0])) for part in (np.ones(len(u)), np.exp(-bent))]
        return before[0], before[1], after[0], after[1]

    def factors(self, years: Years) -> Years:
        """Discount factors for many t.

        Between two maturities exp(w t) v(t) is a sum of 1, t, exp(-alpha t) and sinh(alpha t), whose coefficients are
        sums over the maturities before and after.
        """
        level, fading, slope, rising = self._sums
        place = np.searchsorted(np.array(self.maturities), years, side="right")
        bent = self.alpha * years
        bend = 1 + level[place] - np.exp(-bent) * fading[place] + bent * slope[place] - np.sinh(bent) * rising[place]
        return np.asarray(np.exp(-self.intensity * years) * bend)

    def distance(self, t: float) -> float:
        """How far the forward intensity at t, not before the last maturity, lies from the ultimate one.

        Infinite where the discount factor is not above 0.
        """
        # exp(w t) v(t) = 1 + level - exp(-alpha t) fading, and the intensity is w less its logarithm's derivative.
        level, fading = float(self._sums[0][-1]), math.exp(-self.alpha * t) * float(self._sums[1][-1])
        held = 1 + level - fading
        return abs(self.alpha * fading / held) if held > 0 else math.inf


def smith_wilson_curve(document: SmithWilson, spot: dict[float, float]) -> SmithWilsonCurve:
    """Fit the curve to annual effective spot rates by maturity, in years and above 0.

    Raises ValueError for spot rates that are not met to 1e-12, as where maturities lie too close together; where no
    alpha brings the forward intensity close enough to the ultimate one in time; and where a discount factor within
    the horizon is not above 0.
    """
    document.check(spot)
    intensity = math.log1p(document.ultimate)
    alpha = document.alpha if document.alpha is not None else _found_alpha(document, spot, intensity)
    curve = _fitted(spot, alpha, intensity)
    _check_met(curve, spot)
    years = np.arange(0.0, HORIZON, 0.25)
    below = years[~(curve.factors(years) > 0)]
    if len(below):
        raise ValueError(
            f"smith_wilson: the discount factor for {below[0]:g} years is not above 0; the spot rates leap too far, "
            "or 'alpha' is too small for them"
        )
    return curve


def _fitted(spot: dict[float, float], alpha: float, intensity: float) -> SmithWilsonCurve:
    u = np.array(sorted(spot))
    least, most = np.minimum(u[:, None], u), np.maximum(u[:, None], u)
    wilson = alpha * least - (np.exp(-alpha * (most - least)) - np.exp(-alpha * (most + least))) / 2
    # Both sides times exp(w t), which leaves what the ultimate rate does not explain.
    apart = np.expm1(u * (intensity - np.log1p([spot[maturity] for maturity in u.tolist()])))
    try:
        weights = np.linalg.solve(wilson, apart)
        weights += np.linalg.solve(wilson, apart - wilson @ weights)
    except np.linalg.LinAlgError:
        weights = np.full(len(u), np.nan)
    return SmithWilsonCurve(tuple(u.tolist()), tuple((weights * np.exp(intensity * u)).tolist()), alpha, intensity)


def _check_met(curve: SmithWilsonCurve, spot: dict[float, float]) -> None:
    u = np.array(curve.maturities)
    for t, found in zip(curve.maturities, curve.factors(u).tolist(), strict=True):
        due = (1 + spot[t]) ** -t
        if not max(abs(found - due), abs(curve.factor(t) - due)) <= _MET * due * max(1.0, t):
            raise ValueError(
                f"smith_wilson: the spot rate at maturity {t:g} is not met to {_MET:g}; leave out maturities that lie "
                "too close together, or take a larger 'alpha'"
            )


def _found_alpha(document: SmithWilson, spot: dict[float, float], intensity: float) -> float:
    """Smallest alpha that converges in time: the least allowed, or looked for in thousandths, then to six places."""
    until = float(document.convergence or 0)

    def near(alpha: float) -> bool:
        return _fitted(spot, alpha, intensity).distance(until) <= document.tolerance

    if near(document.least_alpha):
        return document.least_alpha
    return _first(near, math.floor(document.least_alpha * 1e6)) / 1e6


def _first(near: Callable[[float], bool], low: int) -> int:
    """First millionth above ``low`` that is near, where thousandths from ``low`` on tell whereabouts it lies."""
    most = round(MOST_ALPHA * 1e6)
    while not near(min(low + 1000, most) / 1e6):
        low += 1000
        if low >= most:
            raise ValueError(
                f"smith_wilson: no 'alpha' up to {MOST_ALPHA:g} meets 'tolerance' at 'convergence'; allow more of either"
            )
    high = min(low + 1000, most)
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if near(middle / 1e6) else (middle, high)
    return high
