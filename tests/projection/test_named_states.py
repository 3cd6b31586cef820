"""Contracts on named states: identities, scipy's solutions of Kolmogorov's equations, refusals, the working."""

from __future__ import annotations

from datetime import date
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from scipy.integrate import solve_ivp
from scipy.linalg import expm

import projection
from assumptions.basis import BasisDocument, prepare_basis
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.extract import open_extract
from projection.chains import Chains
from projection.documents import DocumentError, check_document
from projection.plain import plain_value
from projection.pool import Pool
from projection.settings import Settings
from projection.working import working
from reports.working_book import working_bytes
from reports.working_facts import work_out

SCALE = 1e7
DYING = {"law": "Makeham", "A": 0.0004, "B": 0.00003, "c": 1.1}
HD = ["healthy", "disabled"]

Document = dict[str, Any]


def move(begin: Any, end: str, figures: str = "yearly probabilities", **rule: Any) -> Document:
    return {"from": begin, "to": end, "rule": [{"figures": figures, **rule}]}


def stream(name: str, direction: str = "out", amount: Any = SCALE, **more: Any) -> Document:
    return {"name": name, "direction": direction, "amount": amount, **more}


def premium(states: Any = "healthy", years: int = 20) -> Document:
    return stream("premium", "in", SCALE / 50, a_year=12, to=years, **{"while": states})


def income_protection() -> Document:
    """An income while disabled, the premium waived then; invented."""
    income = stream("income", amount=SCALE / 2, a_year=12, paid="arrears", to=20, **{"while": "disabled"})
    return {"code": "LANTERN", "states": HD, "lapses_from": ["healthy"], "stream": [premium(), income]}


def critical_illness(accelerating: bool) -> Document:
    """An amount on critical illness; accelerating: on death of the healthy as well; else death is covered apart."""
    ill = stream("illness", on={"from": "healthy", "to": "ill"}, to=20)
    death = stream("death", on={"from": "healthy", "to": "dead"}, to=20)
    return {
        "code": "BEACON",
        "states": ["healthy", "ill"],
        "stream": [premium(), ill, *([death] if accelerating else [])],
    }


MOVES = [
    move("healthy", "disabled", "force", rate=0.02),
    move("disabled", "healthy", "force", rate=0.15),
    move("healthy", "dead", "force", table=DYING),
    move("disabled", "dead", "force", table=DYING, multiple=3.0),
]
LAPSE = {"rule": [{"rates": [0.08, 0.05]}]}


def basis_of(moves: list[Document], lapse: Document | None = None, **mortality: Any) -> Document:
    document: Document = {
        "mortality": {"age": "exact", "rule": [{"table": DYING, "close": True}], **mortality},
        "interest": {"rule": [{"flat": 0.03}]},
        "expense": [{"name": "upkeep", "per": "policy", "rule": [{"first_year": 60.0, "later_years": 48.0}]}],
        "move": moves,
    }
    return document if lapse is None else {**document, "lapse": lapse}


def policy(state: str = "healthy", commenced: date = date(2021, 3, 31), **more: Any) -> Document:
    columns = {"policy_id": "Q1", "status": "in force", "birth_date": date(1980, 7, 12), "commencement_date": commenced}
    return {**columns, "state": state, "product": "X", **more}


def value(
    design: Document,
    basis: Any,
    on: date = date(2026, 11, 30),
    step: Any = "month",
    state: str = "healthy",
    **more: Any,
) -> dict[str, float]:
    found = projection.value(
        pa.Table.from_pylist([policy(state, **more)]), {**design, "code": "X"}, basis, on, step=step, decimals=4
    )
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    (row,) = found.policies.to_pylist()
    return {name: row[name] for name in ("reserve", "value_of_benefits", "value_of_expenses", "value_of_premiums")}


def same(one: dict[str, float], two: dict[str, float]) -> None:
    for name in one:
        # Both are rounded to four places.
        assert one[name] == pytest.approx(two[name], rel=1e-12, abs=1.1e-4), name


