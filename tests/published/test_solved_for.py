"""Published premiums and alterations, solved for by the program's own documents: premium tables and alterations."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from contracts import ILLUSTRATIVE, STANDARD, nearest_is_key, printed

from assumptions.basis import Basis, BasisDocument, prepare_basis
from portfolios.designs import Design
from projection.alteration import alter
from projection.documents import check_document
from projection.premium_document import PremiumDocument
from projection.premium_rates import premiums
from projection.settings import Settings

SOLD = date(2001, 3, 1)
Streams = list[dict[str, Any]]

PREMIUM = {"name": "premium", "direction": "in", "amount": "premium_pa", "while": "alive"}
DEATH = {"name": "death", "direction": "out", "amount": "sum_assured", "on": "death"}


def basis(rates: dict[str, Any], interest: float, expense: Streams | None = None) -> Basis:
    document = {
        "mortality": {"age": "last birthday", "rule": [{"table": rates}]},
        "interest": {"rule": [{"flat": interest}]},
        "expense": expense or [],
    }
    return prepare_basis(check_document(document, BasisDocument, "basis"))


def design(streams: Streams) -> Design:
    return check_document({"code": "CASE", "stream": streams}, Design, "design")


def solved(streams: Streams, on: Basis, age: int, **more: Any) -> float:
    """The unrounded amount of a table of one cell, at yearly steps."""
    document = {
        "sale_date": SOLD,
        "designs": "",
        "design": "CASE",
        "basis": "",
        "unknown": "premium_pa",
        "step": "year",
        "grid": {"age": [age]},
        **more,
    }
    found = premiums(check_document(document, PremiumDocument, "premium"), [design(streams)], on)
    assert found.table.column("why").to_pylist() == [""]
    return float(found.table.column("amount")[0].as_py())


def test_b02_whole_life_premium() -> None:
    found = solved([PREMIUM, DEATH], basis(STANDARD, 0.05), 62, policy={"sum_assured": 10_000})
    assert found == pytest.approx(printed("B02")["P"], abs=0.005)


def test_b11_natural_premiums_after_20_years() -> None:
    """After 20 years the premium is that of the year: both sides are worth the same from then on, and are left out."""
    term = [{**PREMIUM, "to": 20}, {**DEATH, "to": 20}]
    assert nearest_is_key("B11", solved(term, basis(ILLUSTRATIVE, 0.06), 40, policy={"sum_assured": 1000}), "pi")


def test_b45_paid_up_sum_after_8_years() -> None:
    """The surrender value is the net reserve; with premiums stopped it buys a paid-up endowment."""
    on = basis(ILLUSTRATIVE, 0.06)
    endowment = [
        {**PREMIUM, "to": "term_years"},
        {**DEATH, "to": "term_years"},
        {
            "name": "maturity", "direction": "out", "amount": "sum_assured", "while": "alive",
            "from": "term_years", "paid": "once",
        },
    ]  # fmt: skip
    net = solved(endowment, on, 45, policy={"sum_assured": 20_000, "term_years": 20})
    policy = pa.table(
        {
            "policy_id": ["1"],
            "product": ["CASE"],
            "status": ["in force"],
            "birth_date": [date(1956, 3, 1)],
            "commencement_date": [SOLD],
            "sum_assured": [20_000.0],
            "term_years": [20.0],
            "premium_pa": [net],
        }
    )
    after = Settings(date(2009, 3, 1), "year", "outstanding")
    found = alter(policy, {"premium_pa": 0.0}, "sum_assured", [design(endowment)], on, after)
    # The source's note gives the reserve at 8 as 5,367.329.
    assert found.before[0] == pytest.approx(5367.329, abs=0.0005)
    assert nearest_is_key("B45", float(found.solved.amount[0]), "paid_up")
    np.testing.assert_allclose(found.after, found.before, rtol=1e-12)
