"""Published figures made from open tables of mortality.

Tolerances are half a unit of the last printed digit; anything wider is explained beside the check.
"""

from __future__ import annotations

import numpy as np
import pytest
from open_tables import life_values, open_table

from assumptions.tables import RateTable, TableError


def am92(select_by: str = "attained age") -> RateTable:
    return open_table(2360, select_by=select_by)


# AM92 ultimate l_x: workbook of a sample project for the UK modelling examination CA2 (2007); read there.
AM92_LIVING = {
    50: 9712.0728, 55: 9557.8179, 60: 9287.2164, 65: 8821.2612, 70: 8054.0544, 75: 6879.1673, 80: 5266.4604,
    85: 3385.2479, 90: 1658.5545, 95: 539.0643, 100: 95.8476, 105: 7.1968, 110: 0.1632, 115: 0.0007,
}  # fmt: skip


@pytest.mark.parametrize("age", AM92_LIVING)
def test_am92_numbers_living(age: int) -> None:
    # Radix l_17 = 10,000; the rates at 17 and 18 stand in the archive's table 2513, those from 19 in 2360.
    juvenile = open_table(2513)
    at_19 = 10_000 * (1 - juvenile.rate(17, 0)) * (1 - juvenile.rate(18, 0))
    living = open_table(2360, table=2).survivors(at_19)
    assert living[age - 19] == pytest.approx(AM92_LIVING[age], abs=0.00005)
    assert living[-1] == 0


def test_am92_ultimate_annuities_at_4_percent() -> None:
    # Actuarial Society of India, CT5 June 2005, indicative solution 2; read in a text copy.
    ultimate = open_table(2360, table=2)
    assert life_values(ultimate, 50, 0.04)[0] == pytest.approx(17.444, abs=0.0005)
    assert life_values(ultimate, 75, 0.04)[0] == pytest.approx(8.524, abs=0.0005)


# Formulae and Tables for Examinations (Faculty and Institute of Actuaries, 2002): from memory, not read.
# Rate of interest, age, years: annuity-due and assurance, None where no figure is recalled.
AM92_SELECT = [
    (0.04, 40, None, 20.009, 0.23041),
    (0.04, 40, 20, 13.930, 0.46423),
    (0.04, 50, None, 17.454, 0.32868),
    (0.06, 40, None, 15.494, None),
]


@pytest.mark.parametrize(("i", "age", "years", "annuity", "assurance"), AM92_SELECT)
def test_am92_select_values(i: float, age: int, years: int | None, annuity: float, assurance: float | None) -> None:
    found = life_values(am92(), age, i, years)
    assert found[0] == pytest.approx(annuity, abs=0.0005)
    if assurance is not None:
        assert found[1] == pytest.approx(assurance, abs=0.000005)
        # The rows are by attained age: by entry age the assurance misses by several units of the last digit.
        assert abs(life_values(am92("entry age"), age, i, years)[1] - assurance) > 0.00002


AM92_ULTIMATE = [(0.04, 40, 20.005, 0.23056), (0.04, 60, 14.134, 0.45640), (0.06, 40, 15.491, 0.12313)]


@pytest.mark.parametrize(("i", "age", "annuity", "assurance"), AM92_ULTIMATE)
def test_am92_ultimate_values(i: float, age: int, annuity: float, assurance: float) -> None:
    # Same source as above, from memory.
    found = life_values(open_table(2360, table=2), age, i)
    assert found == (pytest.approx(annuity, abs=0.0005), pytest.approx(assurance, abs=0.000005))


def with_profits_premium(rates: RateTable) -> float:
    """Yearly premium for 10,000 at 60 for 5 years, 4 %; simple bonus of 4 % at the start of every year."""
    q, v = rates.rates_from(60, 5), 1 / 1.04
    living = np.concatenate([[1.0], np.cumprod(1 - q)])
    years = np.arange(5.0)
    deaths = float((living[:-1] * q * v ** (years + 1) * 10_000 * (1.04 + 0.04 * years)).sum())
    annuity = float((living[:-1] * v**years).sum())
    # Expenses: 60 % of the first premium, 5 % of the later ones.
    return (deaths + living[5] * v**5 * 12_000) / (annuity - 0.6 - 0.05 * (annuity - 1))


def test_a1967_70_is_keyed_by_entry_age() -> None:
    # A university's examination question with its answer, 2,627, quoted in a homework forum; read there.
    assert with_profits_premium(open_table(258, select_by="entry age")) == pytest.approx(2627, abs=0.5)
    assert abs(with_profits_premium(open_table(258, select_by="attained age")) - 2627) > 1


def test_amc00_is_keyed_by_entry_age() -> None:
    # No printed figure is at hand, but selection must not raise mortality: read by entry age, no select rate
    # is above the ultimate rate of the same attained age; read by attained age, many are.
    def raised(rates: RateTable) -> int:
        cells = [(age, t) for age in range(60, 89) for t in range(rates.select_years)]
        return sum(rates.rate(age, t) > rates.ultimate[age + t - rates.ultimate_from] for age, t in cells)

    assert raised(open_table(2319, select_by="entry age")) == 0
    assert raised(open_table(2319, select_by="attained age")) > 20
    assert raised(am92()) == 0