@pytest.mark.parametrize("step", ["month", "year"])
@pytest.mark.parametrize("age", ["exact", "last birthday"])
@pytest.mark.parametrize("table", ["law", "table"])
def test_one_living_state_is_a_contract_on_one_life(tmp_path: Path, step: str, age: str, table: str) -> None:
    """With yearly rates; under steps of a month also where a birthday lies within the step."""
    if table == "table" and age == "exact" and step == "year":
        pytest.skip("a step in which a birthday lies keeps its force over the whole year")
    rows = "\n".join(f"{x},{min(1.0, 0.0005 * 1.09 ** (x - 20))!r}" for x in range(20, 110)) + "\n110,1\n"
    (tmp_path / "rates.csv").write_text("age,rate\n" + rows)
    source: Any = DYING if table == "law" else str(tmp_path / "rates.csv")
    basis = basis_of([move("living", "dead", table=source)], LAPSE, age=age, rule=[{"table": source, "close": True}])
    streams = [
        premium("alive"), stream("death", on="death", to=20),
        stream("annuity", a_year=4, **{"while": "alive", "from": 20}),
        stream("surrender", amount=SCALE / 9, on="lapse", to=20),
        stream("survival", **{"while": "alive", "from": 20, "paid": "once"}),
    ]  # fmt: skip
    for on in (date(2026, 11, 30), date(2026, 3, 31), date(2026, 6, 1)):
        one_life = value({"stream": streams}, basis, on, step)
        same(value({"states": ["living"], "stream": streams}, basis, on, step, "living"), one_life)


def test_states_with_the_same_deaths_are_one_life_together() -> None:
    moves = [*MOVES[:2], move(HD, "dead", "force", table=DYING)]
    streams = [
        premium("alive"), stream("death", on="death"), stream("annuity", a_year=12, **{"while": "alive", "from": 10})
    ]  # fmt: skip
    alone = [move("living", "dead", "force", table=DYING)]
    lumped = [{**one, **({"while": "alive"} if "while" in one else {})} for one in streams]
    one = value({"states": ["living"], "stream": lumped}, basis_of(alone, LAPSE), state="living")
    for state in HD:
        same(value({"states": HD, "stream": streams}, basis_of(moves, LAPSE), state=state), one)
    # Yearly rates keep the force of a policy year at one level.
    life = value({"stream": lumped}, basis_of(moves, LAPSE))
    assert one["reserve"] == pytest.approx(life["reserve"], rel=1e-3)


def test_parts_add_up() -> None:
    """Death is death from either state, alive is healthy or disabled, and whoever cannot move stays."""
    basis = basis_of(MOVES, LAPSE)

    def benefits(*streams: Document, state: str = "healthy") -> float:
        return value({"states": HD, "stream": list(streams)}, basis, state=state)["value_of_benefits"]

    for state in HD:
        deaths = [stream(f"death of {one}", on={"from": one, "to": "dead"}, to=30) for one in HD]
        assert benefits(stream("death", on="death", to=30), state=state) == pytest.approx(
            benefits(*deaths, state=state), abs=2e-4
        )
        both = [stream(f"while {one}", a_year=12, to=30, **{"while": one}) for one in HD]
        assert benefits(stream("alive", a_year=12, to=30, **{"while": "alive"}), state=state) == pytest.approx(
            benefits(*both, state=state), abs=2e-4
        )
    still = value(
        {"states": ["kept"], "stream": [stream("annuity", to=30, **{"while": "kept"})]}, basis_of([]), state="kept"
    )
    certain = value({"stream": [stream("annuity", to=30, **{"while": "certain"})]}, basis_of([]))
    assert still["value_of_benefits"] == pytest.approx(certain["value_of_benefits"], abs=2e-4)


def test_disabled_for_good_without_deaths_is_an_annuity_certain() -> None:
    moves = [move("healthy", "disabled", "force", rate=0.02), move("healthy", "dead", "force", table=DYING)]
    found = value(income_protection(), basis_of(moves, LAPSE), state="disabled")
    annuity = stream("income", amount=SCALE / 2, a_year=12, paid="arrears", to=20, **{"while": "certain"})
    certain = value({"stream": [annuity]}, basis_of(moves, LAPSE))
    assert found["value_of_benefits"] == pytest.approx(certain["value_of_benefits"], abs=2e-4)
    assert found["value_of_premiums"] == 0.0


def test_an_accelerated_benefit_is_both_benefits_of_the_healthy() -> None:
    moves = [move("healthy", "ill", "force", rate=0.004), move(["healthy", "ill"], "dead", "force", table=DYING)]
    basis = basis_of(moves, LAPSE)
    whole, alone = (value(critical_illness(accelerating), basis) for accelerating in (True, False))
    design = critical_illness(True)
    death = value({**design, "stream": [design["stream"][2]]}, basis)
    assert whole["value_of_benefits"] == pytest.approx(
        alone["value_of_benefits"] + death["value_of_benefits"], abs=2e-4
    )
    assert value(critical_illness(True), basis, state="healthy")["value_of_premiums"] > 0


