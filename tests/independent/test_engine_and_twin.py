"""The compiled engine against the plain twin, on contracts, bases and policies at random.

Both are written from the page of conventions, and share no line of arithmetic.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from random_contracts import Example, examples, write_tables

from portfolios.checks import needed_columns
from portfolios.chunk import Chunk
from portfolios.extract import open_extract
from portfolios.reasons import Reason
from projection.engine import Engine, Valued
from projection.lives import rule_columns
from projection.plain import NotValued, PlainValue, plain_value

TOLERANCE = 1e-11
"""Of the sum of the absolute parts."""

NOTHING = 1e-9
"""In currency: the engine leaves out points at which survival is below 1e-18 of that at T, the twin does not."""

EXAMPLES = 8 if os.environ.get("NUMBA_DISABLE_JIT") == "1" else 60 if os.environ.get("CI") else 150

SLOW = [HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.large_base_example]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("tables")
    write_tables(place)
    return place


def by_engine(example: Example) -> tuple[Chunk, Valued]:
    """Value the policies as a run does, without rounding."""
    extract, document = open_extract(example.table), example.basis.document
    until = [rule.until for rule in document.lapse.rule] if document.lapse else []
    asked = rule_columns(example.basis, example.designs, extract.column_names)
    needed = needed_columns(example.designs, [*(name for name in until if isinstance(name, str)), *asked])
    kinds = {column: str(extract.column_kind(column)) for column in asked}
    engine = Engine(example.designs, example.basis, example.settings, needed, kinds, ("in force", "paid up"))
    (chunk,) = extract.chunks(needed)
    return chunk, engine.value(chunk)


def by_twin(example: Example, policy: dict[str, Any], payments: bool = False) -> PlainValue | NotValued:
    design = next(design for design in example.designs if design.code == policy["product"])
    try:
        return plain_value(policy, design, example.basis, example.settings, payments)
    except NotValued as refusal:
        return refusal


def check_policy(example: Example, policy: dict[str, Any], valued: Valued, place: int) -> None:
    reason = Reason(int(valued.checked.reason[place]))
    twin = by_twin(example, policy)
    if isinstance(twin, NotValued) or reason:
        assert isinstance(twin, NotValued) == bool(reason), f"engine: {reason.words}; twin: {twin}; {policy}"
        return
    engine, plain = valued.results.parts[place], np.array([twin.benefits, twin.expenses, twin.premiums])
    size = float(np.abs(plain).sum())
    if np.abs(engine - plain).max() > TOLERANCE * size:
        # Payments in either direction may cancel out within a part; their sizes do not.
        listed = by_twin(example, policy, payments=True)
        assert isinstance(listed, PlainValue)
        size = sum(abs(payment.value) for payment in listed.payments)
    assert np.abs(engine - plain).max() <= TOLERANCE * size + NOTHING, f"engine {engine}, twin {plain}: {policy}"


@given(data=st.data())
@settings(max_examples=EXAMPLES, deadline=None, suppress_health_check=SLOW)
def test_same_parts_and_same_refusals(folder: Path, data: st.DataObject) -> None:
    example = data.draw(examples(folder))
    chunk, valued = by_engine(example)
    for place in range(chunk.n):
        check_policy(example, chunk.policy(place), valued, place)
