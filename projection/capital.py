"""Figures of capital from reserves before and after shocks, policy by policy.

All arrays have one number per policy, in the order of the extract and in one unit of money. A figure is a loss: the
rise of the reserve. Whole numbers (minor units) stay whole numbers, so that sums are exact; shares of them are rounded
half-even per policy.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from assumptions.shock_sets import Correlation, Risk, ShockSet

Money = NDArray[Any]


def rises(base: Money, shocked: Money, counts: str = "all policies") -> Money:
    """Return the rise of each policy's reserve; with 'where the reserve rises', 0 where it falls.

    The latter is the test per policy of Delegated Regulation (EU) 2015/35, Articles 137, 138, 142 and 143.
    """
    change = shocked - base
    return np.maximum(change, 0) if counts == "where the reserve rises" else change


def after_leaving(value: Money, surrender: Money, share: float) -> Money:
    """Return the value after a share of each policy has left at once for its surrender value.

    (1 - m) V + m S: of many like policies the share m is paid S now, and the others go on as before. S is due on the
    valuation date, by the contract, and needs no discount.
    """
    return value + _part(surrender - value, share)


def leaving_strain(value: Money, surrender: Money, share: float, counts: str = "where the reserve rises") -> Money:
    """Return the rise of each policy's reserve by those that leave: m (S - V), or m max(S - V, 0)."""
    return rises(value, after_leaving(value, surrender, share), counts)


def revision_strain(benefits: Money, share: float) -> Money:
    """Return what benefits that rise at once by a share cost: the share of their value."""
    return _part(benefits, share)


def _part(amounts: Money, share: float) -> Money:
    part = share * amounts
    whole = np.issubdtype(np.asarray(amounts).dtype, np.integer)
    return np.asarray(np.rint(part).astype(np.int64) if whole else part)


def risk_figure(risk: Risk, losses: Mapping[str, Money]) -> float:
    """Return the figure of a risk: the worst sum over the policies among its shocks, at least 0.

    losses: by name of a shock, the rise of each policy's reserve.
    """
    sums = [rises(np.zeros_like(losses[name]), losses[name], risk.counts).sum() for name in risk.shocks]
    return float(max(0, *sums))


def risk_figures(shocks: ShockSet, losses: Mapping[str, Money]) -> dict[str, float]:
    """Return the figure of every risk of a set by its name. Raises KeyError for a shock without losses."""
    return {risk.name: risk_figure(risk, losses) for risk in shocks.risk}


def combined(figures: Mapping[str, float], correlations: Iterable[Correlation]) -> float:
    """Return the figure of several risks together: sqrt(sum over i and j of rho_ij x_i x_j).

    A risk goes with itself by 1, and two that are not named together by 0. Raises ValueError where the correlations
    make the sum negative, so that they are none.
    """
    names: Sequence[str] = list(figures)
    total = sum(figures[name] ** 2 for name in names)
    for one in correlations:
        first, second = one.between
        total += 2 * one.figure * figures.get(first, 0.0) * figures.get(second, 0.0)
    if total < -1e-12 * sum(figures[name] ** 2 for name in names):
        raise ValueError(f"the correlations give {total:g} under the root; they are not correlations of these risks")
    return sqrt(max(0.0, total))
