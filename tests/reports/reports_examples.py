"""A valuation made up for the tests of what is shown: right in its sums, meaningless in its amounts."""

from __future__ import annotations

from collections import defaultdict
from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa

from projection.results import MONEY_COLUMNS, ControlTotal, Outcome, SampleCheck
from projection.settings import Settings

PRODUCTS = ("EBB", "FAIR", "GANG", "<b>LARBOARD</b>", "=OARLOCK")
STREAMS = (
    ("premium", "premium", "in"),
    ("death benefit", "benefit", "out"),
    ("annuity", "benefit", "out"),
    ("upkeep", "expense", "out"),
)
SETTINGS = Settings(date(2026, 11, 30))
SCHEMA = pa.schema(
    [("policy_id", pa.string()), ("product", pa.string()), ("sex", pa.string())]
    + [(name, pa.float64()) for name in MONEY_COLUMNS]
)


def policies(number: int, seed: int = 1, start: int = 0) -> pa.Table:
    """Per-policy results of so many policies; every 97th reserve is off its parts by a minor unit."""
    random = np.random.default_rng([seed, start])
    row = np.arange(start, start + number)
    benefits = random.integers(0, 10_000_000, number)
    expenses = random.integers(0, 200_000, number)
    premiums = random.integers(0, 6_000_000, number)
    reserve = benefits + expenses - premiums + (row % 97 == 0)
    columns: dict[str, Any] = {
        "policy_id": [f"QM-{i:07d}" for i in row],
        "product": np.array(PRODUCTS, dtype=object)[row % len(PRODUCTS)],
        "sex": np.array(["F", "M", None], dtype=object)[(row // 7) % 3],
    }
    money = dict(zip(MONEY_COLUMNS, (reserve, benefits, expenses, premiums), strict=True))
    return pa.table(columns | {name: minor / 100 for name, minor in money.items()}, schema=SCHEMA)


def exceptions(number: int) -> pa.Table:
    """Exceptions with identifiers that would like to be more than text."""
    wicked = ("=1+1", "<script>alert(1)</script>", "@SUM(A1)", "https://example.invalid", "-7", "plain")
    return pa.table(
        {
            "policy_id": [f"{wicked[i % 6]}" if i < 6 else f"X-{i}" for i in range(number)],
            "product": [("EBB", "NOWHERE")[i % 2] for i in range(number)],
            "reason": [("amount negative", "product not known")[i % 2] for i in range(number)],
            "field": [("sum_assured", "product")[i % 2] for i in range(number)],
            "value": [("-5", "<img src=x onerror=alert(1)>")[i % 2] for i in range(number)],
            "rule": ["the value must not be negative" for _ in range(number)],
        }
    )


def totals(results: pa.Table, group_by: tuple[str, ...]) -> tuple[pa.Table, dict[str, int]]:
    """Totals by group with exact sums, and the sums over all policies in minor units."""
    groups: dict[tuple[Any, ...], dict[str, int]] = defaultdict(lambda: dict.fromkeys(("policies", *MONEY_COLUMNS), 0))
    for row in results.to_pylist():
        group = groups[tuple(row[name] for name in group_by)]
        group["policies"] += 1
        for name in MONEY_COLUMNS:
            group[name] += round(row[name] * 100)
    keys = sorted(groups, key=lambda key: tuple(str(part) for part in key))
    table = pa.table(
        {name: pa.array([key[i] for key in keys], pa.string()) for i, name in enumerate(group_by)}
        | {"policies": pa.array([groups[key]["policies"] for key in keys], pa.int64())}
        | {name: pa.array([groups[key][name] / 100 for key in keys], pa.float64()) for name in MONEY_COLUMNS}
        | {"rounding": pa.array([_rounding(groups[key]) / 100 for key in keys], pa.float64())}
    )
    return table, {name: sum(group[name] for group in groups.values()) for name in MONEY_COLUMNS}


def _rounding(group: dict[str, int]) -> int:
    benefits, expenses, premiums = (group[f"value_of_{part}"] for part in ("benefits", "expenses", "premiums"))
    return group["reserve"] - (benefits + expenses - premiums)


def cash_flows(years: int = 60, products: tuple[str, ...] = PRODUCTS) -> pa.Table:
    """Expected cash flows by month from December 2026 that fade away."""
    rows: dict[str, list[Any]] = {name: [] for name in ("month", "product", "stream", "part", "direction", "amount")}
    for month in range(12 * years):
        for product in products:
            for place, (stream, part, way) in enumerate(STREAMS):
                level = (5e5, 1.5e5, 4e5, 3e4)[place]
                faded = level * 0.995**month if place != 2 else level * (month / 100) * 0.988**month
                values = (
                    date(2026 + (11 + month) // 12, (11 + month) % 12 + 1, 1),
                    product,
                    stream,
                    part,
                    way,
                )
                for name, value in zip(rows, (*values, round(faded, 5)), strict=True):
                    rows[name].append(value)
    return pa.table(rows | {"month": pa.array(rows["month"], pa.date32())})


def outcome(
    results: pa.Table, left_out: pa.Table, group_by: tuple[str, ...] = ("product", "sex"), years: int = 60
) -> Outcome:
    """A finished valuation of these results."""
    by_group, total = totals(results, group_by)
    number = results.num_rows
    return Outcome(
        settings=SETTINGS,
        totals=by_group,
        cash_flows=cash_flows(years),
        exceptions=left_out,
        control=(
            ControlTotal("policies", number + left_out.num_rows, number, left_out.num_rows),
            ControlTotal("sum_assured", 123_456_789_012, 123_456_000_012, 789_000),
        ),
        total=total,
        sample=SampleCheck(40, 3.2e-11, 4.1e-16, "QM-0000007"),
        group_by=group_by,
        conventions=(
            ("valuation date", "2026-11-30, end of day; payments due on it are settled"),
            (
                "step",
                "a month, counted from each policy's own commencement",
            ),
            (
                "money",
                "results are rounded half-even to 0.01 by policy; totals are exact sums of these",
            ),
            ("<i>escaped</i>", "a rule with <b>marks</b> & ampersands"),
        ),
        counts={"curves": 312, "cells": 1_204, "policy_months": 2_700_000},
        timings={"reading and checking": 0.21, "curves": 0.04, "valuing": 0.15},
        notes=("3 policies run beyond the last age of a table that is closed by the basis.",),
    )
