"""The interest part of a basis: discount factors from the valuation date.

All rates are annual effective. Flat, forward and spot rates come down to the integral H(t) of the force of interest
from 0 to t years, which is piecewise linear, and v(t) = exp(-H(t)); yield curves in closed form stand in a module of
their own.
"""

from __future__ import annotations

import math
from bisect import bisect_left
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, field_validator, model_validator

from .items import Item
from .rules import Rule
from .yield_curves import SmithWilson, Svensson, inline_spots, smith_wilson_curve, svensson_curve

FORMS = ("flat", "forward", "spot", "svensson", "smith_wilson")
"""Keys of an interest rule, of which each has one."""


class InterestRule(Rule):
    """A curve for the policies that fit: flat, yearly forwards, spot rates by maturity, or a yield curve's formula."""

    flat: float | None = Field(None, description="one rate for all times")
    forward: list[float] | None = Field(
        None, min_length=1, description="rates of the first, second ... year from the valuation date, the last held"
    )
    spot: dict[float, float] | str | None = Field(
        None,
        description="rates by maturity in years, inline or a CSV or Parquet file with columns 'maturity' and 'rate'; "
        "constant forward rate between maturities, the last one held",
    )

    svensson: Svensson | None = Field(None, description="spot rates by the formula of Svensson, or Nelson and Siegel")
    smith_wilson: SmithWilson | None = Field(
        None, description="spot rates by maturity, and an ultimate forward rate that the curve tends to"
    )

    @field_validator("spot", mode="before")
    @classmethod
    def _keys(cls, value: object) -> object:
        # TOML keys are text; maturities are numbers.
        return inline_spots(value) if isinstance(value, dict) else value

    @model_validator(mode="after")
    def _one_form(self) -> InterestRule:
        given = [name for name in FORMS if getattr(self, name) is not None]
        if len(given) != 1:
            said = f"; {' and '.join(given)} are given" if given else ""
            raise ValueError(f"an interest rule needs one of {', '.join(map(repr, FORMS))}{said}")
        if self.flat is not None:
            _check_rate(self.flat, "flat")
        for year, rate in enumerate(self.forward or (), 1):
            _check_rate(rate, f"the forward of year {year}")
        return self


def _check_rate(rate: float, what: str) -> None:
    if not -0.5 < rate <= 1:
        raise ValueError(f"{what} is {rate:g}; a yearly rate must lie above -0.5 and not above 1")


class Interest(Item):
    """The curves and which policies each is for."""

    rule: list[InterestRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")


@dataclass(frozen=True)
class Curve:
    """Integral of the force of interest, linear between knots and after the last at ``final_force``.

    times: knots in years from the valuation date, the first is 0; integrals: H at the knots.
    """

    times: tuple[float, ...]
    integrals: tuple[float, ...]
    final_force: float

    @property
    def flat(self) -> bool:
        """Whether the force is the same at all times."""
        return len(self.times) == 1

    def factors(self, years: NDArray[np.float64]) -> NDArray[np.float64]:
        """Discount factors for many t >= 0 in years."""
        beyond = np.maximum(years - self.times[-1], 0)
        integral = np.interp(years, np.array(self.times), np.array(self.integrals)) + self.final_force * beyond
        return np.asarray(np.exp(-integral))

    def integral(self, t: float) -> float:
        """H(t) for t >= 0 in years."""
        if t >= self.times[-1]:
            return self.integrals[-1] + self.final_force * (t - self.times[-1])
        right = max(1, bisect_left(self.times, t))
        t0, t1 = self.times[right - 1], self.times[right]
        h0, h1 = self.integrals[right - 1], self.integrals[right]
        return h0 + (h1 - h0) * ((t - t0) / (t1 - t0))

    def factor(self, t: float) -> float:
        """Discount factor v(t) = exp(-H(t)) for t >= 0 in years."""
        return math.exp(-self.integral(t))


class YieldCurve(Protocol):
    """Discount factors from the valuation date."""

    @property
    def flat(self) -> bool:
        """Whether the force is the same at all times."""

    def integral(self, t: float) -> float:
        """Integral of the force of interest from 0 to t >= 0 in years."""

    def factor(self, t: float) -> float:
        """Discount factor v(t)."""

    def factors(self, years: NDArray[np.float64]) -> NDArray[np.float64]:
        """Discount factors for many t."""


def curve_of(rule: InterestRule, spot: dict[float, float] | None) -> YieldCurve:
    """Return the curve of a rule; spot: the spot rates by maturity that it holds or names.

    Raises ValueError for figures that make no curve.
    """
    if rule.svensson is not None:
        return svensson_curve(rule.svensson)
    if rule.smith_wilson is not None:
        _check_spots(spot or {})
        return smith_wilson_curve(rule.smith_wilson, spot or {})
    return curve_from(rule.flat, rule.forward, spot)


def curve_from(
    flat: float | None = None,
    forward: list[float] | None = None,
    spot: dict[float, float] | None = None,
) -> Curve:
    """Return the curve of a rule's figures; spot rates are by maturity in years, all above 0.

    Raises ValueError for spot rates without a maturity, or with one that is not above 0.
    """
    if flat is not None:
        return Curve((0.0,), (0.0,), math.log1p(flat))
    if forward is not None:
        forces = [math.log1p(rate) for rate in forward]
        integrals = [0.0]
        for force in forces[:-1]:
            integrals.append(integrals[-1] + force)
        return Curve(tuple(float(year) for year in range(len(forces))), tuple(integrals), forces[-1])
    return _from_spot(spot or {})


def _check_spots(spot: dict[float, float]) -> list[float]:
    maturities = sorted(spot)
    if not maturities:
        raise ValueError("key 'spot' is empty; a spot curve needs at least one maturity")
    if maturities[0] <= 0:
        raise ValueError(f"key 'spot': maturity {maturities[0]:g} is not above 0; give maturities in years")
    for maturity in maturities:
        _check_rate(spot[maturity], f"key 'spot': the rate at maturity {maturity:g}")
    return maturities


def _from_spot(spot: dict[float, float]) -> Curve:
    maturities = _check_spots(spot)
    times = [0.0, *maturities]
    integrals = [0.0, *(maturity * math.log1p(spot[maturity]) for maturity in maturities)]
    final = (integrals[-1] - integrals[-2]) / (times[-1] - times[-2])
    return Curve(tuple(times), tuple(integrals), final)
