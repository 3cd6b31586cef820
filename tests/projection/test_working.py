"""The working of a policy adds up, line by line, to the reserve on its last line."""

from __future__ import annotations

import re
from datetime import date
from pathlib import Path
from typing import Any

import pytest
from plain_cases import basis, design, policy, stream

from assumptions.basis import prepare_basis
from projection.plain import NotValued, plain_value
from projection.settings import Settings
from projection.working import LEGEND, working

PREMIUM = {"name": "premium", "direction": "in", "amount": 1200.0, "while": "alive", "to": 10, "a_year": 12}
CONTRACT = design(
    PREMIUM,
    stream("death", 250000.0, on="death", to=10),
    stream("maturity", 10000.0, start=10, paid="once"),
    stream("commission", of="premium", kind="commission", share=0.03),
)
EXPENSE = {
    "name": "keeping",
    "per": "policy",
    "rule": [{"first_year": 90.0, "later_years": 30.0, "title": "plain"}],
}
PARTS: dict[str, Any] = {
    "title": "Statutory",
    "lapse": {"rule": [{"rates": [0.1, 0.05], "until": 9}]},
    "expense": [EXPENSE],
    "claims": {"paid": {"delay_months": 2}},
    "mortality_rule": {"multiple": 0.9, "added_years": 2},
}
ON = date(2028, 11, 30)


def listing(text: str, name: str) -> list[list[str]]:
    """The rows of a stream's table."""
    lines = text.split(f"Stream '{name}'")[1].split("\n")[2:]
    rows: list[list[str]] = []
    for line in lines:
        if line.startswith("  value of"):
            return rows
        rows.append(line.split())
    raise AssertionError("the table has no subtotal")


def money(text: str) -> float:
    return float(text.replace(",", ""))


def write(payments: Any = "all", contract: Any = CONTRACT, parts: Any = PARTS, **columns: Any) -> str:
    return working(policy(**columns), contract, basis(**parts), Settings(ON), payments)


def test_the_last_line_is_the_reserve() -> None:
    value = plain_value(policy(), CONTRACT, basis(**PARTS), Settings(ON))
    text = write()
    assert text.endswith(f"\nreserve  {value.reserve:,.2f}\n")
    for part in ("benefits", "expenses", "premiums"):
        assert re.search(rf"\n  {part} +{getattr(value, part):,.2f}\n", text)


@pytest.mark.parametrize("payments", ["all", "yearly"])
def test_tables_add_up_to_their_subtotals_and_these_to_the_reserve(payments: str) -> None:
    text = write(payments)
    totals = {}
    for name in ("premium", "death", "maturity", "commission", "keeping"):
        subtotal = re.search(rf"  value of '{name}' +(\S+)\n", text)
        assert subtotal is not None
        totals[name] = money(subtotal[1])
        assert sum(money(row[-1]) for row in listing(text, name)) == pytest.approx(totals[name], abs=0.006)
    out = totals["death"] + totals["maturity"] + totals["commission"] + totals["keeping"]
    assert money(text.split()[-1]) == pytest.approx(out - totals["premium"], abs=0.03)


def test_each_row_multiplies_out() -> None:
    rows = listing(write(), "death")
    value = plain_value(policy(), CONTRACT, basis(**PARTS), Settings(ON))
    assert len(rows) == len([payment for payment in value.payments if payment.stream == "death"]) == 88
    for row in rows:
        assert len(row) == 12
        survival, persistency, _, discount, _, payment, expected, worth = map(money, row[4:])
        assert expected == pytest.approx(payment * survival * persistency, rel=1e-4)
        assert worth == pytest.approx(expected * discount, rel=1e-6, abs=1e-6)


def test_it_says_where_every_figure_comes_from() -> None:
    text = write()
    for said in (
        "Working of policy P1",
        "PIER Pier endowment",
        f"Statutory, digest {basis(**PARTS).digest[:12]}",
        "2028-11-30, end of day; cash flows due on it: settled",
        "20 of 30 days",
        "2028-11-10",
        "2028-12-10",
        "u = k + f = 32 + 2/3",
        "40.000000, exact",
        "rule 1: ",
        "Makeham, A = 0.00022, B = 2.7e-06, c = 1.124",
        "min(1, 0.9 x table + 0); age +2 years; 1 at the last age",
        "until month 108",
        "rule 1: flat 0.04 a year",
        "2 months after the middle of the step",
        "per policy: 90 in the first policy year, then 30",
        "not an actuarial opinion",
    ):
        assert said in re.sub(r" {2,}", " ", text), said
    for symbol, meaning in LEGEND:
        assert re.search(rf"\n  {re.escape(symbol)} +{re.escape(meaning)}\n", text)


def test_rates_are_listed_from_the_policy_year_of_the_valuation_date() -> None:
    value = plain_value(policy(), CONTRACT, basis(**PARTS), Settings(ON))
    text = write()
    rows = text.split("year  from age")[1].split("\n\n")[0].split("\n")[1:]
    assert rows[0].split() == ["2", "42", f"{value.life.yearly[2]:.9f}"]
    assert len(rows) == 8
    assert "3+  0.050000000" in text


def test_columns_are_aligned() -> None:
    for payments in ("all", "yearly"):
        text = write(payments)
        for block in text.split("Stream '")[1:]:
            lines = block.split("\n")[1:]
            end = next(place for place, line in enumerate(lines) if line.startswith("  value of"))
            assert len({len(line) for line in lines[:end]}) == 1


def test_nothing_left_to_pay() -> None:
    text = working(
        policy(), design(stream("maturity", 5.0, start=1, paid="once")), basis(), Settings(date(2027, 3, 10))
    )
    assert "No payment is still to come." in text
    assert text.endswith("\nreserve  0.00\n")


def test_decimals_and_rounding_half_even_once() -> None:
    contract = design(stream("certain", 2.5, certain=True, to=1))
    asked = (policy(), contract, basis())
    due = Settings(date(2026, 3, 10), "year", "outstanding", 0)
    assert working(*asked, due).endswith("reserve  2\n")


def test_text_of_the_extract_cannot_break_the_lines() -> None:
    first = write(policy_id="P1\n\x1b[2Jreserve  9.99").split("\n")[0]
    assert first == "Working of policy P1??[2Jreserve  9.99"


def test_a_policy_that_is_not_valued_has_no_working() -> None:
    with pytest.raises(NotValued):
        write(birth_date=None)


def test_tables_and_rules_are_named(tmp_path: Path) -> None:
    rows = "\n".join(f"{age},{min(1, 0.001 * age)}" for age in range(20, 121))
    (tmp_path / "island.csv").write_text(f"age,rate\n{rows}\n")
    rule = {"title": "all lives", "table": {"file": "island.csv", "column": "rate"}, "close": True}
    document = {
        "mortality": {"age": "last birthday", "rule": [rule]},
        "lapse": {"rule": [{"rates": [0.0], "title": "nobody"}]},
        "interest": {"rule": [{"forward": [0.03, 0.02]}]},
    }
    text = working(policy(), CONTRACT, prepare_basis(document, tmp_path), Settings(ON))
    plain = re.sub(r" {2,}", " ", text)
    assert "rule 1 (all lives): island.csv, rate" in plain
    assert "rule 1 (nobody): 1 x rate" in plain
    assert "rule 1: forward" in plain
    assert "\n 2 42 0.042000000\n" in plain
