"""Premiums and reserves of a premium basis from commutation columns, a second way beside the program's.

l_x comes from the text of open tables, read here without the program's reader, and D_x, N_x, M_x, R_x and S_x from
l_x in NumPy (Neill, Life Contingencies; Bowers et al., Actuarial Mathematics: the columns' definitions). The program
values the same contracts from documents: streams, expenses and commission, policy by policy.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from contracts import annuity, expense, insurance, once, premium, value
from open_tables import FOLDER


def raw_tables(number: int) -> list[dict[Any, float]]:
    """Figures of the tables of a file by age, or by age and duration."""
    text = (FOLDER / f"t{number}.xml").read_text("utf-8-sig")
    found: list[dict[Any, float]] = []
    for table in re.findall(r"<Values>(.*?)</Values>", text, re.DOTALL):
        rows = re.findall(r'<Axis t="(\d+)">(.*?)</Axis>\s*</Axis>', table, re.DOTALL)
        cell = re.compile(r'<Y t="(\d+)">([^<]+)</Y>')
        if rows:
            found.append({(int(age), int(t)): float(q) for age, row in rows for t, q in cell.findall(row)})
        else:
            found.append({int(age): float(q) for age, q in cell.findall(table)})
    return found


@dataclass(frozen=True)
class Columns:
    """Commutation columns of a life selected at an age, by years since: D, N, M, R (sum of M) and S (sum of N)."""

    D: Any
    N: Any
    M: Any
    R: Any
    S: Any


def columns(rates: list[float], i: float) -> Columns:
    """Columns from the yearly rates of a life, the last of them 1; radix 1 at entry."""
    q = np.array(rates)
    living = np.concatenate([[1.0], np.cumprod(1 - q)])
    powers = (1 + i) ** -np.arange(len(living), dtype=float)
    D = living * powers
    C = np.append(-np.diff(living) * powers[1:], 0.0)

    def onward(column: Any) -> Any:
        return np.cumsum(column[::-1])[::-1]

    N, M = onward(D), onward(C)
    return Columns(D, N, M, onward(M), onward(N))


@dataclass(frozen=True)
class Table:
    """A table of the archive: its rates for a life, and how a document names it."""

    number: int
    select_by: str = ""
    place: int = 1
    """Number of an ultimate table alone in the file, from 1."""

    def rates(self, age: int) -> list[float]:
        """Rates from entry at an age to the end, closed with 1."""
        tables = raw_tables(self.number)
        if not self.select_by:
            ultimate = tables[self.place - 1]
            last = max(ultimate)
            return [*(ultimate[x] for x in range(age, last)), 1.0]
        select, ultimate = tables if isinstance(min(tables[0]), tuple) else tables[::-1]
        first = min(t for _, t in select)
        years = 1 + max(t for _, t in select) - first
        by = self.select_by == "attained age"
        rows = [select[age + t * by, first + t] for t in range(years)]
        last = max(ultimate)
        return [*rows, *(ultimate[x] for x in range(age + years, last)), 1.0]

    @property
    def rules(self) -> list[dict[str, Any]]:
        """The mortality rules of a document."""
        file = {"file": str(FOLDER / f"t{self.number}.xml")}
        asked = {"select_by": self.select_by} if self.select_by else {}
        several = {} if self.select_by or len(raw_tables(self.number)) == 1 else {"table": self.place}
        return [{"table": {**file, **asked, **several}, "close": True}]


TABLES = {
    "AM92": Table(2360, "attained age"),
    "AM92 ultimate": Table(2360, place=2),
    "A1967-70": Table(258, "entry age"),
    "AMC00": Table(2319, "entry age"),
    "PMA92": Table(2365),
    "PFA92": Table(2368),
    "2001 VBT, men": Table(1142, "entry age"),
    "2017 CSO, men": Table(3282, "entry age"),
}
"""Select and ultimate tables of the archive."""

LIVES = [(name, age, i) for name in TABLES for age in (50, 65) for i in (0.025, 0.06)]


@pytest.mark.parametrize(("name", "age", "i"), LIVES)
def test_values_of_benefits(name: str, age: int, i: float) -> None:
    table = TABLES[name]
    c, rules, n = columns(table.rates(age), i), table.rules, 15
    expected = {
        "whole life": (c.M[0], [insurance()]),
        "term": (c.M[0] - c.M[n], [insurance(0, n)]),
        "pure endowment": (c.D[n], [once(n)]),
        "endowment": (c.M[0] - c.M[n] + c.D[n], [insurance(0, n), once(n)]),
        "annuity": (c.N[0], [annuity()]),
        "deferred annuity": (c.N[n], [annuity(n)]),
        "temporary annuity": (c.N[0] - c.N[n], [annuity(0, n)]),
        "increasing whole life": (c.R[0], [insurance(increase={"rate": 1.0, "kind": "simple"})]),
        "increasing annuity": (c.S[0], [annuity(increase={"rate": 1.0, "kind": "simple"})]),
    }
    for what, (column, streams) in expected.items():
        found = value(streams, rules, i, age)
        assert found == pytest.approx(column / c.D[0], abs=1e-9, rel=1e-9), what


@pytest.mark.parametrize(("name", "age", "i"), LIVES)
def test_office_premium_and_reserve_of_an_endowment(name: str, age: int, i: float) -> None:
    # Sum 1,000; commission 40 % of the first premium and 3 % of the later ones; 12 at the start and 4 at later
    # renewals; 5 for a claim. P = (1,005 A + 12 + 4 (a - 1)) / (a - 0.4 - 0.03 (a - 1)).
    table, n, t = TABLES[name], 15, 6
    c, rules = columns(table.rates(age), i), table.rules
    a, A = (c.N[0] - c.N[n]) / c.D[0], (c.M[0] - c.M[n] + c.D[n]) / c.D[0]
    price = (1005 * A + 12 + 4 * (a - 1)) / (a - 0.4 - 0.03 * (a - 1))
    items = [expense("premium", 0.4, 0.03), expense("policy", 12, 4), expense("claim", 5, 5)]
    outgo = [insurance(0, n, 1000), once(n, 1000)]
    # The contract's own premium makes the value nothing at the start.
    start = value([*outgo, premium(n, price)], rules, i, age, expenses=items)
    assert start == pytest.approx(0, abs=1e-7)
    at = (c.N[t] - c.N[n]) / c.D[t]
    reserve = 1005 * (c.M[t] - c.M[n] + c.D[n]) / c.D[t] + 4 * at - 0.97 * price * at
    found = value([*outgo, premium(n, price)], rules, i, age, passed=t, expenses=items)
    assert found == pytest.approx(reserve, abs=1e-7)


@pytest.mark.parametrize(("name", "age"), [("PMA92", 60), ("PFA92", 60), ("AM92 ultimate", 55), ("AM92", 55)])
def test_premium_of_a_deferred_annuity_with_return_of_premiums(name: str, age: int) -> None:
    # Annuity of 1 from 10 years on for life; on death before, the premiums paid without interest: P (IA)^1.
    table, n, i = TABLES[name], 10, 0.03
    c, rules = columns(table.rates(age), i), table.rules
    returned = c.R[0] - c.R[n] - n * c.M[n]
    price = c.N[n] / (c.N[0] - c.N[n] - returned)
    back = insurance(0, n, price, increase={"rate": 1.0, "kind": "simple"})
    assert value([annuity(n), back, premium(n, price)], rules, i, age) == pytest.approx(0, abs=1e-8)
