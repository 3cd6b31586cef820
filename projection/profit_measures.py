"""Measures of a profit signature: value, margin, internal rates of return, payback.

A signature holds the expected profits per policy sold, the first at outset and the others one period apart each.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Numbers = NDArray[np.float64]

_HALVINGS = 200
_LARGEST_LOG = 60.0
_NEARLY_REAL = 1e-6


@dataclass(frozen=True)
class InternalRates:
    """Rates per period at which a signature is worth nothing, in ascending order, and what can be said of them.

    sign_changes: of the profits in order of time, zeros left out. By Descartes' rule of signs no more rates exceed
    -100%, and their number falls short of it by an even number.
    """

    rates: tuple[float, ...]
    sign_changes: int

    @property
    def words(self) -> str:
        """What to tell a reader."""
        changes = {0: "no change of sign", 1: "one change of sign"}.get(
            self.sign_changes, f"{self.sign_changes} changes of sign"
        )
        if not self.rates:
            return f"no internal rate of return ({changes})"
        if self.sign_changes == 1:
            return f"one internal rate of return ({changes})"
        found = "one internal rate" if len(self.rates) == 1 else f"{len(self.rates)} internal rates"
        return f"{found} of return ({changes}): do not decide by it"


def present_value(amounts: ArrayLike, rate: float) -> float:
    """Value at outset of amounts one period apart, the first at outset. ``rate``: per period, above -1."""
    numbers = _checked(amounts)
    if not rate > -1:
        raise ValueError(f"the rate per period is {rate}; it must exceed -1")
    return float(numbers @ (1 + rate) ** -np.arange(len(numbers), dtype=float))


def profit_margin(signature: ArrayLike, premiums: ArrayLike, rate: float) -> float:
    """Value of the profits over the value of the premiums; both start at outset, premiums per policy sold.

    Raises ValueError where the premiums are worth nothing.
    """
    value = present_value(premiums, rate)
    if value == 0:
        raise ValueError("the premiums are worth nothing; there is no profit margin")
    return present_value(signature, rate) / value


def discounted_payback(signature: ArrayLike, rate: float) -> int | None:
    """First period by whose end the value of the profits so far is not negative; None if there is none.

    0 where there is no strain at outset. Later losses may make the sum negative again; the first time counts.
    """
    numbers = _checked(signature)
    sums = np.cumsum(numbers * (1 + rate) ** -np.arange(len(numbers), dtype=float))
    reached = np.flatnonzero(sums >= 0)
    return int(reached[0]) if len(reached) else None


def sign_changes(amounts: ArrayLike) -> int:
    """Number of changes of sign, zeros left out."""
    signs = np.sign(_checked(amounts))
    signs = signs[signs != 0]
    return int((signs[1:] != signs[:-1]).sum())


def internal_rates(signature: ArrayLike) -> InternalRates:
    """All internal rates of return per period above -100%.

    With one change of sign there is just one, found by halving; with several, the positive roots v of the
    polynomial with the profits as coefficients, refined by Newton's rule, give rates 1/v - 1.
    """
    numbers = _checked(signature)
    changes = sign_changes(numbers)
    if changes == 0:
        return InternalRates((), 0)
    present = np.flatnonzero(numbers)
    numbers = numbers[present[0] : present[-1] + 1]
    numbers = numbers / np.abs(numbers).max()
    if changes == 1:
        return InternalRates((float(np.expm1(-_halved(numbers))),), 1)
    roots = np.roots(numbers[::-1])
    near = roots[(np.abs(roots.imag) <= _NEARLY_REAL * np.abs(roots)) & (roots.real > 0)].real
    refined = sorted(1 / _refined(numbers, float(v)) - 1 for v in near)
    return InternalRates(tuple(refined), changes)


def _checked(amounts: ArrayLike) -> Numbers:
    numbers = np.atleast_1d(np.asarray(amounts, dtype=np.float64))
    if numbers.ndim != 1 or not np.isfinite(numbers).all():
        raise ValueError("profits must be a row of finite numbers")
    return numbers


def _halved(numbers: Numbers) -> float:
    """ln v of the only root; the sign of the sum is that of the first amount for small v, of the last for large."""
    powers = np.arange(len(numbers), dtype=float)

    def sign(log: float) -> float:
        # Scaled by the largest power, which does not change the sign.
        return float(np.sign(numbers @ np.exp(powers * log - max(0.0, powers[-1] * log))))

    low, high = -_LARGEST_LOG, _LARGEST_LOG
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if sign(middle) == np.sign(numbers[0]) else (low, middle)
    return (low + high) / 2


def _refined(numbers: Numbers, v: float) -> float:
    polynomial = np.polynomial.Polynomial(numbers)
    slope = polynomial.deriv()
    for _ in range(3):
        steep = float(slope(v))
        moved = v - float(polynomial(v)) / steep if steep else v
        # A step that leaves the neighbourhood means a double root, at which the rule says nothing.
        if not abs(moved - v) <= 1e-3 * v:
            break
        v = moved
    return v