@pytest.mark.parametrize("number", [2361, 2362, 2363])
def test_files_that_state_their_keying_in_words(number: int) -> None:
    # Continuous Mortality Investigation, AF92, TM92 and TF92: "values of q[x-t]+t" in the file itself.
    assert open_table(number).first_age == 17
    with pytest.raises(TableError, match="by attained age, as the file says"):
        open_table(number, select_by="entry age")


@pytest.mark.parametrize("number", [2360, 2319, 258, 259])
def test_files_that_do_not_state_their_keying(number: int) -> None:
    with pytest.raises(TableError, match="does not say which age stands beside a row"):
        open_table(number)


def reduction_factor(age: int, years: float) -> float:
    """Continuous Mortality Investigation, Report 17: factor on the 1992 rate, ``years`` later."""
    if age < 60:
        limit, pace = 0.13, 0.55
    elif age <= 110:
        limit = 1 + (1 - 0.13) * (age - 110) / 50
        pace = ((110 - age) * 0.55 + (age - 60) * 0.29) / 50
    else:
        return 1.0
    return limit + (1 - limit) * (1 - pace) ** (years / 20)


@pytest.mark.parametrize(("base", "projected"), [(2365, 2366), (2368, 2369)], ids=["PMA92", "PFA92"])
def test_projection_to_2010_of_the_92_series(base: int, projected: int) -> None:
    # PMA92, PFA92 and PMA92C10, PFA92C10 as published, all to six places; the constants of the reduction
    # factors are from memory and confirmed by the match of every rate.
    start, end = open_table(base), open_table(projected)
    ages = range(20, 120)
    made = [round(start.rate(age, 0) * reduction_factor(age, 18), 6) for age in ages]
    assert made == pytest.approx([end.rate(age, 0) for age in ages], abs=1e-9)


C10 = {
    2366: {50: 0.000729, 60: 0.003277, 65: 0.007552, 70: 0.016213, 80: 0.059223, 100: 0.303666},
    2369: {50: 0.000704, 60: 0.002751, 65: 0.00586, 70: 0.011783, 80: 0.039867, 100: 0.222161},
}


@pytest.mark.parametrize(("number", "age"), [(number, age) for number, rates in C10.items() for age in rates])
def test_rates_of_the_tables_projected_to_2010(number: int, age: int) -> None:
    # PMA92C10 and PFA92C10, Continuous Mortality Investigation, Report 17; figures read in the source named.
    assert open_table(number).rate(age, 0) == C10[number][age]


# Bell and Wade, Actuarial Tables Based on the U.S. Life Tables 1989-91, Social Security Administration,
# Actuarial Study 113, tables 5.J, 9.D and 3.J; read there. Age: D, N, M and the annuity in arrears.
STUDY_113 = {
    (589, 0.10): {
        0: (100000.0, 1083885.02, 1464.998, 9.8389),
        10: (38106.713, 413781.82, 490.184, 9.8585),
        55: (465.579, 4208.65, 82.975, 8.0396),
        65: (154.907, 1196.32, 46.151, 6.7228),
    },
    (592, 0.04): {
        0: (100000.0, 2399827.66, 7698.936, 22.9983),
        10: (66341.753, 1568461.7, 6016.302, 22.6422),
        55: (10262.229, 159469.83, 4128.774, 14.5395),
        65: (6113.573, 76614.67, 3166.855, 11.5319),
    },
    (588, 0.10): {
        0: (100000.0, 1087064.09, 1175.992, 9.8706),
        10: (38134.472, 416692.01, 253.381, 9.9269),
        55: (491.28, 4715.93, 62.559, 8.5993),
        65: (173.491, 1482.56, 38.713, 7.5454),
    },
}


STUDY_113_AGES = [(number, i, age) for (number, i), rows in STUDY_113.items() for age in rows]


@pytest.mark.parametrize(("number", "i", "age"), STUDY_113_AGES)
def test_commutation_functions_of_united_states_life_tables(number: int, i: float, age: int) -> None:
    living = open_table(number).survivors(100_000)[:-1]
    D = living * (1 + i) ** -np.arange(float(len(living)))
    N = float(D[age:].sum())
    M = D[age] - i / (1 + i) * N
    printed = STUDY_113[number, i][age]
    # The archive has rates to five places, the study worked with whole numbers living. Roundings of 5e-6 at
    # most, over 65 years, move D and N by some 2e-5 of themselves, M by as much of D; annuities by 0.0003.
    assert D[age] == pytest.approx(printed[0], rel=5e-5)
    assert pytest.approx(printed[1], rel=5e-5) == N
    assert pytest.approx(printed[2], abs=5e-5 * D[age]) == M
    assert N / D[age] - 1 == pytest.approx(printed[3], abs=0.0003)
