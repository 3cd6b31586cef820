"""The compiled profiles against the plain twin: profits of random contracts on the same day of commencement."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import HealthCheck, event, given, settings
from hypothesis import strategies as st
from random_contracts import Example, examples, write_tables

from assumptions.basis import Basis, prepare_basis
from portfolios.checks import Checked
from portfolios.extract import open_extract
from projection.basis_columns import needs_of
from projection.engine import Engine
from projection.loops import Profile
from projection.plain_profit import plain_profit
from projection.profit_profile import profits

TOLERANCE = 1e-11
"""Of the sum of the absolute payments and reserves."""

NOTHING = 1e-8
"""In currency: what is left of points at which survival is below 1e-18."""

GOMPERTZ = {"law": "Makeham", "A": 0.0, "B": 2.7e-6, "c": 1.124}

SLOW = [HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.large_base_example, HealthCheck.filter_too_much]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("tables")
    write_tables(place)
    return place


def new_business(example: Example) -> Example:
    """The same contracts, all sold on the valuation date."""
    place = example.table.column_names.index("commencement_date")
    sold = pa.array([example.settings.valuation_date] * len(example.table), pa.date32())
    table = example.table.set_column(place, "commencement_date", sold)
    return replace(example, table=table, settings=replace(example.settings, due="outstanding"))


def other_basis(basis: Basis) -> Basis:
    """A reserving basis beside an experience basis: 2% interest, and half the lapses."""
    document = {"mortality": {"age": "exact", "rule": [{"table": GOMPERTZ}]}, "interest": {"rule": [{"flat": 0.02}]}}
    (flat,) = prepare_basis(document).curves
    fewer = tuple(tuple(rate / 2 for rate in rates) for rates in basis.lapses)
    return replace(basis, curves=tuple(flat for _ in basis.curves), lapses=fewer)


def profile_on(basis: Basis, example: Example) -> tuple[Checked, Profile]:
    extract = open_extract(example.table)
    needs = needs_of(extract, example.designs, [basis])
    (chunk,) = extract.chunks(needs.needed)
    return Engine(example.designs, basis, example.settings, needs.needed, needs.kinds).profile(chunk, 12)


def rows(profile: Profile, place: int) -> Profile:
    """The profile of one policy."""
    return profile._replace(**{name: getattr(profile, name)[place : place + 1] for name in profile._fields[1:]})


def check(example: Example) -> int:
    reserving = other_basis(example.basis)
    (checked, profile), (again, prudent) = profile_on(example.basis, example), profile_on(reserving, example)
    seen = 0
    for place, policy in enumerate(example.table.to_pylist()):
        if checked.reason[place] or again.reason[place]:
            continue
        design = next(design for design in example.designs if design.code == policy["product"])
        held = rows(prudent, place)
        within = held.anchor[0] == -2 or held.anchor[0] % 12 > 0
        for reserves in ("none",) if within else ("none", "gross premium"):
            twin = plain_profit(policy, design, example.basis, reserving, step=example.settings.step, reserves=reserves)
            found = profits(rows(profile, place), held if reserves != "none" else None).signature[0]
            n = len(twin.signature)
            size = sum(abs(amount) for row in twin.flows.values() for amount in row) + sum(map(abs, twin.reserves))
            assert np.abs(found[:n] - twin.signature).max() <= TOLERANCE * size + NOTHING
            assert np.abs(found[n:]).max(initial=0) <= NOTHING
        seen += 1
    return seen


@given(data=st.data())
@settings(max_examples=80, deadline=None, suppress_health_check=SLOW)
def test_profile_and_twin(folder: Path, data: st.DataObject) -> None:
    example = data.draw(examples(folder))
    # The third term of Woolhouse's formula is no cash flow; profits refuse it.
    streams = [stream for design in example.designs for stream in design.stream]
    exact = all(stream.payments != "Woolhouse 3" for stream in streams)
    if exact and all(design.states == "one life" for design in example.designs):
        event(f"policies compared: {min(check(new_business(example)), 3)}")
