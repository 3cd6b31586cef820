"""Streams that only some policies have: premiums of those in force, not of the paid up."""

from __future__ import annotations

from typing import Any

import pyarrow as pa
import pytest
from plain_cases import COMMENCED, MAKEHAM, design, policy, stream
from pydantic import ValidationError

import projection
from portfolios.designs import Design
from projection.documents import DocumentError

COVER = stream("cover", 100_000.0, on="death", to=20)
PREMIUM = stream("premium", 500.0, direction="in", to=20, **{"for": {"status": "in force"}})
COMMISSION = stream("commission", of="premium", share=0.05, kind="commission")
BASIS = {"mortality": {"age": "exact", "rule": [{"table": MAKEHAM}]}, "interest": {"rule": [{"flat": 0.04}]}}


def reserves(contract: Design, *statuses: str, **more: Any) -> list[float]:
    """Reserves of the same policy under several statuses, all of them valued."""
    rows = [{**policy(policy_id=f"P{n}"), "status": status, **more} for n, status in enumerate(statuses)]
    found = projection.value(
        pa.Table.from_pylist(rows), [contract], BASIS, COMMENCED, due="outstanding", in_force=sorted(set(statuses))
    )
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return [float(one) for one in found.policies["reserve"].to_pylist()]


def test_the_paid_up_pay_no_premiums_and_cost_no_commission() -> None:
    # Identity: a contract without the streams that are not theirs.
    mine = reserves(design(COVER, PREMIUM, COMMISSION), "in force", "paid up")
    always = {key: PREMIUM[key] for key in PREMIUM if key != "for"}
    assert mine[0] == reserves(design(COVER, always, COMMISSION), "in force")[0]
    assert mine[1] == reserves(design(COVER), "paid up")[0]
    assert mine[1] > mine[0]


def test_several_values_and_columns() -> None:
    asked = {"status": ["in force", "suspended"], "branch": "harbour"}
    extra = stream("extra", 10.0, to=20, **{"for": asked})
    kept = reserves(design(COVER, extra), "in force", "suspended", "paid up", branch="harbour")
    gone = reserves(design(COVER, extra), "in force", branch="quay")
    assert kept[0] == kept[1] > kept[2] == gone[0]


def test_a_policy_without_any_stream_is_an_exception() -> None:
    row = {**policy(), "status": "paid up"}
    only = design(stream("annuity", **{"for": {"status": "in force"}}))
    found = projection.value(pa.Table.from_pylist([row]), [only], BASIS, COMMENCED, in_force=["paid up"])
    assert found.exceptions.num_rows == 1


def test_a_column_of_numbers_is_refused() -> None:
    other = design(COVER, stream("extra", 10.0, **{"for": {"size": "large"}}))
    with pytest.raises(DocumentError, match="stream 'extra', for: key 'size' asks for text"):
        reserves(other, "in force", size=4.0)


def test_what_looks_at_a_stream_needs_policies_that_have_it() -> None:
    back = {"name": "back", "direction": "out", "on": "death", "to": 20, "returns": {"stream": "premium"}}
    with pytest.raises(ValidationError, match="which not every policy has"):
        design(PREMIUM, back)
    assert design(PREMIUM, {**back, "for": {"status": "in force"}})
