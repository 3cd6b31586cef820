"""Buyers of the invented demo office: lives at commencement, and how terms, sizes and premiums are drawn."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from .demo_rates import Floats, Whole

FREQUENCY_LOADINGS = {1: 1.0, 2: 1.012, 4: 1.02, 12: 1.03}


@dataclass(frozen=True)
class Buyers:
    """The policies of one product that are being drawn; arrays of one length.

    age: at commencement, in years, not whole; sex: 0 woman, 1 man; entered: age in whole years that the
    rates are entered with, older than the life where the policy is rated.
    """

    random: np.random.Generator
    age: Floats
    sex: Whole
    entered: Whole

    def __len__(self) -> int:
        return len(self.age)

    def amounts(self, median: float, spread: float, step: float) -> Floats:
        """Lognormal amounts in whole steps; ``spread`` is the standard deviation of the logarithm."""
        drawn = median * np.exp(spread * np.clip(self.random.standard_normal(len(self)), -2.5, 2.5))
        return np.asarray(np.maximum(1.0, np.rint(drawn / step)) * step)

    def choice(self, values: tuple[float, ...], weights: tuple[float, ...]) -> Floats:
        """Values drawn with these weights, which add up to 1."""
        edges = np.cumsum(weights)[:-1]
        drawn = np.searchsorted(edges, self.random.random(len(self)), "right")
        return np.asarray(values, dtype=np.float64)[drawn]

    def terms(self, values: tuple[float, ...], weights: tuple[float, ...], end_age: int) -> Whole:
        """Terms in whole years that end at ``end_age`` at the latest, and last five years at least."""
        drawn = self.choice(values, weights)
        kept = np.minimum(drawn, end_age - np.floor(self.age))
        return np.asarray(np.maximum(5, kept), dtype=np.int64)

    def frequencies(self) -> Floats:
        """Premiums a year."""
        return self.choice((1, 2, 4, 12), (0.22, 0.05, 0.11, 0.62))


Columns = dict[str, npt.NDArray[np.float64]]


@dataclass(frozen=True)
class Product:
    """One product of the demo: its share of the policies, who bought it, since when, and its columns.

    ages: lowest, usual and highest age at commencement; sold: years over which it has been sold; scale: years
    over which the sales still in force fall by a factor of e, looking back; columns: draws its amounts.
    """

    code: str
    share: float
    ages: tuple[float, float, float]
    women: float
    sold: float
    scale: float
    columns: Callable[[Buyers], Columns]


def instalments(yearly: Floats, frequency: Floats) -> Floats:
    """Yearly premiums with the loading for their frequency, whose instalments are whole cents."""
    loading = np.ones_like(yearly)
    for times, factor in FREQUENCY_LOADINGS.items():
        loading[frequency == times] = factor
    return np.asarray(np.round(np.rint(100 * yearly * loading / frequency) * frequency / 100, 2))
