from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reports.figures import amount, counted, decimal_text, lines_up, minor_units, money, seconds, size


@pytest.mark.parametrize(
    ("minor", "decimals", "text"),
    [
        (0, 2, "0.00"),
        (-1, 2, "-0.01"),
        (123456, 2, "1,234.56"),
        (-123456789, 3, "-123,456.789"),
        (1234567, 0, "1,234,567"),
    ],
)
def test_money_is_exact_and_has_thousands_separators(minor: int, decimals: int, text: str) -> None:
    assert money(minor, decimals) == text


@given(st.integers(-(10**20), 10**20), st.integers(0, 4))
def test_decimals_are_exact_both_ways(minor: int, decimals: int) -> None:
    text = decimal_text(minor, decimals)
    assert Decimal(text) == Decimal(minor).scaleb(-decimals)
    assert minor_units(text, decimals) == minor
    assert money(minor, decimals).replace(",", "") == text


@pytest.mark.parametrize(
    ("value", "decimals", "text"),
    [(-0.001, 2, "0.00"), (-0.4, 0, "0"), (-1234.5, 1, "-1,234.5"), (-10.0, 0, "-10")],
)
def test_amounts_are_never_a_negative_nothing(value: float, decimals: int, text: str) -> None:
    assert amount(value, decimals) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0042, "4 ms"),
        (12.345, "12.35 s"),
        (99.999, "100.00 s"),
        (125.0, "2 min 5 s"),
        (7260.0, "2 h 1 min"),
    ],
)
def test_times(value: float, text: str) -> None:
    assert seconds(value) == text


@pytest.mark.parametrize(
    ("number", "text"),
    [(0, "0 bytes"), (999, "999 bytes"), (1500, "1.5 kB"), (123_456_789, "123 MB"), (5 * 10**9, "5.0 GB")],
)
def test_sizes(number: int, text: str) -> None:
    assert size(number) == text


def test_counted() -> None:
    assert [counted(n, "policy", "policies") for n in (0, 1, 1200)] == [
        "0 policies",
        "1 policy",
        "1,200 policies",
    ]


def test_columns_line_up() -> None:
    lines = lines_up([["group", "1"], ["a", "1,000"], ["", "20"]], right=(1,))
    assert lines == ["group      1", "a      1,000", "          20"]
