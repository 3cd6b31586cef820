"""Published cases as contracts: streams, bases and policies through the program's own documents and API.

A value is that of one policy, valued with payments due on the day still to come, as textbooks do; amounts are
scaled up so that the rounding to the minor unit does not show.
"""

from __future__ import annotations

import json
from datetime import date
from pathlib import Path
from typing import Any

import pyarrow as pa

import projection

CASES: list[dict[str, Any]] = json.loads((Path(__file__).parent / "data" / "cases.json").read_text())
BY_ID = {case["id"]: case for case in CASES}

SCALE = 1e7
COMMENCED = 2000

STANDARD = {"law": "Makeham", "A": 0.00022, "B": 2.7e-6, "c": 1.124, "last_age": 150}
"""Dickson, Hardy, Waters, Actuarial Mathematics for Life Contingent Risks: Standard Ultimate Survival Model."""

SELECT = {**STANDARD, "select": {"factor": 0.9, "years": 2}}
"""The same book's Standard Select Survival Model."""

ILLUSTRATIVE = {"law": "Makeham", "A": 0.0007, "B": 0.00005, "c": 10**0.04, "last_age": 150}
"""Bowers et al., Actuarial Mathematics: Illustrative Life Table, 1000 mu_x = 0.7 + 0.05 * 10^(0.04 x)."""

Stream = dict[str, Any]


def printed(case: str) -> dict[str, Any]:
    """The printed figures of a case."""
    figures: dict[str, Any] = BY_ID[case]["published"]
    return figures


def nearest_is_key(case: str, value: float, figure: str) -> bool:
    """Say whether the option of a multiple choice that lies nearest to a value is the key."""
    options: list[float] = BY_ID[case]["multiple_choice_options"]
    return min(options, key=lambda option: abs(option - value)) == printed(case)[figure]


def annuity(start: float = 0, end: float | None = None, amount: float = 1.0, **more: Any) -> Stream:
    """A benefit a year while alive, in advance unless said otherwise."""
    stream = {"direction": "out", "amount": amount, "while": "alive", "from": start, **more}
    return stream if end is None else {**stream, "to": end}


def premium(years: float | None = None, amount: float = 1.0, **more: Any) -> Stream:
    """A premium a year in advance."""
    return {**annuity(0, years, amount, **more), "direction": "in"}


def insurance(start: float = 0, end: float | None = None, amount: float = 1.0, **more: Any) -> Stream:
    """An amount on death."""
    stream = {"direction": "out", "amount": amount, "on": "death", "from": start, **more}
    return stream if end is None else {**stream, "to": end}


def once(years: float, amount: float = 1.0, **more: Any) -> Stream:
    """An amount at the end of so many years if the life lives then."""
    return {"direction": "out", "amount": amount, "while": "alive", "from": years, "paid": "once", **more}


def refund(name: str, end: float, **more: Any) -> Stream:
    """What the stream of this name has paid, given back on death within so many years."""
    return {"direction": "out", "on": "death", "to": end, "returns": {"stream": name}, **more}


def value(
    streams: list[Stream],
    rates: Any,
    interest: Any,
    age: int,
    *,
    passed: float = 0,
    other_age: int | None = None,
    step: str = "year",
    commenced: int = COMMENCED,
    expenses: list[dict[str, Any]] | None = None,
    **mortality: Any,
) -> float:
    """Reserve of one policy that commenced ``passed`` years ago, in the year ``commenced``, at an age.

    rates: what a mortality rule holds under 'table', or a list of rules; interest: a flat rate or what a rule
    holds; other_age: of the second life at commencement; mortality: further keys of that part.
    """
    rules = rates if isinstance(rates, list) else [{"table": rates}]
    curve = interest if isinstance(interest, dict) else {"flat": interest}
    claims = mortality.pop("claims", "end of step")
    basis = {
        "mortality": {"age": "last birthday", "rule": rules, **mortality},
        "interest": {"rule": [curve]},
        "expense": [_scaled_expense(item) for item in expenses or []],
        "claims": {"paid": claims},
    }
    states = "one life" if other_age is None else "two lives"
    design = {"code": "CASE", "states": states, "stream": [_scaled(n, stream) for n, stream in enumerate(streams)]}
    whole, months = int(passed), round(12 * (passed - int(passed)))
    on = date(commenced + whole, 1 + months, 1)
    policy = _policy(age, other_age, commenced)
    found = projection.value(policy, [design], basis, on, step=step, due="outstanding", sample=0)
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return float(found.policies["reserve"].to_pylist()[0]) / SCALE


def _policy(age: int, other_age: int | None, commenced: int) -> pa.Table:
    columns: dict[str, Any] = {
        "policy_id": ["Q1"], "product": ["CASE"], "status": ["in force"], "birth_date": [date(commenced - age, 1, 1)],
        "commencement_date": [date(commenced, 1, 1)], "lives": ["both"],
        "second_birth_date": [date(commenced - (other_age or 30), 1, 1)],
    }  # fmt: skip
    return pa.table(columns)


def _scaled(number: int, stream: Stream) -> Stream:
    named = {"name": f"stream {number}", **stream}
    return named if "of" in stream or "returns" in stream else {**named, "amount": stream["amount"] * SCALE}


def _scaled_expense(item: dict[str, Any]) -> dict[str, Any]:
    """An expense item of one rule for all; amounts, not shares, are scaled."""
    factor = SCALE if item["per"] in ("policy", "claim") else 1.0
    figures = {key: item[key] * factor for key in ("first_year", "later_years")}
    rest = {key: item[key] for key in item if key not in figures}
    return {"name": f"{item['per']} {len(rest)} {item['first_year']}", **rest, "rule": [figures]}


def expense(per: str, first_year: float, later_years: float) -> dict[str, Any]:
    """An item of expense; per policy once a year."""
    item = {"per": per, "first_year": first_year, "later_years": later_years}
    return {**item, "a_year": 1} if per == "policy" else item
