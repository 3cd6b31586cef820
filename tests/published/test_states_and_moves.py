"""Published Markov models with named states, as contracts through documents and API.

Payments due on the valuation date are still to come, as in textbooks. Yearly and monthly chains are stated as they
are printed; where the source computes Euler steps of Kolmogorov's equations, the steps are the printed chain of short
steps, said as a yearly one. Streams paid continuously are valued monthly, with claims in the middle of the step.
"""

from __future__ import annotations

import math
from datetime import date
from pathlib import Path
from typing import Any

import pyarrow as pa
import pytest
from chain_inputs import INPUTS
from citations import cited
from contracts import BY_ID, nearest_is_key, printed

import projection

SCALE = 1e6
Stream = dict[str, Any]
HS = ["healthy", "sick"]


def move(begin: Any, end: str, rate: Any, figures: str = "yearly probabilities") -> dict[str, Any]:
    """Rates of a move: the same at every age, or what a rule holds."""
    rule = {"rate": rate} if isinstance(rate, int | float) else rate
    return {"from": begin, "to": end, "rule": [{**rule, "figures": figures}]}


def chain(matrix: list[list[float]], states: list[str], figures: str = "yearly probabilities") -> list[dict[str, Any]]:
    """The moves of a printed matrix whose last state is dead."""
    names = [*states, "dead"]
    return [
        move(begin, end, matrix[i][j], figures)
        for i, begin in enumerate(states)
        for j, end in enumerate(names)
        if i != j
    ]


def by_year(folder: Path, begin: str, end: str, rates: list[float], age: int = 40) -> dict[str, Any]:
    """A move with rates by year from an age at commencement."""
    path = folder / f"{begin}_{end}.csv"
    path.write_text("age,rate\n" + "".join(f"{age + n},{rate!r}\n" for n, rate in enumerate(rates)))
    return move(begin, end, {"table": str(path)})


def once(years: float, states: Any, amount: float = 1.0) -> Stream:
    """An amount at the end of so many years in some states."""
    return {"direction": "out", "amount": amount, "while": states, "from": years, "paid": "once"}


def paid_on(begin: Any, end: str, amount: float = 1.0, to: float | None = None) -> Stream:
    """An amount on a move."""
    stream: Stream = {"direction": "out", "amount": amount, "on": {"from": begin, "to": end}}
    return stream if to is None else {**stream, "to": to}


def income(states: Any, amount: float = 1.0, to: float | None = None, **more: Any) -> Stream:
    """An amount a year while states last."""
    stream: Stream = {"direction": "out", "amount": amount, "while": states, **more}
    return stream if to is None else {**stream, "to": to}


def value(
    streams: list[Stream],
    moves: list[dict[str, Any]],
    states: list[str],
    interest: float = 0.0,
    *,
    state: str | None = None,
    step: Any = "year",
    passed: int = 0,
    age: int = 40,
    claims: str = "end of step",
) -> float:
    """Reserve of one policy in a state, by default the first, some years after commencement."""
    commenced = date(2000, 1, 1)
    basis = {
        "mortality": {"age": "last birthday", "rule": [{"table": {"law": "Gompertz", "B": 1e-5, "c": 1.1}}]},
        "interest": {"rule": [{"flat": interest}]},
        "claims": {"paid": claims},
        "move": moves,
    }
    named = [{"name": f"stream {n}", **one, "amount": one["amount"] * SCALE} for n, one in enumerate(streams)]
    policy = {
        "policy_id": "Q1", "product": "CASE", "status": "in force", "birth_date": date(2000 - age, 1, 1),
        "commencement_date": commenced, "state": state or states[0],
    }  # fmt: skip
    design = {"code": "CASE", "states": states, "stream": named}
    found = projection.value(
        pa.Table.from_pylist([policy]), design, basis, date(2000 + passed, 1, 1), step=step, due="outstanding",
        decimals=4,
    )  # fmt: skip
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return float(found.policies["reserve"].to_pylist()[0]) / SCALE


def given(case: str) -> dict[str, Any]:
    """The inputs of a case."""
    return INPUTS[case]


@cited("D01")
def test_death_benefit_from_disabled(case: str) -> None:
    inputs, states = given(case), ["healthy", "disabled", "withdrawn"]
    matrix = inputs["P"]
    # The printed order is healthy, disabled, withdrawn, dead.
    found = value(
        [{"direction": "out", "amount": inputs["S"], "on": "death", "to": 3}],
        chain(matrix[:3], states), states, inputs["i"], state="disabled", passed=1,
    )  # fmt: skip
    assert nearest_is_key(case, found, "EPV")


