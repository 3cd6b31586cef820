"""What a rate table answers: select then ultimate, whole ages, nothing invented where it has no rate."""

from __future__ import annotations

import numpy as np
import pytest

from assumptions.tables import RateTable, TableError

ULTIMATE = np.array([0.01, 0.02, 0.03, 0.04, 1.0])
SELECT = np.array([[0.001, 0.002], [0.003, np.nan]])


def plain() -> RateTable:
    return RateTable("plain", ULTIMATE.copy(), 60)


def select_and_ultimate() -> RateTable:
    return RateTable("both", ULTIMATE.copy(), 60, SELECT.copy(), 59, kind="annuitants", file="both.csv")


def test_ultimate_rates_go_by_attained_age() -> None:
    rates = plain()
    assert (rates.first_age, rates.final_age, rates.closed, rates.whole_ages_only) == (60, 65, True, True)
    assert rates.rate(60, 0) == 0.01
    assert rates.rate(60.0, 3) == rates.rate(63, 0) == 0.04


def test_select_rates_come_first() -> None:
    rates = select_and_ultimate()
    assert (rates.first_age, rates.final_age, rates.select_years) == (59, 65, 2)
    assert [rates.rate(59, duration) for duration in range(4)] == [0.001, 0.002, 0.02, 0.03]
    assert rates.rates_from(59, 6).tolist() == [0.001, 0.002, 0.02, 0.03, 0.04, 1.0]


@pytest.mark.parametrize(
    ("entry_age", "duration", "said"),
    [
        (60, 1, "duration 1"),  # missing cell
        (61, 0, "age 61"),  # above the select rows
        (58, 0, "age 58"),  # below them
        (58, 5, "age 58"),  # also where an ultimate rate would be there
        (59, 6, "duration 6"),  # beyond the last age
        (59, -1, "duration -1"),
        (59.5, 0, "whole ages"),
        (float("nan"), 0, "whole ages"),
    ],
)
def test_no_rate_is_an_error_that_says_what_is_held(entry_age: float, duration: int, said: str) -> None:
    with pytest.raises(TableError, match=said) as caught:
        select_and_ultimate().rate(entry_age, duration)
    assert "both (both.csv)" in str(caught.value)
    assert "entry at 59 to 60, 2 years" in str(caught.value)
    assert "ages 60 to 64" in str(caught.value)


@pytest.mark.parametrize(("entry_age", "years", "missing"), [(60, 2, 1), (61, 1, 0), (58, 1, 0), (59, 7, 6)])
def test_a_row_of_rates_fails_where_its_rates_do(entry_age: int, years: int, missing: int) -> None:
    with pytest.raises(TableError, match=f"duration {missing}"):
        select_and_ultimate().rates_from(entry_age, years)


def test_a_gap_between_select_and_ultimate_rates_stays_a_gap() -> None:
    rates = RateTable("gap", np.array([0.5, 1.0]), 63, np.array([[0.1, 0.2]]), 60)
    assert rates.rate(60, 3) == 0.5
    with pytest.raises(TableError, match="duration 2"):
        rates.rate(60, 2)
    with pytest.raises(TableError, match="duration 2"):
        rates.rates_from(60, 5)


@pytest.mark.parametrize("entry_age", range(56, 67))
@pytest.mark.parametrize("years", range(8))
def test_a_row_of_rates_is_its_rates(entry_age: int, years: int) -> None:
    late = RateTable("late", np.array([0.5, 1.0]), 64, np.array([[0.1, 0.2], [0.3, 0.4]]), 58)
    for table in (plain(), select_and_ultimate(), late):
        try:
            one_by_one = [table.rate(entry_age, duration) for duration in range(years)]
        except TableError as fault:
            with pytest.raises(TableError) as caught:
                table.rates_from(entry_age, years)
            assert str(caught.value) == str(fault)  # noqa: PT017
        else:
            assert table.rates_from(entry_age, years).tolist() == one_by_one


def test_survivors_are_the_products_of_survival() -> None:
    living = plain().survivors(1000)
    assert living == pytest.approx([1000, 990, 970.2, 941.094, 903.45024, 0], rel=1e-14)


def test_no_survivors_without_ultimate_rates_or_across_a_hole() -> None:
    select_only = RateTable("select", np.empty(0), 0, SELECT.copy(), 59)
    with pytest.raises(TableError, match="no ultimate rates"):
        select_only.survivors()
    with pytest.raises(TableError, match="no rate at age 61"):
        RateTable("hole", np.array([0.1, np.nan, 0.2]), 60).survivors()


def test_select_rates_alone_end_with_their_last_cell() -> None:
    rates = RateTable("select", np.empty(0), 0, np.array([[0.1, 0.2], [0.3, 1.0]]), 60)
    assert (rates.final_age, rates.closed) == (63, True)
    assert RateTable("select", np.empty(0), 0, np.array([[0.1, 0.2]]), 60).closed is False


def test_a_table_holds_rates_between_0_and_1_and_at_least_one() -> None:
    for wrong in (-0.1, 1.1):
        with pytest.raises(TableError, match="between 0 and 1"):
            RateTable("wrong", np.array([wrong]), 60)
    with pytest.raises(TableError, match="no rate to begin with"):
        RateTable("none", np.empty(0), 60)


def test_the_figures_cannot_be_changed_afterwards() -> None:
    with pytest.raises(ValueError, match="read-only"):
        plain().ultimate[0] = 0.5
