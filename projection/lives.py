"""The lives of a contract: columns of the second one, and the probability of a set of states as a sum.

On two lives, the probability to be in a set of states is a sum of up to three terms: survival of the first
life, of the second, and of both. Each term is a curve like that of one life, so that a stream on two lives is
up to three streams on one. With l1 and l2 from the valuation date and both living then, for instance, the
probability that either lives is l1 + l2 - l1 l2.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable

from assumptions.basis import Basis
from portfolios.designs import Design, Stream
from portfolios.states import ALIVE, BOTH, EARLIER, FIRST_ONLY, LEFT_ON, LIVES, SECOND_ONLY, WHILE, States

from .streams import FIRST, JOINT, SECOND

Terms = tuple[tuple[int, float], ...]
"""Which curve, and the factor to it."""

ALONE: Terms = ((FIRST, 1.0),)

_OF_STATE: dict[str, Terms] = {
    BOTH: ((JOINT, 1.0),),
    FIRST_ONLY: ((FIRST, 1.0), (JOINT, -1.0)),
    SECOND_ONLY: ((SECOND, 1.0), (JOINT, -1.0)),
}

LIFE = "life"
"""What a mortality rule may ask beside the extract's columns: whether it is for the first or the second life."""


def on_two(designs: Iterable[Design]) -> bool:
    """Say whether some design is for two lives."""
    return any(design.states == "two lives" for design in designs)


def second(column: str) -> str:
    """Return the column that holds of the second life what ``column`` holds of the first."""
    return f"second_{column}"


def rule_columns(basis: Basis, designs: Iterable[Design], held: Collection[str]) -> list[str]:
    """Return the extract columns that rules look at, with those of the second life that the extract holds."""
    designs = list(designs)
    named = [column for column in basis.document.rule_columns() if column != LIFE]
    if on_two(designs):
        seconds = [second(column) for rule in basis.document.mortality.rule for column in rule.for_]
        named += [column for column in seconds if column in held]
    # On one life too, the column says that nobody is left.
    asked = [column for design in designs for _, column, _ in design.filters()]
    return list(dict.fromkeys([*named, *asked, *(["lives"] if "lives" in held or on_two(designs) else [])]))


def now(design: Design, lives: str | None) -> str:
    """Return what counts of the column 'lives' for a design: on one life, whether it is 'none'."""
    if design.states == "two lives":
        return str(lives)
    return "none" if lives == "none" else ""


def states_of(stream: Stream) -> States:
    """Return the states in which a stream is paid, or which are left when it is."""
    return WHILE.get(stream.while_ or "", frozenset()) | LEFT_ON.get(stream.on or "", frozenset())


def running(design: Design) -> States:
    """Return the states in which a contract runs: those in which some stream may still be paid."""
    return frozenset().union(*(states_of(stream) for stream in design.stream))


def probability(states: States, lives: str) -> Terms:
    """Return the probability of a set of states as terms, seen from the state at the valuation date.

    lives: a value of the column 'lives', or nothing for one life that lives. After a death the life that is left
    counts as the first.
    """
    state = LIVES.get(lives, ALIVE)
    if state != BOTH:
        return ALONE if state in states else ()
    factors: dict[int, float] = {}
    for one in sorted(states):
        for life, factor in _OF_STATE[one]:
            factors[life] = factors.get(life, 0.0) + factor
    return tuple((life, factor) for life, factor in sorted(factors.items()) if factor)


def begun(states: States, lives: str) -> bool:
    """Say whether a stream that cannot begin any more may have begun, so that its guarantee is still paid."""
    return bool(states & EARLIER[LIVES.get(lives, ALIVE)])