@cited("D03")
def test_death_without_disability(case: str) -> None:
    inputs = given(case)
    moves = [move("healthy", "sick", inputs["mu01"], "force"), move("healthy", "dead", inputs["mu02"], "force"),
             move("sick", "dead", inputs["mu12"], "force")]  # fmt: skip
    for step in ("year", "month"):
        assert value([paid_on("healthy", "dead", to=5)], moves, HS, step=step) == pytest.approx(
            printed(case)["p"], abs=0.0005
        )


@cited("D04")
def test_one_sickness_then_death(case: str) -> None:
    """The path is a chain of its own: whoever recovers leaves it, and so does the healthy who die."""
    inputs = given(case)
    moves = [move("healthy", "sick", inputs["mu01"], "force"), move("healthy", "dead", inputs["mu02"], "force"),
             move("sick", "recovered", inputs["mu10"], "force"),
             move("sick", "dead", inputs["mu12"], "force")]  # fmt: skip
    states = [*HS, "recovered"]
    found = value([paid_on("sick", "dead", to=10)], moves, states)
    assert nearest_is_key(case, found, "p")
    # Closed form: mu01 mu12 times the integral of exp(-a s) (1 - exp(-b (10 - s))) / b.
    a, b, n = inputs["mu01"] + inputs["mu02"], inputs["mu10"] + inputs["mu12"], 10
    both = -math.expm1(-a * n) / a - math.exp(-b * n) * -math.expm1(-(a - b) * n) / (a - b)
    assert found == pytest.approx(inputs["mu01"] * inputs["mu12"] / b * both, abs=1e-9)


@cited("D06")
def test_euler_steps_of_a_tenth(case: str) -> None:
    inputs = given(case)
    h = inputs["h"]
    moves = [
        move(begin, end, h * inputs[name])
        for begin, end, name in (
            ("healthy", "sick", "mu01"),
            ("healthy", "dead", "mu02"),
            ("sick", "healthy", "mu10"),
            ("sick", "dead", "mu12"),
        )
    ]
    found = 1e4 * value([{"direction": "out", "amount": 1.0, "on": "death", "to": 2}], moves, HS)
    assert nearest_is_key(case, found, "p02x1e4")
    assert found == pytest.approx(20.04, abs=0.005)  # "exact Euler value" of the case's note


@cited("D07")
def test_euler_steps_of_a_fifth(case: str) -> None:
    inputs = given(case)
    moves = [
        move("first", "second", inputs["h"] * inputs["mu01"]),
        move("second", "third", inputs["h"] * inputs["mu12"]),
    ]
    found = value([once(2, "second")], moves, ["first", "second", "third"])
    assert found == pytest.approx(printed(case)["p01"], abs=0.005)


@cited("D08")
def test_term_insurance_with_permanent_disability(case: str) -> None:
    inputs = given(case)
    moves = [move("healthy", "sick", inputs["mu01"], "force"), move("healthy", "dead", inputs["mu02"], "force"),
             move("sick", "dead", inputs["mu12"], "force")]  # fmt: skip
    benefit = {"direction": "out", "amount": inputs["S"], "on": "death", "to": inputs["n"]}
    found = value([benefit], moves, HS, math.expm1(inputs["delta"]), step="month", claims="middle of step")
    assert nearest_is_key(case, found, "NSP")
    # Closed form: integral of v(t) (p00 mu02 + p01 mu12), with forces a = mu01 + mu02 and b = mu12.
    a, b, d, n = inputs["mu01"] + inputs["mu02"], inputs["mu12"], inputs["delta"], inputs["n"]
    alive, ill = -math.expm1(-(a + d) * n) / (a + d), -math.expm1(-(b + d) * n) / (b + d)
    exact = inputs["S"] * (inputs["mu02"] * alive + inputs["mu12"] * inputs["mu01"] / (b - a) * (alive - ill))
    assert found == pytest.approx(exact, rel=1e-5)


