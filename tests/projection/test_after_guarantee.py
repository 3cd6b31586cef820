"""Dependants' pensions with and without overlap, on either death; benefits by cause; cover on the first death.

Closed forms: constant forces mu1 and mu2 and independent lives, as in test_two_lives.
"""

from __future__ import annotations

import math
from typing import Any

import pytest
from pydantic import ValidationError
from test_two_lives import INTEREST, annuity, basis, benefit, design, reserve

from portfolios.designs import Design

MU = (0.03, 0.02)
V = 1 / (1 + INTEREST)
P1, P2 = (math.exp(-mu) for mu in MU)
OFFICE = basis(*MU)
"""Forces of mortality of both lives, and yearly survival."""

YEARS = range(20)
"""Annuities end after 20 years."""


def pension(share: float = 0.5, start: Any = 0, word: str = "second only") -> dict[str, Any]:
    return annuity(word, name="pension", share=share, to=20, **{"from": start})


def close(found: float, expected: float) -> None:
    # Rounded to a cent.
    assert found == pytest.approx(1e6 * expected, abs=0.00501)


def main(guarantee: int) -> float:
    """An annuity of 1 a year in advance on the first life, the first payments certain."""
    return sum(V**t * (1 if t < guarantee else P1**t) for t in YEARS)


def test_with_overlap_the_pension_begins_at_the_first_death() -> None:
    contract = design(annuity("first", to=20, guarantee=10), pension())
    expected = main(10) + sum(0.5 * V**t * P2**t * (1 - P1**t) for t in YEARS)
    close(reserve(contract, OFFICE), expected)


def test_without_overlap_it_begins_after_the_guarantee() -> None:
    contract = design(annuity("first", to=20, guarantee=10), pension(start={"after": "first"}))
    expected = main(10) + sum(0.5 * V**t * P2**t * (1 - P1**t) for t in YEARS if t >= 10)
    close(reserve(contract, OFFICE), expected)


def test_after_a_deferral_it_begins_after_deferral_and_guarantee() -> None:
    # From 5 years on, for 4 years certain: the pension begins 9 years after commencement.
    contract = design(annuity("first", guarantee=4, to=20, **{"from": 5}), pension(start={"after": "first"}))
    paid = sum(V**t * P1 ** (5 if t < 9 else t) for t in YEARS if t >= 5)
    expected = paid + sum(0.5 * V**t * P2**t * (1 - P1**t) for t in YEARS if t >= 9)
    close(reserve(contract, OFFICE), expected)


def test_a_reversion_on_either_death() -> None:
    # 1 while both live, two thirds to whoever is left.
    contract = design(
        annuity("both", to=20), *(annuity(f"{life} only", to=20, share=2 / 3) for life in ("first", "second"))
    )
    expected = sum(V**t * (P1**t * P2**t + 2 / 3 * (P1**t * (1 - P2**t) + P2**t * (1 - P1**t))) for t in YEARS)
    close(reserve(contract, OFFICE), expected)


def test_cover_on_the_first_death_within_a_term() -> None:
    both = P1 * P2
    expected = sum(V ** (t + 1) * both**t * (1 - both) for t in range(10))
    close(reserve(design(benefit("first death", to=10)), OFFICE), expected)


def test_double_the_sum_on_death_by_accident_is_a_share_of_all_deaths() -> None:
    # With 4 % of deaths by accident the cover by accident is 4 % of the cover.
    cover = benefit("death", name="cover", to=10)
    accident = {"name": "by accident", "of": "cover", "share": 0.04}
    single = design(cover, accident, states="one life")
    expected = 1.04 * sum(V ** (t + 1) * P1**t * (1 - P1) for t in range(10))
    close(reserve(single, OFFICE), expected)


@pytest.mark.parametrize(
    ("first", "words"),
    [
        (annuity("first"), "begins after 'first', which has no guarantee"),
        (annuity("either", guarantee=5), "begins after 'first', which has no guarantee"),
    ],
)
def test_it_needs_a_guarantee_to_wait_for(first: dict[str, Any], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        Design.model_validate(design(first, pension(start={"after": "first"})))


def test_an_end_is_not_after_a_guarantee() -> None:
    with pytest.raises(ValidationError, match="only 'from' may be 'after'"):
        Design.model_validate(design(annuity("first", guarantee=5), annuity("second", to={"after": "first"})))
