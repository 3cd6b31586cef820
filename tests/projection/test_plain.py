"""Reserves of the plain twin against closed forms, recursions and sums worked by hand."""

from __future__ import annotations

import math
from datetime import date
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plain_cases import BORN, COMMENCED, basis, constant, design, policy, stream, value

from assumptions.basis import Basis, prepare_basis
from projection.plain import plain_value
from projection.plain_dates import monthiversary
from projection.settings import Settings

approx = pytest.approx

V = 1 / 1.04
PREMIUM = {"name": "premium", "direction": "in", "amount": "premium_pa", "while": "alive", "to": "term_years"}
DEATH = stream("death", "sum_assured", on="death", to="term_years")
MATURITY = stream("maturity", "sum_assured", start="term_years", paid="once")
LIFE = stream("annuity", 1000.0)
MONTH_STEPS = st.sampled_from([("month", 1), ("year", 12)])


@pytest.mark.parametrize("a_year", [1, 2, 4, 12])
@pytest.mark.parametrize("step", ["month", "year"])
def test_annuity_due_with_constant_force(a_year: int, step: str) -> None:
    # A geometric series: each payment is (p v)^(1/m) times the last.
    found = value(design(stream("annuity", 1000.0, to=20, a_year=a_year)), basis(constant(0.02)), step=step)
    ratio = (0.98 * V) ** (1 / a_year)
    assert found.reserve == approx(1000 / a_year * (1 - ratio ** (20 * a_year)) / (1 - ratio), rel=1e-13)


def test_annuity_in_arrears_is_due_less_the_first_and_plus_the_last() -> None:
    assumed = basis()
    due = value(design(stream("a", 1200.0, to=15, a_year=12)), assumed)
    arrears = value(design(stream("a", 1200.0, to=15, a_year=12, paid="arrears")), assumed)
    endowment = value(design(stream("a", 100.0, start=15, paid="once")), assumed)
    assert arrears.reserve == approx(due.reserve - 100 + endowment.reserve, rel=1e-13)


@pytest.mark.parametrize(("step", "m"), [("year", 1), ("month", 12)])
def test_assurance_and_annuity_add_up_to_one(step: str, m: int) -> None:
    # A + d(m) a(m) = 1 for the whole life, with claims at the end of the step and payments at each step.
    assumed = basis()
    a = value(design(stream("a", 1.0, a_year=m)), assumed, step=step).reserve
    A = value(design(stream("A", 1.0, on="death")), assumed, step=step).reserve
    assert A + m * (1 - V ** (1 / m)) * a == approx(1, rel=1e-13)


