"""Premium rates of the invented demo office: commutation columns of its own invented mortality.

The rates are rough on purpose: yearly functions, ages in whole years, one rate of interest. They make the
premiums of the demo fit its benefits, so that its reserves look like reserves. No valuation rests on them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Whole = npt.NDArray[np.int64]

PREMIUM_INTEREST = 0.0275
LAST_AGE = 129
# Makeham's A, B, c for women and men.
ASSURED = ((0.0003, 3.81e-6, 1.1247), (0.0004, 7.60e-6, 1.1185))
ANNUITANTS = ((0.00015, 2.02e-6, 1.1281), (0.0002, 3.59e-6, 1.1245))


@dataclass(frozen=True)
class Commutation:
    """Commutation columns D, N, M, R by sex (0 woman, 1 man) and age in whole years; shapes (2, ages).

    D = l v^x, N = sum of D from x on, M = sum of d v^(x+1) from x on, R = sum of M from x on (International
    Actuarial Notation). Every function takes arrays of sexes, ages x and terms n of one length.
    """

    D: Floats
    N: Floats
    M: Floats
    R: Floats

    def annuity(self, sex: Whole, x: Whole, n: Whole) -> Floats:
        """Temporary annuity of 1 a year in advance."""
        return np.asarray((self.N[sex, x] - self.N[sex, x + n]) / self.D[sex, x])

    def whole_annuity(self, sex: Whole, x: Whole) -> Floats:
        """Annuity of 1 a year in advance for life."""
        return np.asarray(self.N[sex, x] / self.D[sex, x])

    def assurance(self, sex: Whole, x: Whole, n: Whole) -> Floats:
        """1 at the end of the year of death within n years."""
        return np.asarray((self.M[sex, x] - self.M[sex, x + n]) / self.D[sex, x])

    def whole_assurance(self, sex: Whole, x: Whole) -> Floats:
        """1 at the end of the year of death, whenever."""
        return np.asarray(self.M[sex, x] / self.D[sex, x])

    def survival(self, sex: Whole, x: Whole, n: Whole) -> Floats:
        """1 after n years to those who live."""
        return np.asarray(self.D[sex, x + n] / self.D[sex, x])

    def rising(self, sex: Whole, x: Whole, n: Whole) -> Floats:
        """1, 2, 3 ... at the end of the year of death within n years, by year of death."""
        return np.asarray((self.R[sex, x] - self.R[sex, x + n] - n * self.M[sex, x + n]) / self.D[sex, x])

    def falling(self, sex: Whole, x: Whole, n: Whole) -> Floats:
        """1, (n - 1) / n, ... 1 / n at the end of the year of death within n years, by year of death."""
        rest = self.R[sex, x + 1] - self.R[sex, x + n + 1]
        return np.asarray((self.M[sex, x] - rest / n) / self.D[sex, x])


def commutation(law: tuple[tuple[float, float, float], ...], interest: float) -> Commutation:
    """Return the columns of a Makeham law for women and men at a yearly rate of interest.

    Survival is exp(-A x - B (c^x - 1) / log c), the integral of the force A + B c^x.
    """
    ages = np.arange(LAST_AGE + 2, dtype=np.float64)
    parameters = np.array(law)[:, :, np.newaxis]
    A, B, c = parameters[:, 0], parameters[:, 1], parameters[:, 2]
    lives = np.exp(-A * ages - B * (c**ages - 1) / np.log(c))
    lives[:, -1] = 0.0
    v = 1 / (1 + interest)
    D = lives * v**ages
    deaths = np.append(lives[:, :-1] - lives[:, 1:], np.zeros((len(law), 1)), axis=1)
    M = _from_the_end(deaths * v ** (ages + 1))
    # Beyond the last age every column is nothing; the spare ages let x + n run past it.
    columns = (D, _from_the_end(D), M, _from_the_end(M))
    return Commutation(*(np.pad(column, ((0, 0), (0, 60))) for column in columns))


def _from_the_end(column: Floats) -> Floats:
    return np.asarray(column[:, ::-1].cumsum(axis=1)[:, ::-1])


def certain_annuity(n: Floats, interest: float = PREMIUM_INTEREST) -> Floats:
    """1 a year in advance for n years, whatever happens."""
    v = 1 / (1 + interest)
    return np.asarray((1 - v**n) / (1 - v))


ASSURED_RATES = commutation(ASSURED, PREMIUM_INTEREST)
ANNUITANT_RATES = commutation(ANNUITANTS, PREMIUM_INTEREST)
