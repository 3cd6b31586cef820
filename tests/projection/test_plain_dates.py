"""Monthiversaries, the position of the valuation date and ages, against calendars worked by hand."""

from __future__ import annotations

from datetime import date
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from projection.plain_dates import age_at, first_point_at_age, monthiversary, position_of
from projection.plain_faults import NotValued

DAYS = st.dates(date(1950, 1, 1), date(2060, 12, 31))


@pytest.mark.parametrize(
    ("start", "months", "expected"),
    [
        (date(2026, 1, 31), 1, date(2026, 2, 28)),
        (date(2026, 1, 31), 2, date(2026, 3, 31)),
        (date(2026, 1, 31), 3, date(2026, 4, 30)),
        (date(2024, 2, 29), 12, date(2025, 2, 28)),
        (date(2024, 2, 29), 48, date(2028, 2, 29)),
        (date(2024, 2, 29), 1, date(2024, 3, 29)),
        (date(2026, 11, 15), 2, date(2027, 1, 15)),
        (date(2026, 1, 30), -11, date(2025, 2, 28)),
        (date(1900, 1, 31), 1, date(1900, 2, 28)),
    ],
)
def test_monthiversary(start: date, months: int, expected: date) -> None:
    assert monthiversary(start, months) == expected


@given(DAYS, st.integers(0, 1500))
def test_monthiversaries_rise_month_by_month(start: date, months: int) -> None:
    here, following = monthiversary(start, months), monthiversary(start, months + 1)
    assert here < following
    assert (following.year * 12 + following.month) - (here.year * 12 + here.month) == 1


def test_position_by_months() -> None:
    position = position_of(date(2026, 11, 30), date(2026, 8, 10), "month")
    assert (position.k, position.f) == (3, Fraction(20, 30))
    assert (position.last, position.following) == (date(2026, 11, 10), date(2026, 12, 10))


def test_position_by_years_counts_days_of_the_policy_year() -> None:
    # From 10 August 2025 to 30 November 2026: one year and 112 of 365 days.
    position = position_of(date(2026, 11, 30), date(2025, 8, 10), "year")
    assert position.step == Fraction(112, 365)
    assert position.u == 12 + 12 * Fraction(112, 365)
    assert (position.k, position.f) == (15, 12 * Fraction(112, 365) - 3)


def test_half_a_leap_policy_year_is_six_whole_months() -> None:
    position = position_of(date(2024, 7, 2), date(2024, 1, 1), "year")
    assert (position.u, position.k, position.f) == (Fraction(6), 6, Fraction(0))


@pytest.mark.parametrize("day", [date(2026, 2, 28), date(2027, 2, 28), date(2028, 2, 29)])
def test_anniversary_of_a_leap_day_is_the_end_of_february(day: date) -> None:
    assert position_of(day, date(2024, 2, 29), "year").step == 0


@given(DAYS, st.integers(0, 20000), st.sampled_from(["month", "year"]))
def test_position_lies_in_its_step(start: date, days: int, step: str) -> None:
    valuation = date.fromordinal(start.toordinal() + days)
    position = position_of(valuation, start, step)  # type: ignore[arg-type]
    assert position.last <= valuation < position.following
    assert position.u == position.k + position.f
    assert 0 <= position.f < 1
    if step == "month":
        assert monthiversary(start, position.k) == position.last


def test_commencing_after_the_valuation_date() -> None:
    with pytest.raises(NotValued) as caught:
        position_of(date(2026, 11, 30), date(2026, 12, 1), "month")
    assert caught.value.field == "commencement_date"


@pytest.mark.parametrize(
    ("basis", "expected"),
    [
        ("last birthday", 40),
        ("next birthday", 41),
        # Born 1 March 1986; 30 August 2026 is 182 days after the birthday and 183 days before the next.
        ("nearest birthday", 40),
        ("exact", 40 + Fraction(182, 365)),
    ],
)
def test_age(basis: str, expected: Fraction) -> None:
    assert age_at(date(1986, 3, 1), date(2026, 8, 30), basis) == expected  # type: ignore[arg-type]


def test_nearest_birthday_turns_in_the_middle() -> None:
    # 366 days from 1 March 2027 to 1 March 2028: the 183rd lies exactly in the middle and counts as young.
    assert age_at(date(1986, 3, 1), date(2027, 8, 31), "nearest birthday") == 41
    assert age_at(date(1986, 3, 1), date(2027, 9, 1), "nearest birthday") == 42


def test_leap_day_birthdays() -> None:
    born = date(1984, 2, 29)
    assert age_at(born, date(2026, 2, 27), "last birthday") == 41
    assert age_at(born, date(2026, 2, 28), "exact") == 42
    assert age_at(born, date(2028, 2, 28), "last birthday") == 43


def test_on_a_birthday_every_basis_but_the_next_gives_the_age() -> None:
    ages = {
        basis: age_at(date(1986, 3, 1), date(2026, 3, 1), basis)
        for basis in ("exact", "last birthday", "nearest birthday", "next birthday")
    }
    assert ages == {"exact": 40, "last birthday": 40, "nearest birthday": 40, "next birthday": 41}


def test_commenced_before_birth() -> None:
    with pytest.raises(NotValued, match="before birth"):
        age_at(date(2026, 3, 2), date(2026, 3, 1), "exact")


@given(DAYS, st.integers(0, 30000), st.integers(0, 110), st.sampled_from([1, 12]))
def test_first_point_at_age(birth: date, days: int, age: int, step: int) -> None:
    commencement = date.fromordinal(birth.toordinal() + days)
    point = first_point_at_age(birth, commencement, age, step)
    birthday = monthiversary(birth, 12 * age)
    assert point >= 0
    assert point % step == 0
    assert monthiversary(commencement, point) >= birthday
    assert point == 0 or monthiversary(commencement, point - step) < birthday
