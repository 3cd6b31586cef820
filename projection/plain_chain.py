"""A contract on named states, seen from the valuation date, in ordinary Python.

Where it may be, which moves it makes and when it lapses: forward from the state at the valuation date, step by step.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from assumptions.basis import Basis
from assumptions.rules import first_fit
from portfolios.designs import Design, Stream
from portfolios.named_states import DEAD, Pairs, depends_on, lapsing, living, occupied, paid_on, reachable
from portfolios.states import States

from .plain_chain_steps import Moves, Step, step_of_chain
from .plain_faults import NotValued
from .plain_lapse import Persistency

Shares = dict[str, float]


@dataclass
class Chain:
    """Probabilities of the states of one contract from its state at u months after commencement.

    before and after: per point, of the living states before and after the lapses of the point; moved: per end of a
    step, the expected number of each move in it; lapsed: the share that lapses at its end.
    """

    design: Design
    moves: Moves
    state: str
    u: Fraction
    step_months: int
    lapses: Persistency
    _before: dict[int, Shares] = field(default_factory=dict)
    _after: dict[int, Shares] = field(default_factory=dict)
    _moved: dict[int, dict[tuple[str, str], float]] = field(default_factory=dict)
    _lapsed: dict[int, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.states = living(self.design)
        self.reached = reachable(self.state, self.moves.pairs) if self.state != DEAD else frozenset()
        self.lapsing = lapsing(self.design)
        start = self.u.numerator // self.u.denominator // self.step_months * self.step_months
        self._steps_done = start
        self._base = {state: float(state == self.state) for state in self.states}
        if self.u.denominator == 1:
            self._before[int(self.u)] = self._after[int(self.u)] = dict(self._base)
        last, closed = self.moves.last, self.moves.closed
        if self.state != DEAD and not closed and self.u > last:
            raise NotValued("table ends too early", "age", float(self.u) / 12, "the tables of the moves end before")

    # What the plain twin asks of lives.

    first = None
    second = None

    @property
    def now(self) -> float:
        """1, or 0 where by closed tables nobody is left at the valuation date."""
        return 0.0 if self.state != DEAD and self.moves.closed and self.u // 1 >= self.moves.last else 1.0

    def may_be(self, states: States | None) -> bool:
        """Say whether one of the states is still possible; None stands for what does not ask for states."""
        return states is None or bool(states & self.reached)

    def may_have_been(self, states: States | None) -> bool:
        """Nothing is guaranteed on named states."""
        return states is None

    def end(self, states: States | None) -> int:
        """Return the point at which nobody is left. Raises NotValued where the tables of the moves end open."""
        if not self.may_be(states):
            return 0
        if not self.moves.closed:
            raise NotValued("table ends too early", "age", self.moves.last / 12, "a table of a move is not closed")
        return self.moves.last

    def probability(self, point: int, states: States | None) -> float:
        """Return the probability to be in one of the states at a point, before its lapses."""
        if point <= self.u:
            return float(self.state in (states or ()))
        return self.share(point, states or frozenset(), False) if self.may_be(states) else 0.0

    # What depends on the states.

    def states_of(self, stream: Stream) -> States | None:
        """Return the states that a stream needs, None if it is certain: those in it, or left when it is paid."""
        if stream.while_ == "certain":
            return None
        if stream.while_ is not None:
            return occupied(self.design, stream)
        if stream.on == "lapse":
            return depends_on(self.design, stream)
        return frozenset(begin for begin, _ in self.moves_of(stream))

    def moves_of(self, stream: Stream) -> Pairs:
        """Return the possible moves on which a stream is paid."""
        return paid_on(self.design, stream) & frozenset(self.moves.pairs)

    def share(self, point: int, states: States, after: bool) -> float:
        """Return the probability of a set of states at a point, after or before its lapses."""
        if point > self.moves.last and not self.moves.closed:
            raise NotValued("table ends too early", "age", point / 12, "a table of a move is not closed")
        self._go_to(point)
        shares = (self._after if after else self._before)[point]
        return math.fsum(shares[state] for state in self.states if state in states)

    def moved(self, point: int, pairs: Pairs) -> float:
        """Return how often some moves are expected in the step that ends at a point."""
        self._go_to(point)
        return math.fsum(self._moved[point][pair] for pair in self.moves.pairs if pair in pairs)

    def lapsed(self, point: int) -> float:
        """Return the share that lapses at the end of the step that ends at a point."""
        self._go_to(point)
        return self._lapsed[point]

    def _go_to(self, point: int) -> None:
        while point > self._steps_done:
            self._take_step(self._steps_done)
            self._steps_done += self.step_months

    def _take_step(self, start: int) -> None:
        """Go from the start of a step, or from the valuation date in it, to its end, point by point."""
        end = start + self.step_months
        begin = max(Fraction(start), self.u)
        whole = step_of_chain(self.moves, start, self.step_months)
        for point in range(int(begin) + 1, end + 1):
            part = (point - begin) / self.step_months
            shares, moved = _part(whole, self._base, part)
            self._before[point] = shares
            self._after[point] = shares
            self._moved[point] = moved
        share = 1 - self._kept(end)
        before = self._before[end]
        self._lapsed[end] = math.fsum(share * before[state] for state in self.states if state in self.lapsing)
        self._after[end] = {state: before[state] * (1 - share if state in self.lapsing else 1) for state in self.states}
        self._base = self._after[end]

    def _kept(self, point: int) -> float:
        earlier = self.lapses.at(point - 1)
        return self.lapses.at(point) / earlier if earlier > 0 else 1.0


def _part(whole: Step, base: Shares, part: Fraction) -> tuple[Shares, dict[tuple[str, str], float]]:
    """Take a part of a step: a state is kept with its probability to the power of the part, exits in proportion."""
    stay, moved = whole
    shares = dict.fromkeys(base, 0.0)
    moves: dict[tuple[str, str], float] = dict.fromkeys(next(iter(moved.values())), 0.0)
    for state, there in base.items():
        own = stay[state][state]
        kept = own if part == 1 else own ** float(part)
        left = 1.0 if part == 1 else float(part) if own >= 1 else (1 - kept) / (1 - own)
        for other, probability in stay[state].items():
            shares[other] += there * (kept if other == state else left * probability)
        for pair, number in moved[state].items():
            moves[pair] += there * left * number
    return shares, moves


def chain_of(
    policy: Mapping[str, Any], age: Fraction, u: Fraction, design: Design, basis: Basis, step_months: int,
    lapses: Persistency,
) -> Chain:  # fmt: skip
    """Return the chain of a policy. Raises NotValued for a state that is not known, or a move without a rule."""
    state = policy.get("state")
    states = (*living(design), DEAD)
    if state not in states:
        raise NotValued("state not known", "state", state, f"one of {', '.join(states)}")
    rules = {}
    for number, move in enumerate(basis.document.move):
        pairs = [pair for pair in move.pairs if pair[0] in states and pair[1] in states]
        place = first_fit(move.rule, policy) if pairs else 0
        if place is None:
            raise NotValued("no rule fits", move.place, None, "one of its rules must fit")
        for pair in pairs:
            if not move.rule[place].never:
                rules[pair] = move.rule[place], basis.moves[number][place]
    return Chain(design, Moves(living(design), rules, age), str(state), u, step_months, lapses)
