"""Profits of many new policies at once, from their compiled profiles on an experience and a reserving basis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .loops import Profile

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class ProfitArrays:
    """Per policy sold, (n, periods), period 0 at outset; money in currency.

    reserves: held at the end of each period; the other two as in ``PlainProfit``.
    """

    reserves: Numbers
    signature: Numbers
    vector: Numbers


def profits(experience: Profile, reserving: Profile | None) -> ProfitArrays:
    """Return the profits of the same policies on two bases; reserving: None where no reserves are held.

    Raises ValueError for a policy with several guarantees that start at different later points.
    """
    held = np.zeros_like(experience.in_force) if reserving is None else _reserves(experience, reserving)
    factor = experience.discount
    signature = -experience.worth.sum(axis=1) / factor - held
    signature[:, 1:] += held[:, :-1] * factor[:, :-1] / factor[:, 1:]
    before = np.concatenate([np.ones_like(held[:, :1]), experience.in_force[:, :-1]], axis=1)
    vector = np.divide(signature, before, out=np.zeros_like(signature), where=before > 0)
    return ProfitArrays(held, signature, vector)


def _reserves(experience: Profile, reserving: Profile) -> Numbers:
    """Reserves per policy sold: worth of later payments, over the share in force on one basis, times that on the other.

    Shares are those of the point, or of an earlier one from which a payment is certain.
    """
    if (reserving.anchor == -2).any():
        raise ValueError("a policy has several guarantees that start at different later points")
    # What is still to come at the end of each period, added up from the far end.
    ahead = np.zeros_like(reserving.worth)
    ahead[:, :, :-1] = np.cumsum(reserving.worth[:, :, :0:-1], axis=2)[:, :, ::-1]
    ahead /= reserving.discount[:, None, :]
    share = _ratio(experience.in_force, reserving.in_force)
    held: Numbers = ahead[:, 0] * share + ahead[:, 1]
    later = np.maximum(reserving.anchor, 0)
    if not (later % reserving.months == 0).all():
        raise ValueError("a guarantee starts within a period")
    turn = later // reserving.months
    points = np.minimum(np.arange(share.shape[1])[None, :], turn[:, None])
    held += ahead[:, 2] * np.take_along_axis(share, points, axis=1)
    return held


def _ratio(above: Numbers, below: Numbers) -> Numbers:
    ratio: Numbers = np.divide(above, below, out=np.zeros_like(above), where=below > 0)
    return ratio
