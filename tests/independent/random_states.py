"""Designs on named states and the moves of their bases at random."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path
from typing import Any

from hypothesis import strategies as st
from random_draws import chance, one_of

Draw = Any

STATES = [
    ["healthy", "disabled"],
    ["paying", "waived", "ill"],
    ["healthy"],
    ["healthy", "disabled", "very ill", "recovered"],
]


def write_moves(folder: Path) -> None:
    """Write the tables that the rules of moves name."""
    rows = [f"{age},{min(0.2, 0.002 + 0.00001 * 1.1**age)!r}" for age in range(15, 90)]
    (folder / "falling_ill.csv").write_text("age,rate\n" + "\n".join(rows) + "\n")
    rows = [f"{age},{0.03 + 0.001 * (age - 15)!r}" for age in range(15, 90)]
    (folder / "recovering.csv").write_text("age,rate\n" + "\n".join(rows) + "\n")
    rows = [f"{age},{min(0.4, 0.0005 + 0.00004 * 1.1**age) if age < 110 else 1.0!r}" for age in range(15, 111)]
    (folder / "dying.csv").write_text("age,rate\n" + "\n".join(rows) + "\n")


def on_named_states(draw: Draw, stream: dict[str, Any], states: list[str]) -> None:
    """Hang a stream of one life on named states."""
    stream.pop("payments", None)
    stream.pop("guarantee", None)
    if stream.get("while") == "alive":
        several = [state for state in states if chance(draw, 2)] or [states[0]]
        stream["while"] = one_of(draw, states[0], states[-1], several, "alive")
    if stream.get("on") == "death" and not chance(draw, 3):
        pairs = pairs_of(states)
        begin, end = one_of(draw, *pairs)
        several = [begin, *(one for one, other in pairs if other == end and one != begin and chance(draw, 2))]
        stream["on"] = {"from": several if len(several) > 1 else begin, "to": end}


def pairs_of(states: list[str]) -> list[tuple[str, str]]:
    """The moves for which the bases have rates: one state on or back, and to the dead from all."""
    pairs = [(state, "dead") for state in states]
    pairs += list(pairwise(states))
    return pairs + ([(states[1], states[0])] if len(states) > 1 else [])


@st.composite
def move_rules(draw: Draw, pair: tuple[str, str]) -> dict[str, Any]:
    """A rule of a move, small enough for those of a state to stay below 1 together."""
    figures = one_of(draw, "yearly probabilities", "yearly probabilities", "force", "monthly probabilities")
    rule: dict[str, Any] = {"figures": figures}
    if chance(draw, 3):
        rule["rate"] = one_of(draw, 0.03, 0.0, 0.1, 0.003)
    elif pair[1] == "dead" and chance(draw, 2) and figures != "monthly probabilities":
        law: dict[str, Any] = {"law": "Makeham", "A": 0.0005, "B": 3e-5, "c": 1.1, "last_age": 110}
        if chance(draw, 3):
            law["select"] = {"factor": 0.9, "years": 2}
        rule["table"] = law
    else:
        rule["table"] = "dying.csv" if pair[1] == "dead" else one_of(draw, "falling_ill.csv", "recovering.csv")
        rule["close"] = not chance(draw, 3)
    if "table" in rule and chance(draw, 4):
        rule["added_years"] = one_of(draw, 3, -2)
    if chance(draw, 3):
        rule["multiple"] = one_of(draw, 0.5, 1.3, 0.0)
    if chance(draw, 4):
        rule["extra"] = one_of(draw, 0.001, 0.01)
    return rule


@st.composite
def moves(draw: Draw) -> list[dict[str, Any]]:
    """Rates for the moves between all states of the designs; some for one sex first."""
    found = []
    for begin, end in dict.fromkeys(pair for states in STATES for pair in pairs_of(states)):
        rules = [draw(move_rules((begin, end)))]
        if chance(draw, 3):
            rules.insert(0, {**draw(move_rules((begin, end))), "for": {"sex": "F"}})
        found.append({"from": begin, "to": end, "rule": rules})
    return found
