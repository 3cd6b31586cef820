"""Expected cash flows of the compiled engine against the payments of the plain twin, by month and stream."""

from __future__ import annotations

from collections import Counter, defaultdict
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_contracts import Example, examples, write_tables
from test_engine_and_twin import EXAMPLES, SLOW, by_twin

from portfolios.checks import needed_columns
from portfolios.designs import Design, Stream
from portfolios.extract import open_extract
from projection import loops
from projection.engine import Engine
from projection.lives import rule_columns
from projection.plain import PlainValue
from projection.tally import QUANTA

Key = tuple[str, str, str, int]
"""Product, stream, direction, and months from the month of the valuation date."""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("tables")
    write_tables(place)
    return place


def by_engine(example: Example) -> tuple[list[dict[str, Any]], dict[Key, float], dict[Key, float]]:
    """The valued policies, their cash flows in currency before the table rounds them, and the largest share of a line.

    A line takes shares of what is rounded to a thousandth of a minor unit; a share above 1 enlarges the rounding.
    """
    extract, document = open_extract(example.table), example.basis.document
    until = [rule.until for rule in document.lapse.rule] if document.lapse else []
    asked = rule_columns(example.basis, example.designs, extract.column_names)
    needed = needed_columns(example.designs, [*(name for name in until if isinstance(name, str)), *asked])
    kinds = {column: str(extract.column_kind(column)) for column in asked}
    engine = Engine(example.designs, example.basis, example.settings, needed, kinds, ("in force", "paid up"))
    (chunk,) = extract.chunks(needed)
    valued = engine.value(chunk)
    flows, largest = defaultdict[Key, float](float), defaultdict[Key, float](float)
    lines, amounts = list(engine.plans.lines), valued.results.flows.reshape(-1, loops.BINS)
    for (_, shares), account in engine.plans.accounts.items():
        for place, share in shares:
            line = lines[place]
            for month in amounts[account].nonzero()[0].tolist():
                key = (line.product, line.stream, line.direction, month)
                flows[key] += share * int(amounts[account, month]) / QUANTA / 10**example.settings.decimals
                largest[key] = max(largest[key], abs(share))
    return [chunk.policy(place) for place in valued.valued.nonzero()[0].tolist()], flows, largest


def pieces_of(design: Design) -> int:
    """How many rounded pieces the engine puts a payment together from, at most.

    On two lives, one while either lives is made of those of the first, the second and both; a term of Woolhouse's
    formula has a part that depends on the frequency and one that does not.
    """
    if design.states == "two lives":
        return 3
    return 2 if any(stream.payments != "at their dates" for stream in design.stream) else 1


def check(example: Example) -> None:
    policies, flows, largest = by_engine(example)
    today, half = example.settings.valuation_date, 0.5 / QUANTA / 10**example.settings.decimals
    expected, size = defaultdict[Key, float](float), defaultdict[Key, float](float)
    pieces, rounded = {one.code: pieces_of(one) for one in example.designs}, Counter[Key]()
    for policy in policies:
        twin = by_twin(example, policy, payments=True)
        assert isinstance(twin, PlainValue)
        for payment in twin.payments:
            month = 12 * (payment.month.year - today.year) + payment.month.month - today.month
            key: Key = (str(policy["product"]), payment.stream, payment.direction, month)
            expected[key] += payment.expected
            size[key] += abs(payment.expected)
            rounded[key] += pieces[policy["product"]]
    for line in expected.keys() | flows.keys():
        bound = rounded[line] * half * max(1.0, largest[line]) + 1e-9 * size[line]
        assert abs(flows[line] - expected[line]) <= bound, f"{line}: engine {flows[line]}, twin {expected[line]}"


def without_third_terms(example: Example) -> Example:
    """The third term of Woolhouse's formula corrects a value and is no payment; the twin lists it within one."""

    def two_terms(stream: Stream) -> Stream:
        return stream.model_copy(update={"payments": stream.payments.replace("3", "2")})

    made = [one.model_copy(update={"stream": [two_terms(stream) for stream in one.stream]}) for one in example.designs]
    return replace(example, designs=made)


@given(data=st.data())
@settings(max_examples=max(4, EXAMPLES // 3), deadline=None, suppress_health_check=SLOW)
def test_same_cash_flows(folder: Path, data: st.DataObject) -> None:
    check(without_third_terms(data.draw(examples(folder, most=10))))
