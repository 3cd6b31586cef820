"""Contracts on two lives against closed forms and against the two single lives that they consist of.

The lives are subject to constant forces (Gompertz-Makeham with B = 0 gives them), so that every joint
status is a life with a constant force itself: mu1, mu2, mu1 + mu2 (independent) or mu1 + mu2 - c (common shock).
"""

from __future__ import annotations

import math
from datetime import date
from typing import Any

import pyarrow as pa
import pytest

import projection
from assumptions.basis import prepare_basis
from portfolios.designs import Design
from projection.settings import Settings
from projection.working import working

COMMENCED = date(2020, 1, 1)
INTEREST = 0.03
WORDS = ("both", "either", "first", "second", "first only", "second only")


def design(*streams: dict[str, Any], states: str = "two lives") -> dict[str, Any]:
    """A contract with these streams."""
    return {"code": "PAIR", "title": "invented", "states": states, "stream": list(streams)}


def annuity(word: str, **more: Any) -> dict[str, Any]:
    """1,000,000 a year in advance while a set of states lasts."""
    return {
        "name": word, "direction": "out", "amount": 1e6, "while": word, "from": 0, "a_year": 1, "paid": "advance",
        **more,
    }  # fmt: skip


def benefit(word: str, **more: Any) -> dict[str, Any]:
    """1,000,000 on a death."""
    return {"name": word, "direction": "out", "amount": 1e6, "on": word, "from": 0, **more}


def basis(first: float, second: float, shock: float = 0.0) -> dict[str, Any]:
    """Constant forces of both lives."""
    rules = [
        {"for": {"life": life}, "table": {"law": "Makeham", "A": force, "B": 1e-300, "c": 1.05, "last_age": 119}}
        for life, force in (("second", second), ("first", first))
    ]
    return {
        "mortality": {"age": "last birthday", "common_shock": shock, "rule": rules},
        "interest": {"rule": [{"flat": INTEREST}]},
    }


def reserve(contract: dict[str, Any], assumed: dict[str, Any], on: date = COMMENCED, **policy: Any) -> float:
    """The reserve of one policy, payments due on the date still to come; yearly steps."""
    row = {
        "policy_id": "Q1", "product": "PAIR", "status": "in force", "lives": "both",
        "birth_date": date(1960, 1, 1), "commencement_date": COMMENCED, "second_birth_date": date(1965, 1, 1),
        "sex": "F", "second_sex": "M", **policy,
    }  # fmt: skip
    table = pa.table({name: pa.array([value], _kind(name)) for name, value in row.items()})
    found = projection.value(table, [contract], assumed, on, step="year", due="outstanding")
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return float(found.policies["reserve"].to_pylist()[0])


def _kind(name: str) -> pa.DataType:
    return pa.date32() if name.endswith("date") else pa.string()


def certain(force: float, years: int) -> float:
    """A temporary annuity in advance on a constant force, in closed form."""
    step = math.exp(-force) / (1 + INTEREST)
    return (1 - step**years) / (1 - step)


@pytest.mark.parametrize("shock", [0.0, 0.004])
def test_temporary_annuities_on_every_status(shock: float) -> None:
    first, second, years = 0.02, 0.035, 20
    together = first + second - shock
    one, two, both = (certain(force, years) for force in (first, second, together))
    expected = {
        "both": both, "first": one, "second": two, "either": one + two - both,
        "first only": one - both, "second only": two - both,
    }  # fmt: skip
    for word, value in expected.items():
        found = reserve(design(annuity(word, to=years)), basis(first, second, shock))
        assert found == pytest.approx(1e6 * value, abs=0.006), word


