"""The life or the two lives of one policy, seen from the valuation date, in ordinary Python."""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

from portfolios.designs import Design, Stream
from portfolios.states import BOTH, EARLIER, FIRST_ONLY, LEFT_ON, NOBODY, SECOND_ONLY, WHILE, States

from .plain_life import Survival


@dataclass
class Lives:
    """Who lives on the valuation date, u months after commencement.

    first: the first life, or the only one left; second: the second life where both live; state: at the valuation
    date; shock: force of a cause from which both lives die at once.
    """

    first: Survival
    second: Survival | None
    state: str
    shock: float
    u: Fraction

    def __post_init__(self) -> None:
        self.first_now = self.first.at(self.u) if self.state != NOBODY else 1.0
        self.second_now = self.second.at(self.u) if self.second is not None else 1.0

    @property
    def now(self) -> float:
        """Probability at commencement of what is the case on the valuation date."""
        return self.first_now * self.second_now

    def may_be(self, states: States | None) -> bool:
        """Say whether one of the states is still possible; None stands for what does not ask for states."""
        if states is None:
            return True
        return bool(states) if self.state == BOTH else self.state in states

    def may_have_been(self, states: States | None) -> bool:
        """Say whether one of the states may have been there at an earlier time."""
        return states is None or bool(states & EARLIER[self.state])

    def probability(self, point: int, states: States | None) -> float:
        """Return the probability to be in one of the states at a point; to be alive on one life."""
        if self.second is None or states is None:
            return self.first.at(point) / self.first_now if self.may_be(states) else 0.0
        # Where a table ends open, nobody asks for more than is needed.
        first, second = WHILE["first"], WHILE["second"]
        if states == first:
            return self.first.at(point) / self.first_now
        if states == second:
            return self.second.at(point) / self.second_now
        both = self._both(point)
        if states == frozenset({BOTH}):
            return both
        one = self.first.at(point) / self.first_now if states & {FIRST_ONLY} else 0.0
        two = self.second.at(point) / self.second_now if states & {SECOND_ONLY} else 0.0
        found = both if BOTH in states else 0.0
        if FIRST_ONLY in states:
            found += one - both
        if SECOND_ONLY in states:
            found += two - both
        return found

    def _both(self, point: int) -> float:
        assert self.second is not None
        one = self._first_of(point)
        if one == 0.0:
            return 0.0
        months = float(point - self.u)
        return one * math.exp(self.shock * months / 12)

    def _first_of(self, point: int) -> float:
        """The product of both survivals; 0 as soon as one of them is, whatever the other's table says."""
        assert self.second is not None
        shorter, longer = (
            (self.first, self.second) if _years(self.first) <= _years(self.second) else (self.second, self.first)
        )
        product = shorter.at(point)
        return 0.0 if product == 0 else product * longer.at(point) / (self.first_now * self.second_now)

    def end(self, states: States | None) -> int:
        """Return the first point at which the states are left for good. Raises NotValued for an open table."""
        if self.second is None or not states:
            return self.first.end() if self.may_be(states) else 0
        if states == frozenset({BOTH}):
            shorter = self.first if _years(self.first) <= _years(self.second) else self.second
            other = self.second if shorter is self.first else self.first
            return shorter.end() if not other.rates.closed else min(shorter.end(), other.end())
        ends = [self.first.end()] if states & {FIRST_ONLY} else []
        ends += [self.second.end()] if states & {SECOND_ONLY} else []
        return max(ends)


def _years(life: Survival) -> float:
    """Years from commencement to the end of a life's table."""
    return life.rates.rates.final_age - (life.rates.entry + life.rates.rule.added_years) - float(life.rates.offset)


def states_of(stream: Stream, design: Design) -> States | None:
    """Return the states that a stream depends on; None if it is certain."""
    if stream.while_ == "certain":
        return None
    if stream.on == "lapse":
        return running(design)
    return WHILE.get(str(stream.while_), frozenset()) | LEFT_ON.get(str(stream.on), frozenset())


def running(design: Design) -> States:
    """Return the states in which a contract runs: some stream may still be paid."""
    own = [stream for stream in design.stream if stream.of is None and stream.on != "lapse"]
    return frozenset(state for stream in own for state in states_of(stream, design) or ())
