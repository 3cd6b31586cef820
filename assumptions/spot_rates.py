"""Spot rates by maturity as interest rules hold them, checked."""

from __future__ import annotations

import math
from typing import Final

HORIZON: Final = 160.0
"""Years from the valuation date for which a curve must hold: the longest contract, and claims paid late."""


def by_maturity(value: object) -> object:
    """Return rates by maturity as a number: the keys of TOML are text. Anything but a table is left as it is.

    Raises ValueError for a maturity that is no number, or there twice.
    """
    if not isinstance(value, dict):
        return value
    held: dict[float, object] = {}
    for key, rate in value.items():
        try:
            maturity = float(key)
        except (TypeError, ValueError):
            raise ValueError(f"maturity '{key}' is not a number of years") from None
        if maturity in held:
            raise ValueError(f"maturity {maturity:g} is there twice; give each once")
        held[maturity] = rate
    return held


def check_rate(rate: float, what: str) -> None:
    """Raise ValueError for a yearly rate that is not above -0.5, or above 1."""
    if not -0.5 < rate <= 1:
        raise ValueError(f"{what} is {rate:g}; a yearly rate must lie above -0.5 and not above 1")


def check_spots(spot: dict[float, float]) -> list[float]:
    """Return the maturities in order.

    Raises ValueError where there is none, for one that is not a finite number above 0, and for a rate out of range.
    """
    if not spot:
        raise ValueError("a spot curve needs at least one maturity")
    for maturity, rate in spot.items():
        if not 0 < maturity < math.inf:
            raise ValueError(f"maturity {maturity:g} is not above 0 and finite; give years")
        check_rate(rate, f"the spot rate at maturity {maturity:g}")
    return sorted(spot)
