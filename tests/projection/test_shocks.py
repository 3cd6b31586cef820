"""Shocks: what they are in words, what they refuse, and the shocked basis against one edited by hand."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from shock_cases import TODAY, after, basis, document, shock

from assumptions.adjustments import Adjustment, Step, Window
from assumptions.basis import Basis, prepare_basis
from assumptions.rules import Band, first_fit
from assumptions.shocking import WrongBasisError, shocked
from assumptions.shocks import touched, words
from assumptions.split_rules import meet, split
from projection.curves import yearly_rates

POLICY = {"product": "A", "sex": "F"}


def rates(held: Basis, age: int = 60, policy: dict[str, Any] = POLICY, month: int = 12 * 2020) -> Any:
    """The yearly rates of death of a policy that commenced in a month at an age, as the engine takes them."""
    rules = held.document.mortality.rule
    place = first_fit(rules, policy)
    assert place is not None
    scale, change = held.scales[place], held.adjustment(place)
    return yearly_rates(rules[place], held.rates[place], age, scale, month // 12, adjustment=change, month=month)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"what": "interest", "how": "absolute", "amount": -0.01}, "interest -100 bp"),
        ({"what": "mortality", "how": "relative", "amount": 0.15}, "mortality +15 %"),
        ({"what": "lapse", "how": "relative", "amount": -0.5, "at_most": 0.2}, "lapse -50 %, at most 20 points"),
        ({"what": "lapse", "how": "replaced", "amount": 0.03}, "lapse at 3 %"),
        ({"what": "mortality", "how": "absolute", "amount": 0.0015, "for_months": 12},
         "mortality +0.15 points, for 12 months"),
        ({"what": "interest", "how": "absolute", "amount": 0.01, "rates": "forward"}, "forward interest +100 bp"),
        ({"what": "mortality", "how": "relative", "amount": 0.1, "ages": {"from": 60}, "for": {"sex": "F"}},
         "mortality +10 %, ages from 60, where sex is F"),
        ({"what": "mortality", "how": "relative", "amount": 0.0}, "mortality unchanged"),
    ],
)  # fmt: skip
def test_changes_in_words(change: dict[str, Any], said: str) -> None:
    assert words(shock(change).change[0]) == said


@pytest.mark.parametrize(
    ("change", "fault"),
    [
        ({"what": "lapse", "how": "relative", "amount": 0.1, "ages": {"from": 60}}, "not go with a change of lapse"),
        ({"what": "mortality", "how": "relative", "by_maturity": {"1": 0.1}}, "'by_maturity' does not go"),
        ({"what": "interest", "how": "absolute"}, "one of 'amount' and 'by_maturity'"),
        ({"what": "interest", "how": "absolute", "amount": 100.0}, "100 basis points are 0.01"),
        ({"what": "mortality", "how": "relative", "amount": -1.5}, "does not lie between -1 and 100"),
        ({"what": "inflation", "how": "absolute", "amount": 0.01, "for": {"sex": "F"}}, "'for' does not go"),
        ({"what": "mortality", "how": "relative", "amount": 0.1, "ages": {"from": date(2020, 1, 1)}}, "takes numbers"),
    ],
)  # fmt: skip
def test_changes_refused(change: dict[str, Any], fault: str) -> None:
    with pytest.raises(ValidationError, match=fault):
        shock(change)


def test_no_change_is_the_basis_itself() -> None:
    held = basis()
    nothing = [{"what": what, "how": how, "amount": 0.0} for what in ("mortality", "lapse", "interest", "expenses",
               "inflation", "improvement") for how in ("relative", "absolute")]  # fmt: skip
    assert after(held) is after(held, *nothing) is held
    assert touched(shock(*nothing)) == frozenset()
    # A share of a part that the basis does not have is nothing too.
    assert after(held, {"what": "disability", "how": "relative", "amount": 0.35}) is held
    plain = prepare_basis({key: part for key, part in document().items() if key != "lapse"})
    assert after(plain, {"what": "lapse", "how": "relative", "amount": 0.5}) is plain


def test_an_amount_needs_something_to_be_added_to() -> None:
    plain = prepare_basis({key: part for key, part in document().items() if key != "lapse"})
    with pytest.raises(ValueError, match="change 1: the basis has no lapse"):
        after(plain, {"what": "lapse", "how": "absolute", "amount": 0.01})
    with pytest.raises(ValueError, match=r"no item of expense 'upkep'; it has upkeep, collection"):
        after(plain, {"what": "expenses", "how": "relative", "amount": 0.1, "items": ["upkep"]})
    with pytest.raises(ValueError, match=r"becomes -0\.56; it must lie above -0\.5"):
        after(plain, {"what": "interest", "how": "absolute", "amount": -0.6})


def test_the_digest_and_the_title_tell_shocked_bases_apart() -> None:
    held = basis()
    one = after(held, {"what": "mortality", "how": "relative", "amount": 0.15})
    two = after(held, {"what": "mortality", "how": "relative", "amount": 0.2})
    assert len({held.digest, one.digest, two.digest}) == 3
    assert one.digest == after(basis(), {"what": "mortality", "how": "relative", "amount": 0.15}).digest
    assert one.title == "untitled basis; mortality +15 %"


def test_a_shock_made_for_another_basis_is_an_error() -> None:
    held = basis()
    change = {"what": "mortality", "how": "relative", "amount": 0.15}
    assert shocked(held, shock(change, basis=held.digest), TODAY).digest == after(held, change).digest
    with pytest.raises(WrongBasisError, match="was made for the basis with digest 000000000000"):
        shocked(held, shock(change, basis="0" * 64), TODAY)


# Against a basis edited by hand


def test_mortality_by_a_share_is_another_multiple() -> None:
    made = rates(after(basis(), {"what": "mortality", "how": "relative", "amount": 0.15}))
    rule = document()["mortality"]["rule"][0] | {"multiple": 1.15}
    edited = rates(basis(mortality={"age": "last birthday", "rule": [rule]}))
    # Where the law's rate is below 1 / 1.15; the shocked rate is a share of the rate that counts, which is at most 1.
    np.testing.assert_allclose(made, edited, rtol=1e-14)


def test_mortality_by_an_amount_is_another_extra() -> None:
    made = rates(after(basis(), {"what": "mortality", "how": "absolute", "amount": 0.0015}))
    rule = document()["mortality"]["rule"][0] | {"extra": 0.0015}
    np.testing.assert_array_equal(made, rates(basis(mortality={"age": "last birthday", "rule": [rule]})))


def test_an_adjustment_of_the_closing_rate_does_not_count() -> None:
    made = rates(after(basis(), {"what": "mortality", "how": "relative", "amount": -0.2}))
    assert made[-1] == 1
    assert made[-2] < 1


def test_forth_and_back_is_the_base() -> None:
    held = basis()
    there = {"what": "mortality", "how": "relative", "amount": 0.25}
    back = {"what": "mortality", "how": "relative", "amount": -0.2}
    np.testing.assert_allclose(rates(after(held, there, back)), rates(held), rtol=1e-14)
    np.testing.assert_allclose(rates(shocked(after(held, there), shock(back), TODAY)), rates(held), rtol=1e-14)


def test_shocks_combine_in_their_order() -> None:
    first = {"what": "mortality", "how": "relative", "amount": 0.1}
    second = {"what": "mortality", "how": "absolute", "amount": 0.01}
    q = rates(basis())[:30]
    np.testing.assert_allclose(rates(after(basis(), first, second))[:30], 1.1 * q + 0.01, rtol=1e-14)
    np.testing.assert_allclose(rates(after(basis(), second, first))[:30], 1.1 * (q + 0.01), rtol=1e-14)


def test_filters_of_policies_ages_durations_and_years() -> None:
    held, q = basis(), rates(basis())
    women = after(held, {"what": "mortality", "how": "relative", "amount": 0.5, "for": {"sex": "F"}})
    np.testing.assert_allclose(rates(women)[:20], 1.5 * q[:20], rtol=1e-14)
    np.testing.assert_array_equal(rates(women, policy={"product": "A", "sex": "M"}), q)
    for key, band, first, last in (
        ("ages", {"from": 63, "to": 65}, 3, 5),  # of a life that entered at 60
        ("durations", {"from": 2, "to": 4}, 2, 4),
        ("calendar_years", {"from": 2027, "to": 2030}, 7, 10),  # commenced in 2020
    ):
        made = rates(after(held, {"what": "mortality", "how": "absolute", "amount": 0.01, key: band}))
        expected = q.copy()
        expected[first:last] += 0.01
        np.testing.assert_allclose(made, expected, rtol=1e-14)


def test_twelve_months_are_twelve_months() -> None:
    """The extra of a year for 12 months: what is left of the running year at once, the rest in the next one."""
    held = basis()
    catastrophe = {"what": "mortality", "how": "absolute", "amount": 0.0015, "for_months": 12}
    made = after(held, catastrophe)
    # The day after the valuation date lies in December 2026. Commencement in March 2020: 9 months of the 7th year of
    # the rates have passed, 3 are left; of the next year 9 of 12 months are in the window.
    added = rates(made, month=12 * 2020 + 2) - rates(held)
    np.testing.assert_allclose(added[5:9], [0, 0.0015, 0.0015 * 9 / 12, 0], atol=1e-15)
    # Commencement in December: the window is one year of the rates.
    added = rates(made, month=12 * 2020 + 11) - rates(held)
    np.testing.assert_allclose(added[5:9], [0, 0.0015, 0, 0], atol=1e-15)
    # A window that begins later takes shares of what is left, too.
    made = after(held, {**catastrophe, "from_months": 6})
    added = rates(made, month=12 * 2020 + 2) - rates(held)
    np.testing.assert_allclose(added[5:10], [0, 0, 0.0015 * 9 / 12, 0.0015 * 3 / 12, 0], atol=1e-15)


def test_beginnings_may_be_counted_by_quarters_and_years() -> None:
    change = {"what": "mortality", "how": "absolute", "amount": 0.0015, "for_months": 12}
    for by, counted in (("months", 12 * 2020 + 2), ("quarters", 12 * 2020 + 1), ("years", 12 * 2020 + 6)):
        made = after(basis(), {**change, "counted_by": by}).adjustment(0)
        assert made is not None
        assert made.counted(12 * 2020 + 2) == counted  # March, February, July
    # Years of the rates that differ by calendar year alone share their rows within one.
    permanent = {key: value for key, value in change.items() if key != "for_months"}
    by_year = after(basis(), {**permanent, "calendar_years": {"from": 2030}}).adjustment(0)
    assert by_year is not None
    assert (by_year.dated, by_year.grain) == (True, 12)


def test_the_two_ways_of_sharing_a_year_agree() -> None:
    for window in (Window(100, 112, 100), Window(104, 109, 100), Window(117, float("inf"), 100), Window(100, 101, 100)):
        begins = np.arange(60, 160)
        np.testing.assert_allclose(window.shares(begins), [window.share(int(one)) for one in begins], atol=1e-15)


def test_at_most_bounds_the_change() -> None:
    half = Adjustment((Step("relative", -0.5, most=0.2),))
    # Delegated Regulation (EU) 2015/35, Article 142: half, but by at most 20 points.
    assert [half.rate(w, 0, 0, 0) for w in (0.1, 0.4, 0.6, 1.0)] == pytest.approx([0.05, 0.2, 0.4, 0.8])
    np.testing.assert_allclose(half.rates(np.array([0.1, 0.4, 0.6, 1.0]), 0, 0), [0.05, 0.2, 0.4, 0.8])


def test_improvement_changes_after_the_valuation_date_only() -> None:
    rule = document()["mortality"]["rule"][0] | {"improvement": {"rate": 0.015, "base_year": 2015}}
    held = basis(mortality={"age": "last birthday", "rule": [rule]})
    scale = after(held, {"what": "improvement", "how": "absolute", "amount": 0.01}).scales[0]
    assert scale is not None
    assert scale.factor(60, 2026) == pytest.approx(0.985**11, rel=1e-14)
    assert scale.factor(60, 2030) == pytest.approx(0.985**11 * 0.975**4, rel=1e-14)
    np.testing.assert_allclose(scale.cohort(60, 2020, 40), [scale.factor(60 + n, 2020 + n) for n in range(40)])
    # A basis without improvement gets one from there on, by an amount; a share of none is none.
    scale = after(basis(), {"what": "improvement", "how": "absolute", "amount": 0.01}).scales[0]
    assert scale is not None
    assert scale.factor(60, 2026) == 1
    assert scale.factor(60, 2028) == pytest.approx(0.99**2)
    assert after(basis(), {"what": "improvement", "how": "relative", "amount": 0.5}).scales[0] is None


def test_a_reduction_factor_changes_by_its_yearly_improvement(tmp_path: Path) -> None:
    (tmp_path / "r.csv").write_text("age,2025,2026,2027,2028\n60,0.9,0.88,0.85,0.85\n")
    improvement = {"table": "r.csv", "base_year": 2024, "holds": "reduction factors"}
    rule = document()["mortality"]["rule"][0] | {"improvement": improvement}
    held = prepare_basis(document(mortality={"age": "last birthday", "rule": [rule]}), tmp_path)
    scale = after(held, {"what": "improvement", "how": "relative", "amount": 1.0}).scales[0]
    assert scale is not None
    doubled = 0.88 * (1 - 2 * (1 - 0.85 / 0.88))
    assert [scale.factor(60, year) for year in (2026, 2027, 2028)] == pytest.approx([0.88, doubled, doubled])
    np.testing.assert_allclose(scale.cohort(60, 2026, 3), [0.88, doubled, doubled])


# Expenses


def test_expenses_and_inflation() -> None:
    made = after(basis(), {"what": "expenses", "how": "relative", "amount": 0.1},
                 {"what": "inflation", "how": "absolute", "amount": 0.01})  # fmt: skip
    upkeep, collection = made.document.expense
    assert (upkeep.rule[0].first_year, upkeep.rule[0].later_years) == pytest.approx((110, 33))
    assert collection.rule[0].later_years == pytest.approx(0.022)
    inflation, of_collection = made.expense_prices
    assert of_collection is None
    assert inflation is not None
    # As before up to December 2026, the month of the day after the valuation date, and 3 % a year from there.
    assert inflation.level(inflation.months(2026, 12)) == pytest.approx(1.02 ** (11 / 12), rel=1e-15)
    assert inflation.level(inflation.months(2028, 12)) == pytest.approx(1.02 ** (11 / 12) * 1.03**2, rel=1e-15)
    only = after(basis(), {"what": "expenses", "how": "absolute", "amount": -40.0, "items": ["upkeep"]})
    assert (only.document.expense[0].rule[0].first_year, only.document.expense[0].rule[0].later_years) == (60, 0)
    assert only.document.expense[1].rule[0].later_years == 0.02


def test_inflation_for_a_time_and_twice() -> None:
    for_a_year = {"what": "inflation", "how": "replaced", "amount": 0.05, "for_months": 12}
    inflation = after(basis(), for_a_year).expense_prices[0]
    assert inflation is not None
    assert inflation.level(inflation.months(2029, 12)) == pytest.approx(1.02 ** (11 / 12) * 1.05 * 1.02**2, rel=1e-14)
    later = {"what": "inflation", "how": "absolute", "amount": 0.01, "from_months": 6}
    inflation = after(basis(), for_a_year, later).expense_prices[0]
    assert inflation is not None
    steps = 1.05**0.5 * 1.06**0.5 * 1.03**2
    assert inflation.level(inflation.months(2029, 12)) == pytest.approx(1.02 ** (11 / 12) * steps, rel=1e-14)


# Rules cut in two


def test_rules_are_cut_where_policies_differ() -> None:
    held = basis(interest={"rule": [{"flat": 0.03, "for": {"product": ["A", "B"]}}, {"flat": 0.04}]})
    made = after(held, {"what": "interest", "how": "absolute", "amount": 0.01, "for": {"product": "B"}})

    def rate(product: str) -> float:
        place = first_fit(made.document.interest.rule, {"product": product})
        assert place is not None
        return 1 / made.curves[place].factor(1.0) - 1

    assert [rate(product) for product in "ABC"] == pytest.approx([0.03, 0.04, 0.04])
    assert made.curves[1] is held.curves[0]  # what is not touched is not made anew


def test_conditions_meet() -> None:
    assert meet({"a": [1, 2, 3]}, {"a": Band.model_validate({"from": 2})}) == {"a": [2, 3]}
    assert meet({"a": "x"}, {"a": "y"}) is None
    assert meet({"a": True}, {"a": 1}) is None
    both = meet({"a": Band(from_=1, to=5)}, {"a": Band(from_=3), "b": "x"})
    assert both == {"a": Band.model_construct(from_=3, to=5), "b": "x"}
    assert meet({"a": Band(to=3)}, {"a": Band(from_=3)}) is None
    rules, pieces = split(basis().document.mortality.rule, {})
    assert rules[0] is not None
    assert [tuple(piece) for piece in pieces] == [(0, True)]
