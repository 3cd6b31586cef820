"""Profits of model points from a notebook, against the plain twin."""

from __future__ import annotations

from datetime import date

import numpy as np
import pyarrow as pa
import pytest
from plain_cases import BORN, COMMENCED, MAKEHAM, basis, design, policy, stream

from projection.plain_profit import plain_profit
from projection.profit_measures import present_value
from projection.profit_notebook import new_business_profits

pytestmark = pytest.mark.compiled
"""Whole offices: without compilation they take minutes."""

CONTRACT = design(
    stream("premium", 30.0, direction="in", to=5, a_year=4),
    stream("cover", 1000.0, on="death", to=10),
    stream("income", 20.0, start=5, to=12, a_year=12, guarantee=3),
)


def documents(i: float) -> dict:
    return {"mortality": {"age": "exact", "rule": [{"table": MAKEHAM}]}, "interest": {"rule": [{"flat": i}]}}


def model_points(commenced: date = COMMENCED) -> pa.Table:
    columns = {"policy_id": ["P1"], "product": ["PIER"], "status": ["in force"]}
    return pa.table({**columns, "birth_date": [BORN], "commencement_date": [commenced]})


@pytest.mark.parametrize("reserves", ["gross premium", "none"])
def test_the_same_as_the_twin(reserves: str) -> None:
    found = new_business_profits(
        model_points(), CONTRACT, documents(0.05), documents(0.02), COMMENCED, 0.1, reserves=reserves
    )
    twin = plain_profit(policy(), CONTRACT, basis(i=0.05), basis(i=0.02), reserves=reserves)
    assert found.policy_id == ["P1"]
    np.testing.assert_allclose(found.arrays.signature[0, : len(twin.signature)], twin.signature, rtol=0, atol=1e-9)
    assert found.value[0] == pytest.approx(present_value(twin.signature, 0.1), abs=1e-9)


def test_other_days_of_sale_are_refused() -> None:
    with pytest.raises(ValueError, match="does not commence"):
        new_business_profits(model_points(date(2026, 1, 1)), CONTRACT, documents(0.05), documents(0.02), COMMENCED, 0.1)