def test_claims_in_payment_have_a_reserve_without_premiums() -> None:
    basis = basis_of(MOVES, LAPSE)
    claim, active = (value(income_protection(), basis, state=state) for state in ("disabled", "healthy"))
    assert claim["reserve"] > active["reserve"]
    assert 0 < claim["value_of_premiums"] < active["value_of_premiums"]


def chains(moves: list[Document], step: Any = "month") -> Chains:
    basis = prepare_basis(check_document(basis_of(moves), BasisDocument, "basis"))
    design = Design.model_validate({"code": "X", "states": HD, "stream": [premium()]})
    return Chains([design], basis, Settings(date(2026, 1, 1), step, "settled", 2), Pool(), 256)


def ways(moves: list[Document]) -> tuple[tuple[str, str, int, int], ...]:
    return tuple(
        (begin, one["to"], number, 0)
        for number, one in enumerate(moves)
        for begin in ([one["from"]] if isinstance(one["from"], str) else one["from"])
    )


@pytest.mark.parametrize("step", ["month", "year"])
def test_constant_forces_against_the_matrix_exponential(step: str) -> None:
    forces = {(0, 1): 0.3, (1, 0): 0.9, (0, 2): 0.05, (1, 2): 0.4}
    names = [*HD, "dead"]
    moves = [move(names[i], names[j], "force", rate=rate) for (i, j), rate in forces.items()]
    steps, _ = chains(moves, step).steps(tuple(HD), ways(moves), 40.0)
    # One more state for each move counts it: scipy.linalg.expm of the matrix of rates with counters.
    rates = np.zeros((7, 7))
    for number, ((i, j), rate) in enumerate(forces.items()):
        rates[i, j] += rate
        rates[i, i] -= rate
        rates[i, 3 + number] += rate
    length, place = (1.0, 11) if step == "year" else (1 / 12, 0)
    exact = expm(rates * length)
    assert np.abs(steps.stay[place] - exact[:2, :2]).max() < 1e-12
    assert np.abs(steps.moved[place] - exact[:2, 3:]).max() < 1e-12


def test_varying_forces_against_an_integrator() -> None:
    """scipy.integrate.solve_ivp, DOP853 with tolerances of 1e-13, over ten years."""
    law = {"law": "Makeham", "A": 0.0005, "B": 0.000076, "c": float(np.exp(0.0875))}
    moves = [
        move("healthy", "disabled", "force", table=law, multiple=2.0), move("disabled", "healthy", "force", rate=0.2),
        move("healthy", "dead", "force", table=law), move("disabled", "dead", "force", table=law, extra=0.01),
    ]  # fmt: skip
    steps, _ = chains(moves).steps(tuple(HD), ways(moves), 50.3)

    def slope(t: float, y: Any) -> Any:
        mu = law["A"] + law["B"] * law["c"] ** (50.3 + t)
        ill, well, dead, gone = 2 * mu * y[0], 0.2 * y[1], mu * y[0], (mu + 0.01) * y[1]
        return [well - ill - dead, ill - well - gone, ill, well, dead, gone]

    there, counted = np.array([1.0, 0.0]), np.zeros(4)
    for month in range(120):
        counted = counted + there @ steps.moved[month]
        there = there @ steps.stay[month]
    exact = solve_ivp(slope, (0, 10), [1, 0, 0, 0, 0, 0], method="DOP853", rtol=1e-13, atol=1e-15).y[:, -1]
    assert np.abs(there - exact[:2]).max() < 1e-12
    assert np.abs(counted - exact[2:]).max() < 1e-12


def test_yearly_chains_come_out_as_printed() -> None:
    moves = [
        move("healthy", "disabled", rate=0.2),
        move("healthy", "dead", rate=0.1),
        move("disabled", "dead", rate=0.3),
    ]
    steps, closed = chains(moves, "year").steps(tuple(HD), ways(moves), 40.0)
    assert not closed
    for before, after in pairwise(range(11, 60, 12)):
        assert steps.stay[after].tolist() == steps.stay[before].tolist()
    assert steps.stay[11] == pytest.approx(np.array([[0.7, 0.2], [0.0, 0.7]]), abs=2e-16)


