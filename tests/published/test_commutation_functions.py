"""Commutation functions as values of one policy that commenced at the first age of the table.

D_x, N_x and M_x, divided by D at entry, are a pure endowment, a deferred annuity and a deferred assurance; entered
at the first age with D as the amount they are the printed columns. So durations run over the whole of life.
"""

from __future__ import annotations

import pytest
from citations import cited
from contracts import annuity, insurance, once, printed, value
from open_tables import FOLDER

ULTIMATE = {"file": str(FOLDER / "t2360.xml"), "table": 2}
"""AM92 ultimate, from 19 on."""

AT_19 = 10_000 * (1 - 0.0006) * (1 - 0.000594)
"""l_19 from l_17 = 10,000 and the rates at 17 and 18 of the archive's table 2513."""


@pytest.mark.parametrize("age", printed("A05"))
@cited("A05")
def test_am92_numbers_living(case: str, age: str) -> None:
    found = value([once(int(age) - 19, AT_19)], ULTIMATE, 0.0, 19)
    assert found == pytest.approx(printed(case)[age], abs=0.00005)


@cited("A07")
def test_am92_at_4_percent(case: str) -> None:
    figures = printed(case)
    for age in (40, 50, 75):
        found = value([once(age - 19, AT_19 * 1.04**-19)], ULTIMATE, 0.04, 19)
        assert found == pytest.approx(figures[f"D_{age}"], abs=0.005)
    for age in (50, 75):
        assert value([annuity()], ULTIMATE, 0.04, age) == pytest.approx(figures[f"adue_{age}"], abs=0.0005)


UNITED_STATES = {"A16-WM": (589, 0.1), "A16-NWF": (592, 0.04), "A16-F": (588, 0.1)}
"""Table of the archive and rate of interest."""


@pytest.mark.parametrize("age", [0, 10, 55, 65])
@cited(*UNITED_STATES)
def test_united_states_life_tables(case: str, age: int) -> None:
    number, i = UNITED_STATES[case]
    rules = [{"table": {"file": str(FOLDER / f"t{number}.xml")}, "close": True}]
    figures = printed(case)
    # Values are linear in the amount; of 100,000, scaled up, they would exceed the largest result of a policy.
    D, N, M = (100 * value([sum_of(age, amount=1000)], rules, i, 0) for sum_of in (once, annuity, insurance))
    # The archive has rates to five places, the study worked with whole numbers living: roundings of 5e-6 over 65
    # years move D and N by some 2e-5 of themselves, and M by as much of D.
    assert figures[f"D_{age}"] == pytest.approx(D, rel=5e-5)
    assert figures[f"N_{age}"] == pytest.approx(N, rel=5e-5)
    assert figures[f"M_{age}"] == pytest.approx(M, abs=5e-5 * D)