@given(st.integers(1, 40), MONTH_STEPS, st.integers(0, 3000), st.sampled_from(["exact", "nearest birthday"]))
@settings(max_examples=25, deadline=None)
def test_endowment_and_annuity_add_up_to_one(term: int, step: tuple[str, int], days: int, age: str) -> None:
    name, months = step
    on = date.fromordinal(COMMENCED.toordinal() + days % (365 * term))
    assumed = basis(age=age)
    contract = design(stream("A", 1.0, on="death", to=term), stream("E", 1.0, start=term, paid="once"))
    found = value(contract, assumed, on, name, "settled")
    annuity = value(design(stream("a", 1.0, to=term, a_year=12 // months)), assumed, on, name, "settled")
    m = 12 / months
    broken = 1 - float(found.position.step)
    # Whoever dies in the broken step is paid at its end, as if 1 were due there for certain; for every step
    # that somebody still begins after it, the 1 is paid a step later and loses a step's discount.
    assert found.payments[0].t == approx(broken / m, abs=1e-12)
    assert found.reserve == approx(V ** (broken / m) - m * (1 - V ** (1 / m)) * annuity.reserve, rel=1e-12)


ENDOWMENT = design(PREMIUM, DEATH, MATURITY)
TERMS: dict[str, Any] = {"term_years": 10.0, "premium_pa": 900.0, "sum_assured": 10000.0}


def test_thiele_year_by_year() -> None:
    # (V(t) + P)(1 + i) = q S + p V(t + 1), with the reserve just before the premium.
    assumed = basis()
    reserves = [value(ENDOWMENT, assumed, monthiversary(COMMENCED, 12 * year), **TERMS).reserve for year in range(11)]
    for year in range(10):
        q = assumed.rates[0].rate(40, year)
        ahead = q * 10000 + (1 - q) * reserves[year + 1]
        assert (reserves[year] + 900) * 1.04 == approx(ahead, rel=1e-12)
    assert reserves[10] == 10000


def test_thiele_month_by_month_with_lapses_settled() -> None:
    # V(g) (1 + i)^(1/12) = q S + p [out and in due at g + 1] + p (1 - w) V(g + 1), after the flows at g.
    assumed = basis(lapse={"rule": [{"rates": [0.2, 0.1]}]})
    surrender = stream("surrender", "sum_assured", share=0.1, on="lapse", to="term_years")
    contract = design({**PREMIUM, "a_year": 12}, DEATH, MATURITY, surrender)
    reserves = [
        value(contract, assumed, monthiversary(COMMENCED, point), "month", "settled", **TERMS).reserve
        for point in range(121)
    ]
    for point in range(120):
        q = 1 - (1 - assumed.rates[0].rate(40, point // 12)) ** (1 / 12)
        w = 1 - (1 - (0.2 if point < 12 else 0.1)) ** (1 / 12)
        premium = 75 * (1 - w) if point < 119 else 0
        maturity = 10000 if point == 119 else 0
        stays = (1 - w) * reserves[point + 1] - premium + maturity + w * 1000
        assert reserves[point] * 1.04 ** (1 / 12) == approx(q * 10000 + (1 - q) * stays, rel=1e-11)
    assert reserves[120] == 0


def test_prospective_is_retrospective() -> None:
    # On the premium of equivalence, what was taken in less what was paid out, per survivor, is the reserve.
    assumed = basis()
    at_start = value(ENDOWMENT, assumed, **TERMS)
    terms = {**TERMS, "premium_pa": 900 * at_start.benefits / at_start.premiums}
    fund, alive = 0.0, 1.0
    for year in range(10):
        found = value(ENDOWMENT, assumed, monthiversary(COMMENCED, 12 * year), **terms)
        assert found.reserve == approx(fund / alive, rel=1e-11, abs=1e-8)
        q = assumed.rates[0].rate(40, year)
        fund = (fund + alive * terms["premium_pa"]) * 1.04 - alive * q * 10000
        alive *= 1 - q


def test_a_reserve_within_the_step_grows_to_the_next_step_date() -> None:
    # No interpolation: V(T) = v^(time) [q S + p V] with the survival of the broken step itself.
    assumed = basis(fractions="uniform deaths")
    on = date(2027, 9, 10)
    found = value(ENDOWMENT, assumed, on, "year", "settled", **TERMS)
    after = value(ENDOWMENT, assumed, date(2028, 3, 10), **TERMS)
    passed = 184 / 366
    q = assumed.rates[0].rate(40, 1)
    p = (1 - q) / (1 - passed * q)
    assert found.reserve == approx(V ** (1 - passed) * ((1 - p) * 10000 + p * after.reserve), rel=1e-12)


@given(st.integers(0, 9), st.sampled_from(["settled", "outstanding"]))
@settings(max_examples=8, deadline=None)
def test_steps_agree_for_yearly_payments_on_an_anniversary(year: int, due: str) -> None:
    contract = design(PREMIUM, MATURITY)
    on = monthiversary(COMMENCED, 12 * year)
    by_month = value(contract, basis(), on, "month", due, **TERMS)
    assert by_month.reserve == approx(value(contract, basis(), on, "year", due, **TERMS).reserve, rel=1e-13)


def test_settled_and_outstanding_differ_by_what_is_due_on_the_day() -> None:
    contract = design({**PREMIUM, "a_year": 12}, DEATH, MATURITY, stream("bonus", 50.0, to=10, paid="arrears"))
    assumed = basis(lapse={"rule": [{"rates": [0.3]}]})
    on = date(2027, 3, 10)
    outstanding = value(contract, assumed, on, "month", "outstanding", **TERMS)
    settled = value(contract, assumed, on, "month", "settled", **TERMS)
    # Premium 75 in advance and bonus 50 in arrears, both with probability 1; deaths and lapses are past.
    assert outstanding.reserve - settled.reserve == approx(50 - 75, abs=1e-9)
    due_now = [payment for payment in outstanding.payments if payment.t == 0]
    assert [(payment.survival, payment.persistency) for payment in due_now] == [(1, 1), (1, 1)]
    off_the_day = [
        value(contract, assumed, date(2027, 3, 11), "month", due, **TERMS) for due in ("settled", "outstanding")
    ]
    assert off_the_day[0].reserve == off_the_day[1].reserve


def test_maturity_on_the_valuation_date() -> None:
    contract = design(stream("maturity", 1000.0, start=2, paid="once"))
    on = date(2028, 3, 10)
    assert value(contract, basis(), on, "month", "outstanding").reserve == 1000
    assert value(contract, basis(), on, "month", "settled").reserve == 0


def test_guarantee_before_within_and_after() -> None:
    contract = design(stream("annuity", 100.0, start=5, guarantee=3))
    q = 0.1
    rates = constant(q, last=1.0)
    lapses = {"rule": [{"rates": [0.2]}]}
    before = value(contract, basis(rates, lapse=lapses), date(2029, 3, 10))
    alive, kept = 0.9**2, 0.8**2
    certain = [(payment.survival, payment.persistency) for payment in before.payments[:3]]
    assert certain == [approx((alive, kept))] * 3
    assert before.payments[3].survival == approx(0.9**5)
    assert before.payments[3].persistency == approx(0.8**5)
    within = value(contract, basis(rates), date(2032, 9, 10), "month")
    assert [payment.survival for payment in within.payments[:2]] == [1, approx(0.9**1.5)]
    assert value(contract, basis(rates), date(2031, 3, 10), due="outstanding").payments[0].survival == 1
    after = value(contract, basis(rates), date(2034, 9, 10), "month")
    assert after.payments[0].survival == approx(0.9**0.5)


def test_guarantee_in_arrears_ends_with_its_last_payment() -> None:
    contract = design(stream("annuity", 100.0, guarantee=3, paid="arrears", to=10))
    found = value(contract, basis(constant(0.1)))
    assert [payment.survival for payment in found.payments[:4]] == [1, 1, 1, approx(0.9**4)]


@pytest.mark.parametrize(
    ("claims", "years"), [("middle of step", -0.5), ({"delay_months": 2}, -0.5 + 2 / 12), ("end of step", 0)]
)
def test_when_claims_are_paid(claims: Any, years: float) -> None:
    contract = design(stream("death", 1.0, on="death", to=30))
    end = value(contract, basis())
    assert value(contract, basis(claims={"paid": claims})).reserve == approx(end.reserve * V**years, rel=1e-13)


def test_a_claim_of_the_broken_step_is_paid_in_the_middle_of_what_is_left() -> None:
    contract = design(stream("death", 1.0, on="death", to=30))
    found = value(contract, basis(claims={"paid": "middle of step"}), date(2026, 3, 20), "month")
    assert [payment.t * 12 for payment in found.payments[:2]] == approx([21 / 62, 21 / 31 + 0.5])


def test_cash_flow_months_of_claims() -> None:
    contract = design(stream("death", 1.0, on="death", to=30))
    months = {
        day: value(
            contract,
            basis(claims={"paid": "middle of step"}),
            date(2026, 5, day),
            "month",
            commencement_date=date(2026, 5, day),
        )
        .payments[0]
        .month
        for day in (1, 31)
    }
    assert months == {1: date(2026, 5, 1), 31: date(2026, 6, 1)}


def test_pattern_increase_and_decrease() -> None:
    def relatives(**keys: Any) -> list[float]:
        return [payment.relative for payment in value(design(stream("a", 1.0, **keys)), basis()).payments]

    steps = [{"years": 2, "share": 1.0}, {"years": 1, "share": 0.5}]
    assert relatives(to=5, pattern=steps) == [1, 1, 0.5, 0, 0]
    assert relatives(to=5, pattern=[*steps, {"share": 0.2}]) == [1, 1, 0.5, 0.2, 0.2]
    assert relatives(to=3, increase={"rate": 0.1}) == approx([1, 1.1, 1.21])
    assert relatives(to=3, increase={"rate": 0.1, "kind": "simple"}) == approx([1, 1.1, 1.2])
    assert relatives(start=2, to=4, increase={"rate": 0.1}, clock="commencement") == approx([1.21, 1.331])
    assert relatives(start=2, to=4, increase={"rate": 0.1}) == approx([1, 1.1])
    assert relatives(to=4, decrease="yearly") == [1, 0.75, 0.5, 0.25]
    assert relatives(to=2, a_year=4, decrease="monthly") == [1 - 3 * n / 24 for n in range(8)]
    assert relatives(to=2, a_year=2, decrease="yearly") == [1, 1, 0.5, 0.5]
    assert relatives(to=2, a_year=2, paid="arrears", increase={"rate": 0.1}) == approx([1, 1, 1.1, 1.1])
    assert relatives(start=2, paid="once", increase={"rate": 0.1}, clock="commencement") == approx([1.1])
    assert relatives(start=2, paid="once", increase={"rate": 0.1}) == [1]


def test_a_death_counts_at_the_start_of_its_step() -> None:
    decreasing = stream("death", 1.0, on="death", to=2, decrease="yearly")
    found = value(design(decreasing), basis(), date(2026, 6, 1), "year")
    assert [payment.relative for payment in found.payments] == [1, 0.5]


def test_share_of_another_stream() -> None:
    commission = stream(
        "commission",
        of="premium",
        kind="commission",
        share=0.5,
        pattern=[{"years": 1, "share": 1}, {"share": 0.1}],
    )
    premium = {**PREMIUM, "pattern": [{"years": 2, "share": 1}, {"share": 0.6}]}
    found = value(design(premium, commission), basis(), **TERMS)
    paid = [payment for payment in found.payments if payment.stream == "commission"]
    assert [payment.amount * payment.relative for payment in paid[:3]] == approx([450, 45, 27])
    assert [payment.survival for payment in paid] == [
        payment.survival for payment in found.payments if payment.stream == "premium"
    ]
    assert {payment.direction for payment in paid} == {"out"}
    assert found.expenses == approx(sum(payment.value for payment in paid))


def test_a_premium_paid_back_counts_against_the_premiums() -> None:
    back = stream("rebate", 10.0, kind="premium", to=10)
    found = value(design(PREMIUM, back), basis(), **TERMS)
    assert found.premiums == approx(890 / 900 * value(design(PREMIUM), basis(), **TERMS).premiums)
    assert found.reserve == -found.premiums


def test_expenses_per_policy() -> None:
    item = {
        "name": "keeping",
        "per": "policy",
        "a_year": 4,
        "inflation": {"rate": 0.02, "from": date(2026, 6, 1)},
        "rule": [{"first_year": 100, "later_years": 40}],
    }
    found = value(design(PREMIUM, MATURITY), basis(expense=[item]), **TERMS)
    paid = [payment for payment in found.payments if payment.stream == "keeping"]
    assert len(paid) == 40
    assert [payment.amount for payment in paid[:5]] == [25, 25, 25, 25, 10]
    assert [payment.relative for payment in paid[:3]] == approx([1, 1, 1.02**0.25])
    assert found.expenses == approx(sum(payment.value for payment in paid))


def test_expenses_per_policy_run_for_life_with_a_contract_for_life() -> None:
    item = {"name": "keeping", "per": "policy", "a_year": 1, "rule": [{"first_year": 10, "later_years": 10}]}
    found = value(design(LIFE, stream("certain", 1.0, certain=True, to=3)), basis(expense=[item]))
    annuity = value(design(stream("a", 10.0)), basis())
    assert found.expenses == approx(annuity.reserve)
    certain_only = design(stream("certain", 1.0, certain=True, to=3))
    assert value(certain_only, basis(expense=[item])).expenses == 0


def test_expenses_per_premium_benefit_and_claim() -> None:
    rule = [{"first_year": 0.1, "later_years": 0.02}]
    items = [
        {"name": "collection", "per": "premium", "rule": rule},
        {"name": "payment", "per": "benefit", "rule": rule},
        {"name": "claim", "per": "claim", "rule": [{"first_year": 300, "later_years": 200}]},
    ]
    found = value(ENDOWMENT, basis(expense=items), **TERMS)
    by_name: dict[str, list[float]] = {}
    for payment in found.payments:
        by_name.setdefault(payment.stream, []).append(payment.value)
    first, *later = by_name["premium"]
    assert sum(by_name["collection"]) == approx(0.1 * first + 0.02 * sum(later))
    assert sum(by_name["payment"]) == approx(
        0.1 * by_name["death"][0] + 0.02 * (sum(by_name["death"][1:]) + by_name["maturity"][0])
    )
    assert sum(by_name["claim"]) == approx(
        (300 * by_name["death"][0] + 200 * sum(by_name["death"][1:]) + 200 * by_name["maturity"][0]) / 10000
    )


def test_for_certain_depends_on_nobody() -> None:
    found = value(
        design(stream("certain", 100.0, certain=True, to=5)),
        basis(lapse={"rule": [{"rates": [0.5]}]}),
        date(2027, 9, 10),
        "month",
    )
    assert found.reserve == approx(100 * sum(V ** (year + 0.5) for year in range(3)), rel=1e-4)
    assert {payment.survival * payment.persistency for payment in found.payments} == {1.0}


@pytest.mark.parametrize("competing", ["lapses at the end", "dependent rates"])
@given(days=st.integers(0, 1800), step=MONTH_STEPS)
@settings(max_examples=12, deadline=None)
def test_everybody_dies_lapses_or_stays(competing: str, days: int, step: tuple[str, int]) -> None:
    assumed = basis(lapse={"competing": competing, "rule": [{"rates": [0.2, 0.1]}]}, fractions="uniform deaths")
    contract = design(stream("death", 1.0, on="death", to=6), stream("lapse", 1.0, on="lapse", to=6))
    on = date.fromordinal(COMMENCED.toordinal() + days)
    found = value(contract, assumed, on, step[0])
    left = sum(payment.expected for payment in found.payments)
    stays = found.life.at(72) / found.survival * found.lapses.at(72) / found.persistency
    assert left + stays == approx(1, rel=1e-12)
    assert min(payment.expected for payment in found.payments) > 0


def test_dependent_rates_of_one_year() -> None:
    # Uniform in the single tables: dying q (1 - w / 2), lapsing w (1 - q / 2).
    lapse = {"competing": "dependent rates", "rule": [{"rates": [0.2]}]}
    contract = design(stream("death", 1.0, on="death", to=1), stream("lapse", 1.0, on="lapse", to=1))
    found = value(contract, basis(constant(0.1), lapse=lapse))
    assert [payment.expected for payment in found.payments] == approx([0.1 * 0.9, 0.2 * 0.95])


def woolhouse(terms: int, **keys: Any) -> dict[str, Any]:
    return stream("annuity", 1.0, a_year=12, payments=f"Woolhouse {terms}", **keys)


def test_woolhouse_by_the_textbook_formula() -> None:
    # Makeham's standard ultimate law, 5 %, age 65: two terms 13.091457, exact 13.086955.
    # Dickson, Hardy and Waters, Actuarial Mathematics for Life Contingent Risks: its standard ultimate model.
    born = date(1961, 3, 10)
    assumed = basis(i=0.05)

    def reserve(given: dict[str, Any]) -> float:
        return value(design(given), assumed, birth_date=born).reserve

    yearly = reserve(stream("annuity", 1.0))
    two, three = reserve(woolhouse(2)), reserve(woolhouse(3))
    assert two == approx(yearly - 11 / 24, rel=1e-12)
    assert two == approx(13.091457, abs=5e-7)
    force = -math.log(1 - assumed.rates[0].rate(65, 0))
    assert three == approx(two - 143 / 1728 * (force + math.log(1.05)), rel=1e-12)
    # The formula's force at 65 is that of the age itself; here it is the mean of the first year.
    assert three == approx(13.086955, abs=5e-5)


@pytest.mark.parametrize("paid", ["advance", "arrears"])
@pytest.mark.parametrize("on", [COMMENCED, date(2028, 3, 10), date(2028, 7, 25)])
def test_woolhouse_is_near_payments_at_their_dates(paid: str, on: date) -> None:
    terms = {"start": 1, "to": 15.5, "increase": {"rate": 0.03}, "paid": paid}
    at_dates = value(design(stream("annuity", 1.0, a_year=12, **terms)), basis(), on, "month", "settled")
    for number, tolerance in ((2, 8e-3), (3, 2e-4)):
        found = value(design(woolhouse(number, **terms)), basis(), on, "month", "settled")
        assert len(found.payments) < len(at_dates.payments)
        assert found.reserve == approx(at_dates.reserve, abs=tolerance)


def test_woolhouse_keeps_the_year_of_the_valuation_date_and_a_part_of_a_year_at_their_dates() -> None:
    def points(on: date, due: str, **terms: Any) -> list[int]:
        found = value(design(woolhouse(2, to=3.5, **terms)), basis(), on, "month", due)
        return [payment.point for payment in found.payments]

    rest = [12, 24, 24, 36, *range(36, 42)]
    assert points(date(2026, 7, 1), "settled") == [*range(4, 12), *rest]
    assert points(COMMENCED, "outstanding") == [0, 12, *rest]
    # The payment due on the first day is past, so that the formula no longer holds for the year.
    assert points(COMMENCED, "settled") == [*range(1, 12), *rest]
    assert points(COMMENCED, "settled", paid="arrears") == [0, 12, *rest[:-6], *range(37, 43)]


def test_broken_and_leap_dates() -> None:
    # Commenced on 31 January: due dates fall on the last days of the months.
    found = value(
        design(stream("a", 12.0, to=1, a_year=12)),
        basis(),
        date(2028, 2, 15),
        "month",
        commencement_date=date(2028, 1, 31),
    )
    assert [payment.due for payment in found.payments[:3]] == [
        date(2028, 2, 29),
        date(2028, 3, 31),
        date(2028, 4, 30),
    ]
    assert found.payments[0].t == approx(14 / 29 / 12)
    assert found.payments[0].month == date(2028, 2, 1)


@given(
    st.integers(0, 7000),
    MONTH_STEPS,
    st.sampled_from(["settled", "outstanding"]),
    st.sampled_from(["constant force", "uniform deaths", "Balducci"]),
    st.floats(0.1, 9.0),
)
@settings(max_examples=20, deadline=None)
def test_values_are_sums_of_payments_and_grow_with_the_amounts(
    days: int, step: tuple[str, int], due: str, fractions: str, factor: float
) -> None:
    assumed = basis(fractions=fractions, lapse={"rule": [{"rates": [0.1, 0.05], "until": "term_years"}]})
    on = date.fromordinal(COMMENCED.toordinal() + days)
    terms = {"term_years": 20.0, "premium_pa": 900.0, "sum_assured": 10000.0}
    found = value(ENDOWMENT, assumed, on, step[0], due, **terms)
    for part in ("benefits", "premiums"):
        total = sum(payment.value for payment in found.payments if payment.part == part)
        assert total == approx(getattr(found, part), rel=1e-12)
    bigger = {**terms, "premium_pa": 900.0 * factor, "sum_assured": 10000.0 * factor}
    assert value(ENDOWMENT, assumed, on, step[0], due, **bigger).reserve == approx(found.reserve * factor, rel=1e-9)
    for payment in found.payments:
        assert payment.value == approx(payment.expected * assumed.curves[0].factor(payment.t), rel=1e-14)
        assert 0 <= payment.survival <= 1
        assert 0 <= payment.persistency <= 1


def test_without_the_list_of_payments_the_sums_are_the_same() -> None:
    asked = (policy(**TERMS), ENDOWMENT, basis(), Settings(date(2026, 11, 30)))
    lean, full = plain_value(*asked, payments=False), plain_value(*asked)
    assert lean.payments == []
    assert (lean.benefits, lean.premiums, lean.reserve) == (full.benefits, full.premiums, full.reserve)


def test_rules_used_and_the_policy_of_another_rule() -> None:
    assumed = two_rules()
    found = value(ENDOWMENT, assumed, sex="M", **TERMS)
    assert found.rules.mortality == 2
    assert found.rules.lapse == 0
    assert (float(found.age), found.survival, found.persistency) == (40, 1, 1)
    assert value(ENDOWMENT, assumed, sex="F", **TERMS).rules.mortality == 1


def two_rules() -> Basis:
    made = basis(mortality_rule={"for": {"sex": "F"}})
    document = made.document.model_dump(by_alias=True)
    document["mortality"]["rule"].append({**document["mortality"]["rule"][0], "for": {"sex": "M"}, "multiple": 1.2})
    return prepare_basis(document)


def test_birthdays_are_what_the_age_hangs_on() -> None:
    older = value(ENDOWMENT, basis(age="last birthday"), birth_date=date(1985, 3, 11), **TERMS)
    assert older.reserve == value(ENDOWMENT, basis(age="last birthday"), birth_date=BORN, **TERMS).reserve
    assert value(ENDOWMENT, basis(), birth_date=date(1985, 3, 11), **TERMS).reserve != older.reserve
