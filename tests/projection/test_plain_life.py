"""Survival and persistency by hand: fractions of a year, exact ages, ends of tables, lapses."""

from __future__ import annotations

import math
from fractions import Fraction
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st
from plain_cases import MAKEHAM, Listed

from assumptions.lapse import Lapse
from assumptions.laws import Law
from assumptions.mortality import MortalityRule, Rates
from projection.plain_faults import NotValued
from projection.plain_lapse import Persistency, until_months
from projection.plain_life import Survival, through, yearly_rates

approx = pytest.approx

RATES = st.lists(st.floats(0, 0.9), min_size=3, max_size=8)
FRACTIONS = st.sampled_from(["constant force", "uniform deaths", "Balducci"])


def life(rates: Rates, age: Fraction | int, fractions: str = "constant force", **adjusted: object) -> Survival:
    rule = MortalityRule.model_validate({"table": "listed", **adjusted})
    return Survival(yearly_rates(rule, rates, Fraction(age)), fractions)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("fractions", "expected"),
    [
        ("constant force", 0.64**0.25),
        ("uniform deaths", 1 - 0.25 * 0.36),
        ("Balducci", 0.64 / (1 - 0.75 * 0.36)),
    ],
)
def test_part_of_a_year(fractions: str, expected: float) -> None:
    assert through(0.36, 0.25, fractions) == approx(expected, rel=1e-15)  # type: ignore[arg-type]


@pytest.mark.parametrize(("fractions", "left"), [("constant force", 0), ("uniform deaths", 0.75), ("Balducci", 0)])
def test_the_last_year(fractions: str, left: float) -> None:
    assert through(1.0, 0.25, fractions) == left  # type: ignore[arg-type]
    assert through(1.0, 0.0, fractions) == 1  # type: ignore[arg-type]


def test_whole_age_runs_with_policy_years() -> None:
    survival = life(Listed((0.1, 0.2, 0.3, 1.0), 60), 61)
    assert survival.at(12) == approx(0.8)
    assert survival.at(18) == approx(0.8 * 0.7**0.5)
    assert survival.at(24) == approx(0.8 * 0.7)
    assert survival.at(25) == 0
    assert survival.end() == 25


def test_exact_age_runs_with_years_of_age() -> None:
    # Age 61.25: three quarters of the year at 61 are left, then a quarter of the year at 62.
    survival = life(Listed((0.1, 0.2, 0.3, 1.0), 60), Fraction(245, 4), "uniform deaths")
    at_entry = 1 - 0.25 * 0.2
    assert survival.at(9) == approx(0.8 / at_entry)
    assert survival.at(12) == approx(0.8 * (1 - 0.25 * 0.3) / at_entry)
    assert survival.at(21) == approx(0.8 * 0.7 / at_entry)
    assert survival.at(27) == approx(0.8 * 0.7 * 0.5 / at_entry)
    assert survival.at(33) == 0
    assert survival.end() == 33


def test_a_law_takes_an_exact_age_as_it_is() -> None:
    law = Law.model_validate(MAKEHAM)
    survival = life(law, Fraction(121, 2))
    hazard = 0.00022 * 3 + 2.7e-6 * (1.124**63.5 - 1.124**60.5) / math.log(1.124)
    assert survival.at(36) == approx(math.exp(-hazard), rel=1e-13)


def test_de_moivre_with_uniform_deaths_is_a_straight_line() -> None:
    survival = life(Law.model_validate({"law": "de Moivre", "omega": 100}), 60, "uniform deaths")
    assert [survival.at(months) for months in (0, 7, 240, 479)] == approx(
        [1 - months / 480 for months in (0, 7, 240, 479)], rel=1e-12
    )
    assert survival.end() == 480


def test_adjustments() -> None:
    rates = Listed((0.1, 0.2, 0.3, 0.4, 1.0), 60)
    assert life(rates, 60, multiple=0.5).at(12) == approx(0.95)
    assert life(rates, 60, added_years=2).at(12) == approx(0.7)
    assert life(rates, 60, extra=0.05).at(12) == approx(0.85)
    # A multiple does not soften the last year, and takes no rate above 1.
    assert life(rates, 63, multiple=0.5).at(24) == 0
    assert life(rates, 61, multiple=5).at(12) == 0


def test_select_rates_need_a_whole_age() -> None:
    with pytest.raises(NotValued, match="select"):
        life(Listed((0.1, 0.2, 1.0), 60, select_years=2), Fraction(121, 2))


