"""The checks of contracts on two lives: who lives, and when the second life was born."""

from __future__ import annotations

from datetime import date
from typing import Any

import pyarrow as pa
import pytest
from made_extract import VALUATION_DATE

from portfolios.checks import check_chunk, needed_columns
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.identifiers import Duplicates
from portfolios.reasons import Reason

STREAM = {"name": "annuity", "direction": "out", "amount": 100.0, "while": "either"}
DESIGNS = [
    Design.model_validate({"code": "PAIR", "states": "two lives", "stream": [STREAM]}),
    Design.model_validate({"code": "ONE", "stream": [{**STREAM, "while": "alive"}]}),
]
NEEDED = needed_columns(DESIGNS)


def outcome(**changes: Any) -> tuple[Reason, str]:
    """The first rule that a policy breaks, and the column."""
    policy = {
        "policy_id": "Q1", "product": "PAIR", "status": "in force", "birth_date": date(1960, 2, 3),
        "commencement_date": date(2020, 1, 1), "second_birth_date": date(1962, 7, 9), "lives": "both", **changes,
    }  # fmt: skip
    kinds = {name: pa.date32() if name.endswith("date") else pa.string() for name in policy}
    table = pa.table({name: pa.array([value], kinds[name]) for name, value in policy.items()})
    (batch,) = table.to_batches()
    result = check_chunk(Chunk(batch), DESIGNS, VALUATION_DATE, ["in force"], Duplicates(), NEEDED)
    return Reason(int(result.reason[0])), NEEDED[result.field[0]] if result.field[0] >= 0 else ""


@pytest.mark.parametrize(
    ("changes", "reason", "field"),
    [
        ({}, Reason.FINE, ""),
        ({"lives": "first", "second_birth_date": None}, Reason.FINE, ""),
        ({"lives": "none", "second_birth_date": None}, Reason.FINE, ""),
        ({"lives": "second"}, Reason.FINE, ""),
        ({"lives": "Both"}, Reason.LIVES_UNKNOWN, "lives"),
        ({"lives": None}, Reason.LIVES_UNKNOWN, "lives"),
        ({"second_birth_date": None}, Reason.DATE_MISSING, "second_birth_date"),
        ({"lives": "second", "second_birth_date": None}, Reason.DATE_MISSING, "second_birth_date"),
        ({"second_birth_date": date(1700, 1, 1)}, Reason.DATE_OUT_OF_RANGE, "second_birth_date"),
        ({"second_birth_date": date(2020, 1, 2)}, Reason.COMMENCED_BEFORE_BIRTH, "second_birth_date"),
        # On one life nobody looks at the second.
        ({"product": "ONE", "lives": "anything", "second_birth_date": None}, Reason.FINE, ""),
    ],
)
def test_first_rule_broken(changes: dict[str, Any], reason: Reason, field: str) -> None:
    assert outcome(**changes) == (reason, field)
