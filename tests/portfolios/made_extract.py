"""Policies made up for the tests."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa

from portfolios.designs import Design

VALUATION_DATE = date(2026, 11, 30)
EPOCH = date(1970, 1, 1)


def made_designs() -> list[Design]:
    premium = {
        "name": "premium", "direction": "in", "amount": "premium_pa", "while": "alive", "to": "premium_years",
        "a_year": "premium_frequency",
    }  # fmt: skip
    death = {"name": "death", "direction": "out", "amount": "sum_assured", "on": "death", "to": "term_years"}
    annuity = {
        "name": "annuity", "direction": "out", "amount": "annuity_pa", "while": "alive",
        "from": "deferral_years", "guarantee": "guarantee_years", "a_year": "annuity_frequency",
        "increase": {"rate": "escalation"},
    }  # fmt: skip
    bonus = {"name": "bonus", "direction": "out", "amount": "bonus_sum", "on": "death", "to": "bonus_years"}
    return [
        Design.model_validate({"code": code, "stream": streams})
        for code, streams in (("TERM", [premium, death]), ("ANN", [annuity]), ("BONUS", [premium, bonus]))
    ]


def made_policies(n: int, seed: int = 1) -> pa.Table:
    """Return n policies without a fault, in three products; columns that a product does not use are null."""
    r = np.random.default_rng(seed)
    place = r.integers(0, 3, n)
    paying, assured, annuity, bonus = place != 1, place == 0, place == 1, place == 2

    def only(where: np.ndarray, values: np.ndarray) -> pa.Array:
        return pa.array(values, mask=~where)

    latest = (VALUATION_DATE - EPOCH).days
    commenced = r.integers(latest - 9000, latest + 1, n).astype(np.int32)
    born = (commenced - r.integers(7000, 25_000, n)).astype(np.int32)
    return pa.table({
        "policy_id": pa.array([f"TM-{row:0{3 + row % 12}d}x{row}" for row in range(n)], pa.string()),
        "product": pa.array(np.array(["TERM", "ANN", "BONUS"])[place].tolist(), pa.string()),
        "status": pa.array(["in force"] * n, pa.string()),
        "birth_date": pa.array(born, pa.int32()).cast(pa.date32()),
        "commencement_date": pa.array(commenced, pa.int32()).cast(pa.date32()),
        "sex": pa.array(r.choice(["F", "M"], n).tolist(), pa.string()),
        "term_years": only(assured, r.integers(10, 40, n).astype(np.int16)),
        "premium_years": only(paying, r.integers(10, 400, n) / 12),
        "deferral_years": only(annuity, r.integers(0, 40, n).astype(np.int8)),
        "guarantee_years": only(annuity, r.integers(0, 11, n).astype(np.float32)),
        "premium_pa": only(paying, np.round(r.uniform(100, 5000, n), 2)),
        "premium_frequency": only(paying, r.choice([1, 2, 4, 12], n)),
        "sum_assured": only(assured, np.round(r.uniform(1e4, 5e5, n), 2)),
        "annuity_pa": only(annuity, np.round(r.uniform(1e3, 3e4, n), 2)),
        "annuity_frequency": only(annuity, r.choice([1, 2, 4, 12], n).astype(np.uint8)),
        "escalation": only(annuity, r.choice([0, 0.02, 0.03], n)),
        "bonus_sum": only(bonus, r.uniform(0, 1e4, n)),
        "bonus_years": only(bonus, r.integers(1, 50, n)),
        "region": pa.array(r.choice(["north", "south", None], n).tolist(), pa.string()),
        "smoker": pa.array((r.random(n) < 0.2).tolist(), pa.bool_()),
    })  # fmt: skip


def one_policy(**changes: Any) -> pa.Table:
    """Return one policy of product TERM with some cells changed."""
    cells: dict[str, Any] = {
        "policy_id": "A-1", "product": "TERM", "status": "in force", "birth_date": date(1980, 5, 17),
        "commencement_date": date(2010, 2, 28), "sex": "F", "term_years": 20.0, "premium_years": 20.0,
        "deferral_years": None, "guarantee_years": None, "premium_pa": 1200.0, "premium_frequency": 12.0,
        "sum_assured": 100_000.0, "annuity_pa": None, "annuity_frequency": None, "escalation": None,
        "bonus_sum": None, "bonus_years": None,
    }  # fmt: skip
    cells.update(changes)
    schema = pa.schema(
        [
            (name, pa.string() if name in ("policy_id", "product", "status", "sex") else
             pa.date32() if name.endswith("_date") else pa.float64())
            for name in cells
        ]
    )  # fmt: skip
    return pa.Table.from_pylist([cells], schema=schema)