@pytest.mark.parametrize("age", [59, 63, Fraction(239, 4)])
def test_age_outside_the_table(age: Fraction | int) -> None:
    with pytest.raises(NotValued, match="outside"):
        life(Listed((0.1, 0.2, 0.3), 60), age)


def test_a_table_that_is_not_closed_ends() -> None:
    open_table = Listed((0.1, 0.2, 0.3), 60)
    survival = life(open_table, 60)
    assert survival.at(36) == approx(0.9 * 0.8 * 0.7)
    for question in (lambda: survival.at(37), survival.end):
        with pytest.raises(NotValued, match="too early"):
            question()
    closed = life(open_table, 60, close=True)
    assert closed.at(36) == 0
    assert closed.at(24) == approx(0.9 * 0.8)


@given(RATES, FRACTIONS, st.fractions(0, 1, max_denominator=365).filter(lambda r: r < 1))
def test_survival_falls_from_one_to_nothing(rates: list[float], fractions: str, part: Fraction) -> None:
    survival = life(Listed((*rates, 1.0), 60), 60 + part, fractions)
    end = survival.end()
    line = [survival.at(months) for months in range(end + 1)]
    assert line[0] == 1
    assert line[-1] == 0
    assert min(line[:-1]) > 0
    assert all(later <= earlier + 1e-15 for earlier, later in pairwise(line))


@given(RATES)
def test_fractions_agree_at_whole_years(rates: list[float]) -> None:
    lives = [life(Listed((*rates, 1.0), 60), 60, kind) for kind in ("constant force", "uniform deaths", "Balducci")]
    for year in range(len(rates) + 1):
        assert len({one.at(12 * year) for one in lives}) == 1


def test_force_of_mortality_between_two_years() -> None:
    survival = life(Listed((0.1, 0.2, 0.3, 1.0), 60), 60)
    assert survival.force(0) == approx(-math.log(0.9))
    assert survival.force(12) == approx(-(math.log(0.9) + math.log(0.8)) / 2)
    # After month 36 nobody is left: only the year before says something.
    assert survival.force(36) == approx(-math.log(0.7))


def persistency(step: int = 1, until: float | None = None, **part: object) -> Persistency:
    rates = part.pop("rates", [0.1, 0.05])
    lapse = Lapse.model_validate({"rule": [{"rates": rates}], **part})
    return Persistency(lapse, lapse.rule[0], tuple(lapse.rule[0].rates or ()), until, step)


def test_lapses_at_each_month() -> None:
    lapses = persistency()
    assert lapses.at(0) == 1
    assert lapses.at(1) == approx(0.9 ** (1 / 12))
    assert lapses.at(12) == approx(0.9)
    assert lapses.at(36) == approx(0.9 * 0.95 * 0.95)
    assert lapses.in_advance(5) == lapses.at(5)
    assert lapses.in_arrears(5) == lapses.at(4)
    assert lapses.in_arrears(0) == 1
    assert lapses.at_valuation(Fraction(11, 2)) == lapses.at(5)


@pytest.mark.parametrize(("step", "timing"), [(12, "each step"), (12, "anniversaries"), (1, "anniversaries")])
def test_lapses_at_anniversaries(step: int, timing: str) -> None:
    lapses = persistency(step, timing=timing)
    assert [lapses.at(point) for point in (0, 11, 12, 23, 24)] == approx([1, 1, 0.9, 0.9, 0.9 * 0.95])
    assert lapses.in_arrears(12) == 1


def test_until() -> None:
    lapses = persistency(until=18.0)
    assert lapses.at(18) < lapses.at(17)
    assert lapses.at(30) == lapses.at(18)
    yearly = persistency(12, until=18.0)
    assert yearly.at(24) == yearly.at(12) == 0.9


def test_dependent_rates_spread_over_the_step() -> None:
    yearly = persistency(12, competing="dependent rates")
    assert yearly.at_valuation(Fraction(3)) == approx(0.975)
    assert yearly.in_advance(6) == yearly.in_arrears(6) == approx(0.95)
    assert yearly.in_arrears(12) == approx(0.9)
    monthly = persistency(competing="dependent rates")
    assert monthly.at_valuation(Fraction(1, 2)) == approx((1 + 0.9 ** (1 / 12)) / 2)
    with pytest.raises(ValueError, match="dependent rates"):
        persistency(competing="dependent rates", timing="anniversaries")


def test_until_from_a_column() -> None:
    rule = Lapse.model_validate({"rule": [{"rates": [0.1], "until": "term_years"}]}).rule[0]
    assert until_months(rule, 20.0) == 240
    with pytest.raises(NotValued, match="term_years"):
        until_months(rule, None)
