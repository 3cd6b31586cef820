"""Svensson's yield curve, with that of Nelson and Siegel as the case without a second hump.

Nelson and Siegel, Parsimonious Modeling of Yield Curves, Journal of Business 60 (1987); Svensson, Estimating and
Interpreting Forward Interest Rates: Sweden 1992-1994, NBER working paper 4871 (1994). With a = t / tau1 and
b = t / tau2 the spot rate at maturity t is

    beta0 + beta1 (1 - exp(-a)) / a + beta2 ((1 - exp(-a)) / a - exp(-a)) + beta3 ((1 - exp(-b)) / b - exp(-b)).

Central banks publish parameters of rates compounded continuously or once a year; the document says which.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from .items import Item
from .spot_rates import HORIZON

Years = NDArray[np.float64]


class Svensson(Item):
    """Parameters of Svensson's spot rates, or with ``beta3`` left out Nelson and Siegel's; 3 % is 0.03."""

    beta0: float = Field(ge=-0.5, le=1, description="rate in the long run")
    beta1: float = Field(0.0, ge=-1, le=1, description="rate at once, less that in the long run")
    beta2: float = Field(0.0, ge=-10, le=10, description="size of the first hump")
    beta3: float = Field(0.0, ge=-10, le=10, description="size of the second hump")
    tau1: float = Field(ge=0.001, le=1000, description="years that place the first hump")
    tau2: float | None = Field(
        None, ge=0.001, le=1000, description="years that place the second hump; needed with 'beta3'"
    )
    compounding: Literal["annual", "continuous"] = Field(
        "annual", description="whether the formula gives annual effective or continuous spot rates"
    )

    @model_validator(mode="after")
    def _makes_a_curve(self) -> Svensson:
        if self.beta3 != 0 and self.tau2 is None:
            raise ValueError("'beta3' needs 'tau2', the years that place the second hump")
        for t in _looked_at():
            if not spot_rate(self, t) > -0.5:
                raise ValueError(
                    f"the spot rate at maturity {t:g} is {spot_rate(self, t):g}; it must stay above -0.5 for "
                    f"{HORIZON:g} years, so look at the parameters"
                )
        return self


def _looked_at() -> list[float]:
    # The shortest hump that is allowed passes within days.
    return [0.0, *np.geomspace(1e-4, 1, 60).tolist(), *np.arange(1.25, HORIZON, 0.25).tolist()]


def spot_rate(parameters: Svensson, t: float) -> float:
    """Spot rate at a maturity t >= 0 in years, term by term; at 0 its limit, beta0 + beta1."""
    p = parameters
    if t == 0:
        return p.beta0 + p.beta1
    a = t / p.tau1
    mean = -math.expm1(-a) / a
    rate = p.beta0 + p.beta1 * mean + p.beta2 * (mean - math.exp(-a))
    if p.tau2 is not None:
        b = t / p.tau2
        rate += p.beta3 * (-math.expm1(-b) / b - math.exp(-b))
    return rate


@dataclass(frozen=True)
class SvenssonCurve:
    """Discount factors of Svensson's spot rates."""

    parameters: Svensson
    flat = False

    def integral(self, t: float) -> float:
        """Integral of the force of interest from 0 to t >= 0 in years."""
        spot = spot_rate(self.parameters, t)
        return t * (math.log1p(spot) if self.parameters.compounding == "annual" else spot)

    def factor(self, t: float) -> float:
        """Discount factor v(t) for t >= 0 in years, from the spot rate."""
        return math.exp(-self.integral(t))

    def factors(self, years: Years) -> Years:
        """Discount factors for many t, from the integral of the instantaneous forward rate.

        The forward rate that belongs to the spot rates is beta0 + (beta1 + beta2 a) exp(-a) + beta3 b exp(-b).
        """
        p = self.parameters
        total = p.beta0 * years + p.beta1 * p.tau1 * _gone(years, p.tau1) + p.beta2 * _hump(years, p.tau1)
        if p.tau2 is not None:
            total = total + p.beta3 * _hump(years, p.tau2)
        if p.compounding == "continuous":
            return np.asarray(np.exp(-total))
        spot = np.divide(total, years, out=np.zeros_like(total), where=years > 0)
        return np.asarray((1 + spot) ** -years)


def _gone(years: Years, tau: float) -> Years:
    return np.asarray(-np.expm1(-years / tau))


def _hump(years: Years, tau: float) -> Years:
    """Integral of (s / tau) exp(-s / tau) over s from 0."""
    return np.asarray(tau * _gone(years, tau) - years * np.exp(-years / tau))
