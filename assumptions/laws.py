"""Laws of mortality in closed form: de Moivre, Gompertz, Makeham, with select factors.

A law gives yearly rates q at any age, whole or not. The force of mortality is, in the usual letters,

    de Moivre   mu_x = 1 / (omega - x)
    Gompertz    mu_x = B c^x
    Makeham     mu_x = A + B c^x

and with select factors (Dickson, Hardy and Waters, *Actuarial Mathematics for Life Contingent Risks*)

    mu_[x]+s = factor^(years - s) mu_x+s     for 0 <= s <= years.
"""

from __future__ import annotations

import math
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from .items import Sourced


class SelectFactor(Sourced):
    """The force of newly selected lives as a share of the ultimate force."""

    factor: float = Field(gt=0, le=1, description="share by which each year nearer to selection counts")
    years: int = Field(ge=1, le=30, description="select period in years")


class Law(Sourced):
    """A law of mortality with its parameters; rates continue to ``last_age``, where the last life dies."""

    law: Literal["de Moivre", "Gompertz", "Makeham"] = Field(description="which law")
    A: float = Field(0.0, ge=0, description="force that does not depend on age (Makeham)")
    B: float = Field(0.0, ge=0, description="factor of the force that grows with age")
    c: float = Field(1.0, gt=0, description="yearly growth of the force with age")
    omega: float | None = Field(None, gt=0, description="age that nobody survives (de Moivre)")
    select: SelectFactor | None = Field(None, description="select factors")
    first_age: int = Field(0, ge=0, le=120, description="lowest age at entry for which the law may be used")
    last_age: int = Field(129, ge=1, le=150, description="age in whose year the last life dies")

    @model_validator(mode="after")
    def _complete(self) -> Law:
        if self.law == "de Moivre":
            if self.omega is None:
                raise ValueError("de Moivre's law needs 'omega'")
            if self.A or self.B or self.select:
                raise ValueError("de Moivre's law takes 'omega' only")
        else:
            if self.omega is not None:
                raise ValueError(f"{self.law}'s law takes no 'omega'")
            if self.B <= 0 or self.c <= 1:
                raise ValueError(f"{self.law}'s law needs 'B' above 0 and 'c' above 1")
            if self.law == "Gompertz" and self.A:
                raise ValueError("Gompertz's law takes no 'A'; with 'A' it is Makeham's")
        return self

    @property
    def closed(self) -> bool:
        """Nobody is left at ``final_age``."""
        return True

    @property
    def final_age(self) -> int:
        """Age at whose end nobody is left."""
        if self.omega is not None:
            return math.ceil(self.omega)
        return self.last_age + 1

    @property
    def whole_ages_only(self) -> bool:
        """Whether age at entry must be a whole number."""
        return False

    def force(self, age: float, duration: float | None = None) -> float:
        """Force of mortality at an exact age, and at a duration since selection if one is given."""
        if self.omega is not None:
            return math.inf if age >= self.omega else 1 / (self.omega - age)
        ultimate: float = self.A + self.B * self.c**age
        if self.select is None or duration is None or duration >= self.select.years:
            return ultimate
        return float(self.select.factor ** (self.select.years - duration) * ultimate)

    def rate(self, entry_age: float, duration: int) -> float:
        """Rate q_[x]+t of the year that starts ``duration`` whole years after entry at exact age x.

        The force is integrated in closed form over the year, also where it is reduced by select factors.
        From the year of ``last_age`` on, the rate is 1.
        """
        age = entry_age + duration
        if self.omega is not None:
            return 1.0 if age + 1 >= self.omega else 1 / (self.omega - age)
        if age >= self.last_age:
            return 1.0
        grown = self.B * self.c**age
        if self.select is None or duration >= self.select.years:
            return -math.expm1(-(self.A + grown * _mean_growth(self.c)))
        factor = self.select.factor
        share = factor ** (self.select.years - duration)
        hazard = share * (self.A * _mean_growth(1 / factor) + grown * _mean_growth(self.c / factor))
        return -math.expm1(-hazard)

    def rates_from(self, entry_age: float, years: int) -> NDArray[np.float64]:
        """Rates of the years that start 0, 1 ... ``years - 1`` years after entry, as ``rate`` gives one by one."""
        durations = np.arange(years)
        ages = entry_age + durations
        if self.omega is not None:
            left = self.omega - ages
            return np.where(left <= 1, 1.0, 1 / np.maximum(left, 1))
        grown = self.B * self.c**ages
        hazard = self.A + grown * _mean_growth(self.c)
        if self.select is not None:
            factor = self.select.factor
            share = factor ** (self.select.years - durations.astype(np.float64))
            reduced = share * (self.A * _mean_growth(1 / factor) + grown * _mean_growth(self.c / factor))
            hazard = np.where(durations < self.select.years, reduced, hazard)
        return np.where(ages >= self.last_age, 1.0, -np.expm1(-hazard))


def _mean_growth(c: float) -> float:
    """Integral of c^s for s from 0 to 1."""
    return 1.0 if c == 1 else (c - 1) / math.log(c)
