"""Identities that hold between values whatever the basis, on portfolios at random.

Tolerances count the roundings to the minor unit, CENT each, and leave 1e-12 of the value to floating point.
"""

from __future__ import annotations

import math
from datetime import date
from typing import Any

import numpy as np
import pytest
from any_portfolio import (
    ALIVE,
    CENT,
    INTEREST,
    ON,
    POLICIES,
    UNIT,
    basis,
    design,
    lapses,
    laws,
    mortalities,
    parts,
    portfolios,
    stream,
)
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import projection

FEW = settings(max_examples=12, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@pytest.mark.parametrize(("step", "a_year"), [("year", 1), ("month", 12)])
@FEW
@given(data=st.data())
def test_assurance_and_annuity_make_up_one(step: str, a_year: int, data: st.DataObject) -> None:
    # A + d a = 1 with both ways of leaving together: paid at the end of the step of death or lapse.
    interest = data.draw(INTEREST)
    assumed = basis(data.draw(mortalities()), interest, data.draw(lapses()))
    leaving = [stream("death", on="death"), stream("lapse", on="lapse")]
    contract = design(*leaving, stream("annuity", "in", **ALIVE, a_year=a_year))
    assurance, annuity = parts(data.draw(portfolios(step == "month")), contract, assumed, step=step)
    d = a_year * (1 - (1 + interest) ** (-1 / a_year))
    assert np.abs(assurance + d * annuity - 1).max() <= CENT * (1 + abs(d)) + 1e-12 * (1 + annuity.max())


@FEW
@given(data=st.data())
def test_prospective_is_retrospective(data: st.DataObject) -> None:
    # A - P a of what is to come = (P a - A of what is past) / (v^t p), with P = A / a at commencement.
    years = data.draw(st.integers(1, 25))
    policies, then = data.draw(portfolios(years=years)), ON.replace(year=ON.year - years)
    assumed = basis(data.draw(mortalities()), data.draw(INTEREST))

    def term(until: str | float) -> dict[str, Any]:
        return design(stream("death", on="death", to=until), stream("premium", "in", **ALIVE, to=until))

    living = design(stream("alive", **ALIVE, **{"paid": "once", "from": years}))
    whole, whole_due = parts(policies, term("term_years"), assumed, then)
    to_come, due = parts(policies, term("term_years"), assumed)
    past, past_due = parts(policies, term(years), assumed, then)
    pure, premium = parts(policies, living, assumed, then)[0], whole / whole_due
    retrospective = (premium * past_due - past) / pure
    difference = np.abs(to_come - premium * due - retrospective)
    # The premium is wrong by at most (1 + P) CENT / a, a >= 1; the rest are sums and one quotient of figures.
    wrong = 1 + premium
    bound = CENT * (wrong * (1 + due) + (wrong * (1 + past_due) + np.abs(retrospective)) / pure)
    far = pure > 1e-3
    assert far.any()
    assert np.all((difference <= bound + 1e-12 * (1 + past_due) / pure)[far])


def makeham(law: dict[str, Any], born: date) -> float:
    """The rate of the year from ON, written down once more; age in completed years at an anniversary."""
    age = ON.year - born.year - ((born.month, born.day) > (ON.month, ON.day))
    grown = law["B"] * law["c"] ** age * (law["c"] - 1) / math.log(law["c"])
    return 1.0 if age >= law["last_age"] else 1 - math.exp(-law["A"] - grown)


@FEW
@given(data=st.data())
def test_recursion_from_one_anniversary_to_the_next(data: st.DataObject) -> None:
    # (V + P) (1 + i) = q S + p V a year later, both before the premium then due.
    interest, law, rate = data.draw(INTEREST), data.draw(laws()), data.draw(st.sampled_from([0.2, 0.01]))
    policies = data.draw(portfolios())
    contract = design(
        stream("death", on="death", to="term_years"),
        stream("end", **ALIVE, paid="once", **{"from": "term_years"}),
        stream("premium", "in", **ALIVE, to="term_years", share=rate),
    )
    assumed = basis({"age": "last birthday", "rule": [{"table": law}]}, interest)
    now, later = (
        np.subtract(*parts(policies, contract, assumed, ON.replace(year=year))) for year in (ON.year, ON.year + 1)
    )
    q = np.array([makeham(law, born) for born in policies["birth_date"].to_pylist()])
    difference = (now + rate) * (1 + interest) - q - (1 - q) * later
    assert np.abs(difference).max() <= 2 * CENT * (2 + abs(interest)) + 1e-11


@FEW
@given(data=st.data())
def test_monthly_steps_against_yearly_ones(data: st.DataObject) -> None:
    # Annual payments, nothing on a move, lapses at anniversaries: the points in between do not matter.
    contract = design(
        stream("premium", "in", **ALIVE, to="term_years", increase={"rate": 0.02}),
        stream("pension", **ALIVE, **{"from": "term_years"}, paid="arrears", guarantee=5),
        stream("sure", **{"while": "certain"}, to=40, pattern=[{"years": 3, "share": 0.5}, {"share": 1.0}]),
        stream("end", **ALIVE, paid="once", **{"from": "term_years"}),
    )
    assumed = basis(data.draw(mortalities()), data.draw(INTEREST), data.draw(lapses("anniversaries")))
    policies, due = data.draw(portfolios()), data.draw(st.sampled_from(["settled", "outstanding"]))
    monthly, yearly = (parts(policies, contract, assumed, step=step, due=due) for step in ("month", "year"))
    for one, other in zip(monthly, yearly, strict=True):
        assert one.max() > 0
        assert np.abs(one - other).max() <= 2 * CENT + 1e-12 * (1 + one.max())


@pytest.mark.parametrize("step", ["year", "month"])
@FEW
@given(data=st.data())
def test_without_interest_cash_flows_add_up_to_the_parts(step: Any, data: st.DataObject) -> None:
    contract = design(
        stream("premium", "in", **ALIVE, to="term_years", a_year=12 if step == "month" else 1),
        stream("death", on="death"),
        stream("lapse", on="lapse", to=20, decrease="yearly"),
        {"name": "commission", "of": "premium", "share": 0.03, "kind": "commission"},
    )
    assumed: dict[str, Any] = basis(data.draw(mortalities()), 0.0, data.draw(lapses()))
    assumed["expense"] = [{"name": "care", "per": "policy", "rule": [{"first_year": 1e4, "later_years": 2e3}]}]
    found = projection.value(data.draw(portfolios(step == "month")), contract, assumed, ON, step=step, sample=3)
    lines = found.cash_flows.to_pylist()
    for part, kinds in (("premiums", ["premium"]), ("benefits", ["benefit"]), ("expenses", ["expense", "commission"])):
        amounts = [line["amount"] for line in lines if line["part"] in kinds]
        total = math.fsum(found.policies[f"value_of_{part}"].to_pylist())
        # A line of the table is rounded to the minor unit, before that each payment to a thousandth of one.
        bound = CENT * UNIT * (POLICIES + len(amounts) * (1 + POLICIES / 1000)) + 1e-13 * total
        assert total > 0
        assert abs(total - math.fsum(amounts)) <= bound, part
