"""Designs on named states: which states and moves a stream means, and where a contract can still get to.

The states of a design are those of the living, in the order of its list; ``dead`` comes after them and is left no
more. A move is a pair of two states.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

from .designs import Design, MoveBetween, Stream
from .states import States

DEAD: Final = "dead"

Pairs = frozenset[tuple[str, str]]


def living(design: Design) -> tuple[str, ...]:
    """Return the named states of a design without ``dead``; none on one life or two."""
    return tuple(design.states) if isinstance(design.states, list) else ()


def is_named(design: Design) -> bool:
    """Say whether a design hangs its streams on named states."""
    return isinstance(design.states, list)


def occupied(design: Design, stream: Stream) -> States:
    """Return the states while which a stream is paid; none for a stream that is certain or paid on a move."""
    if stream.while_ is None or stream.while_ == "certain":
        return frozenset()
    if stream.while_ == "alive":
        return frozenset(living(design))
    return frozenset([stream.while_] if isinstance(stream.while_, str) else stream.while_)


def paid_on(design: Design, stream: Stream) -> Pairs:
    """Return the moves on which a stream is paid; a death is a move to ``dead`` from any living state."""
    if stream.on == "death":
        return frozenset((state, DEAD) for state in living(design))
    if not isinstance(stream.on, MoveBetween):
        return frozenset()
    begins = [stream.on.from_] if isinstance(stream.on.from_, str) else stream.on.from_
    return frozenset((begin, stream.on.to) for begin in begins)


def lapsing(design: Design) -> States:
    """Return the states from which a contract may lapse."""
    return frozenset(living(design) if design.lapses_from is None else design.lapses_from)


def depends_on(design: Design, stream: Stream) -> States:
    """Return the living states that a stream needs: while which it is paid, or which are left when it is."""
    if stream.on == "lapse":
        return lapsing(design)
    return occupied(design, stream) | {begin for begin, _ in paid_on(design, stream)}


def running_in(design: Design) -> States:
    """Return the states in which a contract runs: some stream of its own may be paid in them or on leaving them."""
    own = (stream for stream in design.stream if stream.of is None and stream.on != "lapse")
    return frozenset().union(*(depends_on(design, stream) for stream in own))


def reachable(state: str, moves: Iterable[tuple[str, str]]) -> States:
    """Return the living states that a contract in a state is in or may still get to."""
    pairs = list(moves)
    found, seen = {state}, 0
    while len(found) > seen:
        seen = len(found)
        found |= {end for begin, end in pairs if begin in found}
    return frozenset(found - {DEAD})