@cited("D10", "D11")
def test_disability_income(case: str) -> None:
    """Both paid monthly, half in advance and half in arrears: the trapezoidal rule for what is paid continuously."""
    inputs = given(case)
    interest = inputs.get("i", math.expm1(inputs.get("delta", 0.0)))
    moves = [move("healthy", "sick", inputs["mu01"], "force"), move("healthy", "dead", inputs["mu02"], "force"),
             move("sick", "dead", inputs["mu12"], "force")]  # fmt: skip

    def continuous(state: str) -> float:
        return value([income(state, 0.5, 110, a_year=12, paid=paid) for paid in ("advance", "arrears")], moves, HS,
                     interest, step="month")  # fmt: skip

    rate = inputs["rate"] * continuous("sick") / continuous("healthy")
    assert nearest_is_key(case, rate, "P")
    exact = inputs["rate"] * inputs["mu01"] / (inputs["mu12"] + math.log1p(interest))  # closed form of the case
    assert rate == pytest.approx(exact, rel=2e-3)


@cited("D13")
def test_reserve_of_the_sick(case: str, tmp_path: Path) -> None:
    inputs = given(case)
    zero, one = inputs["P0"], inputs["P1"]
    moves = [by_year(tmp_path, begin, end, [zero[i][j], one[i][j], one[i][j]])
             for i, begin in enumerate(HS) for j, end in enumerate([*HS, "dead"]) if i != j]  # fmt: skip
    benefit = income("sick", inputs["sick_begin"], inputs["n"])
    premium = income("healthy", 1.0, inputs["n"])
    level = value([benefit], moves, HS, inputs["i"]) / value([premium], moves, HS, inputs["i"])
    assert level == pytest.approx(961.9468, abs=0.0005)  # the case's note
    streams = [benefit, {**premium, "direction": "in", "amount": level}]
    found = value(streams, moves, HS, inputs["i"], state="sick", passed=1)
    assert nearest_is_key(case, found, "1V_sick")


@cited("D15", "D17")
def test_thiele_by_steps_backward(case: str) -> None:
    """A backward Euler step with the slope at its end is a step of a chain.

    V(t) = V(t + h) (1 - delta h - h mu) + h mu' (V' + benefit) + h rate: with v = 1 - delta h, the probabilities are
    h mu / v, and what is paid continuously is paid at the step's start. Two steps of h are said as two years.
    """
    inputs = given(case)
    h = inputs["h"]
    v = 1 - inputs["delta"] * h
    moves = [move(begin, end, h * inputs[name] / v) for begin, end, name in
             (("healthy", "sick", "mu01"), ("healthy", "dead", "mu02"), ("sick", "healthy", "mu10"),
              ("sick", "dead", "mu12"))]  # fmt: skip
    streams = [
        {**income("healthy", h * inputs["P"], 2), "direction": "in"}, income("sick", h * inputs["dis_rate"], 2),
        {"direction": "out", "amount": inputs["death"], "on": "death", "to": 2},
    ]  # fmt: skip
    figures = printed(case)
    found = {name: value(streams, moves, HS, 1 / v - 1, state=state) for name, state in (("V0", HS[0]), ("V1", HS[1]))}
    options: Any = BY_ID[case]["multiple_choice_options"]
    for name, figure in figures.items():
        choice = options[name] if isinstance(options, dict) else options
        assert min(choice, key=lambda option: abs(option - found[name])) == figure


@cited("D20")
def test_sick_throughout(case: str) -> None:
    """A force in proportion to age is not among the laws; the integral over ten years is what the probability asks."""
    rate = 0.01 * (25 + 35) / 2
    found = value([once(10, "sick")], [move("sick", "dead", rate, "force")], ["sick"])
    assert found == pytest.approx(printed(case)["p"], abs=0.0025)
    assert nearest_is_key(case, found, "p")


@cited("D21")
def test_back_in_the_first_state(case: str) -> None:
    inputs, states = given(case), ["one", "two", "three"]
    found = value([once(inputs["n"], "one")], chain(inputs["P"][:3], states), states)
    assert nearest_is_key(case, found, "p")


@cited("D22")
def test_not_in_the_last_state(case: str) -> None:
    inputs = given(case)
    moves = [move("one", "two", inputs["mu01"], "force"), move("two", "three", inputs["mu12"], "force")]
    found = value([once(inputs["t"], ["one", "two"])], moves, ["one", "two", "three"])
    assert found == pytest.approx(printed(case)["p"], abs=0.005)


@cited("D23")
def test_monthly_chain(case: str) -> None:
    inputs = given(case)
    moves = chain(inputs["P"][:2], HS, "monthly probabilities")
    death = {"direction": "out", "amount": 1.0, "on": "death", "to": inputs["n"] / 12}
    assert value([death], moves, HS, step="month") == pytest.approx(printed(case)["p"], abs=0.005)


