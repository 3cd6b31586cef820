"""Which of the collected cases are checked, and which cannot be said yet."""

from __future__ import annotations

from pathlib import Path

from contracts import BY_ID, CASES

LATER = {
    "profit test": "profit tests",
    "profit test / UL": "profit tests with an account",
    "gain by source": "profit tests: gains by source",
    "unit-linked": "profit tests with non-unit reserves",
    "Thiele": "a numerical method for Thiele's equation with a coarse step, not a valuation",
}
"""Areas of cases that wait, and for what."""

WAITING = {
    "B48": "no life table has the given values: A1_36:20 would be 0.03485, below v^20 (1 - 20p36) = 0.05292",
    "D27": "a derivative of a probability, which is no value of a contract",
    "B65": "assurances on the death of one life while the other lives",
}
"""Single cases that wait, and for what."""

CONTRACTS = {"B66", "C03", "C08"}
"""Cases of areas that wait which one contract can say all the same."""

BY_TABLE = {"A05"}
"""Checked in test_open_table_figures through the tables alone, since they are figures of a table."""


def waiting() -> set[str]:
    """Ids of the cases that cannot be said yet."""
    return {case["id"] for case in CASES if case["area"] in LATER} - CONTRACTS | set(WAITING)


def test_every_case_is_checked_or_waits() -> None:
    tests = "".join(path.read_text() for path in Path(__file__).parent.glob("test_*.py") if path != Path(__file__))
    named = {case for case in BY_ID if f'"{case}"' in tests or f"def test_{case.lower().replace('-', '_')}" in tests}
    assert named | BY_TABLE == set(BY_ID) - waiting()


def test_every_case_has_a_source() -> None:
    assert len(BY_ID) == len(CASES) == 84
    assert all(case["source"]["document"] and case["read"] for case in CASES)


def test_what_was_not_read_says_so_beside_its_check() -> None:
    recalled = {case["id"] for case in CASES if case["read"].startswith("from memory")}
    assert recalled == {"A09"}
    text = (Path(__file__).parent / "test_survival_models.py").read_text()
    assert "from memory" in text.split("def test_a09")[0].splitlines()[-2]
