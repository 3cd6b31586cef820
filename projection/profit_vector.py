"""Profits period by period from cash flows, earned interest and reserves held.

Letters: t = 1 ... m periods; period t runs from point t - 1 to point t. All of it plain array arithmetic over any
number of model points at once: arrays are (..., m) by period or (..., m + 1) by point.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class Profits:
    """Expected profits. vector: per policy in force at the start of the period, the first at outset; signature: per
    policy sold; both (..., m + 1). The others, per policy in force at the start of the period, are (..., m):
    income at the start, interest, outgo at the end, and the cost of the reserve (what must be held at the end
    less what was held at the start).
    """

    vector: Numbers
    signature: Numbers
    start: Numbers
    interest: Numbers
    end: Numbers
    increase_in_reserve: Numbers

    @property
    def strain(self) -> Numbers:
        """New business strain: the loss at outset and in the first period, at the end of each; 0 if a profit."""
        strain: Numbers = np.maximum(0.0, -self.signature[..., :2])
        return strain


def emerging(
    start: ArrayLike, end: ArrayLike, interest: ArrayLike, reserves: ArrayLike, in_force: ArrayLike, outset: float = 0.0
) -> Profits:
    """Profits of each period: (reserve + start)(1 + i) - end - p x reserve at the end.

    start: premiums less expenses and benefits at the start of the period, per policy then in force; end: expected
    outgo at its end; interest: earned in the period; reserves: per policy in force at points 0 ... m; in_force:
    share of the policies sold that is in force at points 0 ... m; outset: charge at outset, before the first
    premium. A reserve at point 0 is charged at outset too. Raises ValueError where the shapes do not fit.
    """
    at_start, at_end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    held, alive = np.asarray(reserves, dtype=np.float64), np.asarray(in_force, dtype=np.float64)
    periods = at_start.shape[-1]
    if at_end.shape[-1] != periods or {held.shape[-1], alive.shape[-1]} != {periods + 1}:
        raise ValueError(f"{periods} periods need as many amounts, and {periods + 1} reserves and shares in force")
    before = alive[..., :-1]
    staying = np.divide(alive[..., 1:], before, out=np.zeros_like(before), where=before > 0)
    earned = (held[..., :-1] + at_start) * np.asarray(interest, dtype=np.float64)
    increase = staying * held[..., 1:] - held[..., :-1]
    later = at_start + earned - at_end - increase
    at_outset = np.broadcast_to(-outset - held[..., :1], (*later.shape[:-1], 1))
    vector = np.concatenate([at_outset, later], axis=-1)
    return Profits(
        vector=vector,
        signature=vector * np.concatenate([np.broadcast_to(alive[..., :1], at_outset.shape), before + 0 * later], -1),
        start=at_start,
        interest=earned,
        end=at_end,
        increase_in_reserve=increase,
    )


def zeroised(start: ArrayLike, end: ArrayLike, interest: ArrayLike, in_force: ArrayLike) -> Numbers:
    """Least reserves, never negative, with which no later period needs money: (..., m + 1), nothing at point m.

    Built backwards: reserve at t - 1 = max(0, (end + p x reserve at t) / (1 + i) - start). Arguments as for
    ``emerging``. The reserve at point 0 is what the first period would need; set it to 0 where the owner
    bears the strain of the first period.
    """
    at_start, at_end = np.asarray(start, dtype=np.float64), np.asarray(end, dtype=np.float64)
    alive = np.asarray(in_force, dtype=np.float64)
    growth = np.broadcast_to(1 + np.asarray(interest, dtype=np.float64), at_start.shape)
    reserves = np.zeros((*at_start.shape[:-1], at_start.shape[-1] + 1))
    for t in range(at_start.shape[-1], 0, -1):
        before = alive[..., t - 1]
        staying = np.divide(alive[..., t], before, out=np.zeros_like(before), where=before > 0)
        needed = (at_end[..., t - 1] + staying * reserves[..., t]) / growth[..., t - 1] - at_start[..., t - 1]
        reserves[..., t - 1] = np.maximum(0.0, needed)
    return reserves
