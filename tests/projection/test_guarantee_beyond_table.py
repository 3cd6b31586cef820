"""A guarantee for life that outlasts the mortality table is paid in full; closed form, no outside source needed."""

from __future__ import annotations

from datetime import date

import pyarrow as pa
import pytest

import projection

DESIGN = {
    "code": "LATE",
    "title": "Annuity of the very old",
    "states": "one life",
    "stream": [
        {
            "name": "annuity", "direction": "out", "amount": "annuity_pa", "while": "alive", "from": 0, "a_year": 1,
            "paid": "arrears", "guarantee": "guarantee_years",
        }
    ],
}  # fmt: skip

BASIS = {
    "mortality": {"age": "last birthday", "rule": [{"table": {"law": "de Moivre", "omega": 110}}]},
    "interest": {"rule": [{"flat": 0.03}]},
}


def annuity(guarantee_years: int) -> float:
    """Reserve of 1,000 a year at the age of 107, on the day of commencement."""
    policy = pa.table(
        {
            "policy_id": ["Q1"],
            "product": ["LATE"],
            "status": ["in force"],
            "birth_date": [date(1920, 1, 1)],
            "commencement_date": [date(2027, 1, 1)],
            "annuity_pa": [1000.0],
            "guarantee_years": [float(guarantee_years)],
        }
    )
    found = projection.value(policy, [DESIGN], BASIS, date(2027, 1, 1), step="year")
    return float(found.policies["reserve"].to_pylist()[0])


def test_payments_are_certain_to_the_end_of_the_guarantee() -> None:
    certain = sum(1000 * 1.03**-t for t in range(1, 11))
    assert annuity(10) == pytest.approx(certain, abs=0.005)


def test_without_a_guarantee_nothing_is_paid_beyond_the_table() -> None:
    # Of those aged 107, two thirds live to 108, a third to 109 and nobody to 110.
    assert annuity(0) == pytest.approx(1000 * (2 / 3 / 1.03 + 1 / 3 / 1.03**2), abs=0.005)