def test_unknown_states_are_exceptions() -> None:
    table = pa.Table.from_pylist(
        [policy("retired"), {**policy(), "state": None, "policy_id": "Q2"}, {**policy("dead"), "policy_id": "Q3"}]
    )
    found = projection.value(table, {**income_protection(), "code": "X"}, basis_of(MOVES), "2026-11-30")
    reasons = [(row["field"], row["reason"]) for row in found.exceptions.to_pylist()]
    assert reasons == [("state", "state not known")] * 2 + [("", "matured")]


def test_states_are_known_to_rules_and_groups() -> None:
    rule = [{"for": {"state": "disabled"}, "flat": 0.01}, {"flat": 0.03}]
    basis = {**basis_of(MOVES), "interest": {"rule": rule}}
    table = pa.Table.from_pylist([policy(), {**policy("disabled"), "policy_id": "Q2"}])
    found = projection.value(table, {**income_protection(), "code": "X"}, basis, "2026-11-30", group_by=["state"])
    assert found.totals["state"].to_pylist() == HD[::-1]
    alone = value(income_protection(), basis, state="disabled")["reserve"]
    assert found.policies["reserve"].to_pylist()[1] == pytest.approx(alone, abs=0.006)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"states": ["healthy", "healthy"]}, "cannot be a state"),
        ({"states": ["healthy", "dead"]}, "cannot be a state"),
        ({"states": []}, "at least one"),
        ({"lapses_from": ["ill"]}, "lapses_from: 'ill'"),
        ({"stream": [premium("ill")]}, "while 'ill' is no state of the design"),
        ({"stream": [stream("x", on={"from": "ill", "to": "dead"})]}, "on, from 'ill' is no state"),
        ({"stream": [stream("x", on="first death")]}, "is for two lives"),
        ({"states": "one life", "lapses_from": None}, "while 'healthy' is not known"),
        ({"stream": [stream("x", guarantee=5, **{"while": "healthy"})]}, "not for named states"),
    ],
)  # fmt: skip
def test_designs_that_make_no_sense(change: Document, words: str) -> None:
    document = {**income_protection(), **change}
    with pytest.raises(DocumentError, match=words):
        check_document({key: one for key, one in document.items() if one is not None}, Design, "design")


@pytest.mark.parametrize(
    ("moves", "more", "words"),
    [
        (MOVES[2:], {}, r"no rates; add a \[\[move\]\]"),
        ([*MOVES, MOVES[0]], {}, "two moves from 'healthy' to 'disabled'"),
        ([move("healthy", "disabled", rate=1.2)], {}, "lies above 1"),
        ([move("healthy", "disabled")], {}, "either 'table' or 'rate'"),
        ([move("dead", "healthy", rate=0.1)], {}, "nobody leaves 'dead'"),
        ([move("healthy", "disabled", rate=0.7), move("healthy", "dead", rate=0.4)], {}, "add up to 1.1"),
        (MOVES, {"lapse": {"competing": "dependent rates", **LAPSE}}, "not for designs with named states"),
    ],
)
def test_bases_that_make_no_sense(moves: list[Document], more: Document, words: str) -> None:
    design = {**income_protection(), "code": "X"}
    design["stream"] = [*design["stream"], stream("benefit", on={"from": "healthy", "to": "disabled"}, to=20)]
    with pytest.raises(ValueError, match=words):
        projection.value(pa.Table.from_pylist([policy()]), design, {**basis_of(moves), **more}, "2026-11-30")


def test_the_working_shows_states_and_moves() -> None:
    design = Design.model_validate({**income_protection(), "code": "X"})
    basis = prepare_basis(basis_of(MOVES, LAPSE))
    settings = Settings(date(2026, 11, 30), "month", "settled", 2)
    text = working(policy(), design, basis, settings)
    assert "States and moves" in text
    assert "from healthy to disabled" in text
    assert f"{plain_value(policy(), design, basis, settings).reserve:,.2f}" in text.splitlines()[-1]
    assert working_bytes(work_out(policy("disabled"), design, basis, settings))[:2] == b"PK"


def test_a_chunk_holds_the_state() -> None:
    (chunk,) = open_extract(pa.Table.from_pylist([policy()])).chunks(["policy_id", "state", "product"])
    assert isinstance(chunk, Chunk)
    assert chunk.text("state")[1][0] == "healthy"
