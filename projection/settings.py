"""The settings of a valuation that change a number."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import Literal

Step = Literal["month", "year"]
Due = Literal["settled", "outstanding"]


@dataclass(frozen=True)
class Settings:
    """What the valuation is asked, beside the basis and the designs.

    valuation_date: end of this day; step: length of a projection step, counted from each policy's own
    commencement; due: whether cash flows due on the valuation date are settled or outstanding; decimals: of
    the currency's minor unit.
    """

    valuation_date: date
    step: Step = "month"
    due: Due = "settled"
    decimals: int = 2

    @property
    def step_months(self) -> int:
        """Months in a step."""
        return 12 if self.step == "year" else 1
