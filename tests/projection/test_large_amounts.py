"""Payments of any size: cash flows stay exact, and a policy that is not valued leaves none behind."""

from __future__ import annotations

from datetime import date

import pyarrow as pa
import pytest

import projection

TODAY = date(2026, 11, 30)
BASIS = {
    "mortality": {"rule": [{"table": {"law": "de Moivre", "omega": 110}}]},
    "interest": {"rule": [{"flat": 0.0}]},
}


def valuation(stream: dict[str, object], sums: list[float]) -> projection.Valuation:
    """Policies of one design, one for each sum assured."""
    design = {
        "code": "BIG",
        "stream": [{"name": "sum", "direction": "out", "amount": "sum_assured", "share": 1000.0, **stream}],
    }
    table = pa.table(
        {
            "policy_id": [f"Q{n}" for n in range(len(sums))],
            "product": ["BIG"] * len(sums),
            "status": ["in force"] * len(sums),
            "birth_date": [date(1970, 1, 1)] * len(sums),
            "commencement_date": [date(2020, 1, 1)] * len(sums),
            "sum_assured": sums,
        }
    )
    return projection.value(table, [design], BASIS, TODAY)


ONCE = {"while": "certain", "from": 10, "paid": "once"}
MONTHLY = {"while": "certain", "from": 0, "to": 10, "a_year": 12}
STEPPED = {**MONTHLY, "pattern": [{"years": 9, "share": 1.0}, {"share": 4.0}]}


@pytest.mark.parametrize("stream", [ONCE, MONTHLY, STEPPED])
@pytest.mark.parametrize("large", [2.3e7, 9e8])
def test_large_payments_are_added_exactly(stream: dict[str, object], large: float) -> None:
    found = valuation(stream, [large, 1.0])
    assert found.exceptions.num_rows == 0
    paid = sum(found.cash_flows["amount"].to_pylist())
    # Without interest, what is certain adds up to the reserve; a monthly payment is rounded 37 times.
    assert paid == pytest.approx(sum(found.policies["reserve"].to_pylist()), rel=1e-13, abs=0.2)


def test_death_benefits_too() -> None:
    found = valuation({"on": "death", "from": 0, "to": 30}, [9e8, 1.0])
    paid = sum(found.cash_flows["amount"].to_pylist())
    assert paid == pytest.approx(sum(found.policies["reserve"].to_pylist()), rel=1e-11)


@pytest.mark.parametrize("stream", [ONCE, MONTHLY, {"on": "death", "from": 0, "to": 30}])
def test_what_is_not_valued_has_no_cash_flows(stream: dict[str, object]) -> None:
    found = valuation(stream, [1e10, 1.0])
    alone = valuation(stream, [1.0])
    if found.exceptions.num_rows == 0:
        found = valuation({**stream, "increase": {"rate": 1.0}}, [1e10, 1.0])
        alone = valuation({**stream, "increase": {"rate": 1.0}}, [1.0])
    assert found.exceptions["reason"].to_pylist() == ["result not a number, or too large"]
    assert found.cash_flows.equals(alone.cash_flows)
