"""A notebook may not group by a column that has the name of a result."""

from __future__ import annotations

from datetime import date

import pyarrow as pa
import pytest

import projection
from projection.documents import DocumentError


def test_a_group_may_not_have_the_name_of_a_result() -> None:
    policy = pa.table(
        {
            "policy_id": ["Q1"], "product": ["ONE"], "status": ["in force"], "birth_date": [date(1960, 1, 1)],
            "commencement_date": [date(2020, 1, 1)], "reserve": ["own"],
        }
    )  # fmt: skip
    design = {"code": "ONE", "stream": [{"name": "a", "direction": "out", "amount": 1.0, "while": "alive"}]}
    basis = {
        "mortality": {"rule": [{"table": {"law": "de Moivre", "omega": 110}}]}, "interest": {"rule": [{"flat": 0.0}]}
    }  # fmt: skip
    with pytest.raises(DocumentError, match="'reserve' is the name of a column of the results"):
        projection.value(policy, [design], basis, date(2026, 11, 30), group_by=["reserve"])
