"""Slopes against the plain twin, valued again with single figures of the basis moved, on contracts at random.

The twin knows nothing of slopes. Its central differences at two distances are extrapolated (Richardson 1911).
"""

from __future__ import annotations

import os
from dataclasses import replace
from math import expm1, floor, fsum
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st
from pydantic import PrivateAttr
from random_contracts import Example, examples, write_tables

from assumptions.basis import Basis
from assumptions.interest import Curve, curve_from, curve_of
from assumptions.laws import Law
from portfolios.extract import open_extract
from projection.documents import DocumentError
from projection.plain import NotValued, PlainValue, plain_value
from projection.slope_run import slopes_of

EXAMPLES = 3 if os.environ.get("NUMBA_DISABLE_JIT") == "1" else 20 if os.environ.get("CI") else 60
SLOW = [HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.large_base_example, HealthCheck.filter_too_much]
DISTANCE = 2e-5


class MovedLaw(Law):
    """A law whose yearly rate at one attained age, and perhaps one duration, is moved."""

    _moved: tuple[int, int, float] = PrivateAttr(default=(0, -1, 0.0))

    def rate(self, entry_age: float, duration: int) -> float:
        age, only, by = self._moved
        here = floor(entry_age) + duration == age and (duration == only if only >= 0 else duration >= self._select)
        return super().rate(entry_age, duration) + by * here

    @property
    def _select(self) -> int:
        return self.select.years if self.select else 0


class MovedTable:
    """A table of which the same holds."""

    def __init__(self, table: Any, age: int, only: int, by: float) -> None:
        self.table, self.age, self.only, self.by = table, age, only, by

    def __getattr__(self, name: str) -> Any:
        return getattr(self.table, name)

    def rate(self, entry_age: float, duration: int) -> float:
        select = self.table.select_years
        here = int(entry_age) + duration == self.age
        here = here and (duration == self.only if self.only >= 0 else duration >= select)
        return float(self.table.rate(entry_age, duration)) + self.by * here


def moved(basis: Basis, row: dict[str, Any], by: float) -> Basis:
    """The basis with one figure moved."""
    place = row["rule"] - 1
    if row["part"] == "mortality":
        rates: list[Any] = list(basis.rates)
        if isinstance(rates[place], Law):
            law = MovedLaw.model_validate(rates[place].model_dump(by_alias=True, exclude_none=True))
            law._moved = int(row["at"]), row["duration"], by
            rates[place] = law
        else:
            rates[place] = MovedTable(rates[place], int(row["at"]), row["duration"], by)
        return replace(basis, rates=tuple(rates))
    if row["part"] == "lapse":
        lapses = list(basis.lapses)
        year = int(row["at"]) - 1
        lapses[place] = tuple(rate + by * (at == year) for at, rate in enumerate(lapses[place]))
        return replace(basis, lapses=tuple(lapses))
    curves: list[Any] = list(basis.curves)
    document, curve = basis.document.interest.rule[place], curves[place]
    if document.flat is not None:
        curves[place] = curve_from(flat=document.flat + by)
    elif document.forward is not None:
        forwards = [rate + by * (year == row["at"]) for year, rate in enumerate(document.forward, 1)]
        curves[place] = curve_from(forward=forwards)
    elif isinstance(curve, Curve):
        spots = {
            m: expm1(h / m) + by * (m == row["at"]) for m, h in zip(curve.times[1:], curve.integrals[1:], strict=True)
        }
        curves[place] = curve_from(spot=spots)
    else:
        assert document.smith_wilson is not None
        assert isinstance(document.smith_wilson.spot, dict)
        spots = {m: rate + by * (m == row["at"]) for m, rate in document.smith_wilson.spot.items()}
        curves[place] = curve_of(document, spots)
    return replace(basis, curves=tuple(curves))


def values(example: Example, basis: Basis, kept: list[dict[str, Any]]) -> list[float]:
    found = []
    for policy in kept:
        design = next(design for design in example.designs if design.code == policy["product"])
        plain = plain_value(policy, design, basis, example.settings, payments=False)
        found.append(plain.reserve)
    return found


def by_twin(example: Example) -> tuple[list[dict[str, Any]], float]:
    """Policies that are valued, and the sum of their absolute parts."""
    kept, size = [], 0.0
    for policy in example.table.to_pylist():
        design = next((design for design in example.designs if design.code == policy["product"]), None)
        if design is None:
            continue
        try:
            plain = plain_value(policy, design, example.basis, example.settings, payments=False)
        except NotValued:
            continue
        assert isinstance(plain, PlainValue)
        kept.append(policy)
        size += abs(plain.benefits) + abs(plain.expenses) + abs(plain.premiums)
    return kept, size


def differentiated(example: Example, row: dict[str, Any], kept: list[dict[str, Any]]) -> float:
    """(8 times the difference at h less that at 2 h) / 12 h."""
    near, far = (
        fsum(values(example, moved(example.basis, row, by), kept))
        - fsum(values(example, moved(example.basis, row, -by), kept))
        for by in (DISTANCE, 2 * DISTANCE)
    )
    return (8 * near - far) / (12 * DISTANCE)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("tables")
    write_tables(place)
    return place


def plain_woolhouse(example: Example) -> Example:
    """The example without third terms, of which there are no slopes."""
    made = [
        design.model_copy(
            update={
                "stream": [
                    stream.model_copy(update={"payments": "Woolhouse 2"})
                    if stream.payments == "Woolhouse 3"
                    else stream
                    for stream in design.stream
                ]
            }
        )
        for design in example.designs
    ]
    return replace(example, designs=made, settings=replace(example.settings, decimals=4))


@given(data=st.data())
@settings(max_examples=EXAMPLES, deadline=None, suppress_health_check=SLOW)
def test_slopes_are_those_of_the_twin_moved(folder: Path, data: st.DataObject) -> None:
    example = plain_woolhouse(data.draw(examples(folder)))
    kept, size = by_twin(example)
    assume(kept)
    try:
        found = slopes_of(open_extract(example.table), example.designs, example.basis, example.settings, threads=1)
    except DocumentError:
        # Ratings for a time where years of age begin between anniversaries have none.
        assume(not (example.basis.document.mortality.ratings and example.basis.document.mortality.age == "exact"))
        raise
    rows = [row for row in found.table.to_pylist() if row["part"] != "key rate" and abs(row["slope"]) > 1e-3 * size]
    for part in {row["part"] for row in rows}:
        row = data.draw(st.sampled_from([row for row in rows if row["part"] == part]))
        by_differences = differentiated(example, row, kept)
        # What hangs on each number is rounded to 1e-8 of currency per policy, and then multiplied by its time.
        assert row["slope"] == pytest.approx(by_differences, rel=1e-8, abs=1e-8 * size + 1e-5), row