@cited("D24")
def test_survivors_of_a_thousand(case: str) -> None:
    inputs = given(case)
    found = value([once(inputs["n"], "alive", inputs["lives"])], chain(inputs["P"][:2], HS), HS)
    assert found == pytest.approx(printed(case)["n"], abs=0.0005)


@cited("D26")
def test_one_euler_step(case: str) -> None:
    inputs = given(case)
    force = 7.6e-5 * math.exp(0.0875 * inputs["x"])
    found = value([{"direction": "out", "amount": 1.0, "on": "death", "to": 1}],
                  [move("healthy", "dead", inputs["h"] * force)], ["healthy"])  # fmt: skip
    assert nearest_is_key(case, found, "p02")


@cited("D28")
def test_tenured_at_forty(case: str, tmp_path: Path) -> None:
    inputs = given(case)
    until, later = inputs["until"], 20
    for name, early, late in (("tenured", inputs["mu01"], 0.0), ("left", *inputs["mu02"])):
        rates = [early] * until + [late] * later
        (tmp_path / f"{name}.csv").write_text("age,rate\n" + "".join(f"{30 + n},{r}\n" for n, r in enumerate(rates)))
    states = ["teaching", "tenured", "left"]
    dying = {"table": {"law": "Gompertz", "B": inputs["B"], "c": inputs["c"]}}
    moves = [
        *(move("teaching", name, {"table": str(tmp_path / f"{name}.csv")}, "force") for name in states[1:]),
        move("tenured", "left", inputs["mu12"], "force"), move(states, "dead", dying, "force"),
    ]  # fmt: skip
    found = value([once(inputs["t"], "tenured")], moves, states, age=30, step="month")
    assert nearest_is_key(case, found, "p")


@cited("D30")
def test_disabled_after_three_years(case: str, tmp_path: Path) -> None:
    inputs = given(case)
    p00, p01, p11 = inputs["p00"], inputs["p01"], inputs["p11"]
    moves = [by_year(tmp_path, "healthy", "sick", p01), by_year(tmp_path, "sick", "dead", [1 - p for p in p11]),
             by_year(tmp_path, "healthy", "dead", [1 - p - q for p, q in zip(p00, p01, strict=True)])]  # fmt: skip
    found = value([once(3, "sick", inputs["S"])], moves, HS, inputs["i"])
    assert nearest_is_key(case, found, "EPV")


@cited("C03")
def test_monthly_profit_of_a_critical_illness_contract(case: str) -> None:
    """The chain's part: what the reserves and benefits at the month's end are expected to cost.

    Profit: (premium less expenses and the reserve before, with interest) less that. Reserves held at the end are
    amounts paid to whoever is in a state then; the month is said as a yearly step.
    """
    inputs = given(case)
    stay, ill, dead = inputs["p"]
    moves = [move("healthy", "ill", ill), move("healthy", "dead", dead), move("ill", "dead", 0)]
    streams = [
        once(1, "healthy", inputs["V_end"]["0"]), once(1, "ill", inputs["V_end"]["1"]),
        paid_on("healthy", "ill", inputs["pay"]["diagnosis"], 1), paid_on("healthy", "dead", inputs["pay"]["death"], 1),
    ]  # fmt: skip
    assert stay == pytest.approx(1 - ill - dead, abs=1e-12)
    outgo = value(streams, moves, ["healthy", "ill"])
    growth = (1 + inputs["i"]) ** (1 / 12)
    profit = (inputs["V0"] + inputs["P"] - inputs["exp"]) * growth - outgo
    assert nearest_is_key(case, profit, "profit")


@cited("C08")
def test_expected_profit_of_the_ninth_year(case: str) -> None:
    """The chain's part, as in C03."""
    inputs = given(case)
    p00, p01 = inputs["p00"], inputs["p01"]
    moves = [move("healthy", "disabled", p01), move("healthy", "dead", 1 - p00 - p01)]
    streams = [
        once(1, "healthy", inputs["V9"]["H"]), once(1, "disabled", inputs["V9"]["D"] + inputs["dis_end"]),
        paid_on("healthy", "dead", inputs["death"], 1),
    ]  # fmt: skip
    outgo = value(streams, moves, ["healthy", "disabled"])
    profit = (inputs["V8"]["H"] + inputs["G"] * (1 - inputs["pct"])) * (1 + inputs["i"]) - outgo
    assert nearest_is_key(case, profit, "profit")
