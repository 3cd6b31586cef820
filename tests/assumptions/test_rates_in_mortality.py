"""A table takes the place of rates in the mortality part of a basis."""

from __future__ import annotations

import numpy as np
import pytest

from assumptions.mortality import MortalityRule, Rates, adjusted_rate
from assumptions.tables import RateTable


def test_adjustments_work_on_a_table() -> None:
    rates: Rates = RateTable("plain", np.array([0.01, 0.02, 0.03, 0.04, 1.0]), 60)
    rule = MortalityRule(table="plain.csv", multiple=2, added_years=1, extra=0.001)
    assert adjusted_rate(rule, rates, 60, 1) == pytest.approx(0.061, rel=1e-14)
    assert adjusted_rate(rule, rates, 60, 3) == 1.0