def test_death_benefits_and_annuities_of_the_same_status() -> None:
    # A + d a = v^n (status lasts n years) is taken apart: A of a term of n years, and an endowment paid once.
    assumed, d = basis(0.02, 0.035, 0.004), INTEREST / (1 + INTEREST)
    for on, word in (
        ("first death", "both"), ("second death", "either"), ("death of first", "first"), ("death of second", "second")
    ):  # fmt: skip
        paid = reserve(design(benefit(on, to=15)), assumed)
        living = reserve(design(annuity(word, to=15)), assumed)
        once = {"name": "once", "direction": "out", "amount": 1e6, "while": word, "from": 15, "paid": "once"}
        end = reserve(design(once), assumed)
        assert paid + d * living + end == pytest.approx(1e6, abs=0.02), on


@pytest.mark.parametrize(("lives", "force"), [("first", 0.02), ("second", 0.035)])
def test_after_one_death_the_other_life_is_alone(lives: str, force: float) -> None:
    assumed, on = basis(0.02, 0.035, 0.004), date(2024, 1, 1)
    alone = 1e6 * certain(force, 16)
    other = {"first": "second", "second": "first"}[lives]
    values = {word: reserve(_beside(word), assumed, on, lives=lives) - _premium() for word in WORDS}
    assert values["either"] == values[lives] == values[f"{lives} only"] == pytest.approx(alone, abs=0.02)
    assert values["both"] == values[other] == values[f"{other} only"] == pytest.approx(0, abs=0.02)


def _beside(word: str) -> dict[str, Any]:
    """The annuity beside a certain payment, which keeps the contract going whoever lives."""
    sure = {
        "name": "sure", "direction": "out", "amount": 100.0, "while": "certain", "from": 0, "to": 20, "a_year": 1
    }  # fmt: skip
    return design(annuity(word, to=20), sure)


def _premium() -> float:
    return 100.0 * certain(0.0, 16)


def test_a_guarantee_goes_on_after_death() -> None:
    assumed, on = basis(0.02, 0.035), date(2024, 1, 1)
    left = 1e6 * certain(0.0, 6)
    for word in ("both", "either", "first", "second"):
        contract = design(annuity(word, guarantee=10))
        assert reserve(contract, assumed, on, lives="none") == pytest.approx(left, abs=0.01), word
    one = design(annuity("alive", guarantee=10), states="one life")
    assert reserve(one, assumed, on, lives="none") == pytest.approx(left, abs=0.01)


def test_two_equal_ways_to_say_last_survivor() -> None:
    assumed, on = basis(0.02, 0.035, 0.001), date(2023, 5, 17)
    either = reserve(design(annuity("either", to=30)), assumed, on)
    pieces = design(*(annuity(word, to=30) for word in ("both", "first only", "second only")))
    assert reserve(pieces, assumed, on) == pytest.approx(either, abs=0.01)
    reversed_ = design(annuity("first", to=30), annuity("second only", to=30))
    assert reserve(reversed_, assumed, on) == pytest.approx(either, abs=0.01)


@pytest.mark.parametrize(
    "interest",
    [
        {"svensson": {"beta0": 0.03, "tau1": 2.0}},
        {"smith_wilson": {"spot": {"1": 0.01, "20": 0.03}, "ultimate": 0.04, "alpha": 0.1}},
    ],
)  # fmt: skip
def test_the_working_shows_both_lives_and_ends_in_the_reserve(interest: dict[str, Any]) -> None:
    contract, assumed = design(annuity("first"), annuity("second only")), basis(0.02, 0.035, 0.001)
    assumed["interest"] = {"rule": [interest]}
    row = {
        "policy_id": "Q1", "product": "PAIR", "status": "in force", "lives": "both", "sex": "F", "second_sex": "M",
        "birth_date": date(1960, 1, 1), "commencement_date": COMMENCED, "second_birth_date": date(1965, 1, 1),
    }  # fmt: skip
    settings = Settings(date(2024, 5, 17), "year", "outstanding", 2)
    text = working(row, Design.model_validate(contract), prepare_basis(assumed), settings)
    assert "Second life" in text
    assert "1965-01-01" in text
    assert "exp(0.001 x t)" in text
    found = reserve(contract, assumed, date(2024, 5, 17))
    assert text.rstrip().splitlines()[-1].split()[-1] == f"{found:,.2f}"
