"""The probabilities of one step of a chain on named states, in ordinary Python."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from fractions import Fraction

from assumptions.laws import Law
from assumptions.mortality import Rates
from assumptions.moves import CERTAIN, MoveRule
from portfolios.named_states import DEAD

from .documents import DocumentError
from .plain_faults import NotValued

Pair = tuple[str, str]
Matrix = list[list[float]]
Step = tuple[dict[str, dict[str, float]], dict[str, dict[Pair, float]]]
"""Per state at the start of a step: probabilities of the states at its end, and expected numbers of the moves."""

LONGEST_YEARS = 152


@dataclass
class Moves:
    """The moves that are possible, each with its rule and its rates, from an age at commencement."""

    states: tuple[str, ...]
    rules: dict[Pair, tuple[MoveRule, Rates | None]]
    age: Fraction
    _known: dict[tuple[int, int], Step] = field(default_factory=dict)
    _exponentials: dict[tuple[float, ...], tuple[Matrix, Matrix]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.pairs: list[Pair] = list(self.rules)
        whole = any(rates is not None and rates.whole_ages_only for _, rates in self.rules.values())
        self.offset = self.age % 1 if whole else Fraction(0)
        for rule, rates in self.rules.values():
            if rates is not None and math.floor(self.age + rule.added_years) < rates.first_age:
                raise NotValued("age outside the tables", "age", float(self.age), "a table of a move begins later")
        open_ends = [LONGEST_YEARS]
        closed: dict[str, list[int]] = {state: [] for state in self.states}
        for (begin, end), (rule, rates) in self.rules.items():
            if rates is None:
                continue
            left = rates.final_age - (self.age + rule.added_years)
            if not (rule.close or rates.closed):
                open_ends.append(math.floor(left))
            elif end == DEAD:
                closed[begin].append(math.ceil(left))
        years = min(open_ends)
        self.closed = False
        if all(closed.values()):
            last = max(min(ends) for ends in closed.values())
            self.closed = last <= years
            years = min(last, years)
        if years <= 0:
            raise NotValued("age outside the tables", "age", float(self.age), "a table of a move ends before")
        self.last = 12 * years

    @property
    def kinds(self) -> set[str]:
        """What figures the rules hold."""
        return {str(rule.figures) for rule, _ in self.rules.values()}

    def figure(self, pair: Pair, start: int, later: bool, t: float | None = None) -> float:
        """Return the figure of a move in a step from a point, CERTAIN for death in the year that closes a table.

        later: after the birthday in the step; t: years from commencement, for the force of a law.
        """
        rule, rates = self.rules[pair]
        if rates is None:
            figure = float(rule.rate or 0.0)
        else:
            entered: Fraction | int = self.age + rule.added_years
            since = start // 12
            if rates.whole_ages_only:
                entered = math.floor(entered)
                since = math.floor(self.offset + Fraction(start, 12)) + later
            last = math.ceil(rates.final_age - entered) - (pair[1] == DEAD)
            if (rule.close or rates.closed) and since >= last:
                return CERTAIN if pair[1] == DEAD else 0.0
            entry = int(entered) if entered == int(entered) else float(entered)
            if isinstance(rates, Law) and rule.figures == "force":
                years = start / 12 if t is None else t
                figure = rates.force(entry + years, years)
            else:
                try:
                    figure = rates.rate(entry, since)
                except ValueError as error:
                    raise NotValued("age outside the tables", "age", float(entry + since), str(error)) from error
        adjusted = rule.multiple * figure + rule.extra
        return adjusted if rule.figures == "force" else min(1.0, adjusted)

    def forces(self, start: int, later: bool, t: float | None = None) -> dict[Pair, float]:
        """Return the forces of the moves that lead to the figures: of a state's probabilities q, -ln(1 - sum q)
        in proportion to them, a year."""
        figures = {pair: self.figure(pair, start, later, t) for pair in self.pairs}
        forces = dict(figures)
        for state in self.states:
            mine = [pair for pair in self.pairs if pair[0] == state]
            if any(figures[pair] >= CERTAIN for pair in mine):
                # In the year of certain death nothing else happens.
                forces |= {pair: CERTAIN if figures[pair] >= CERTAIN else 0.0 for pair in mine}
                continue
            for kind, a_year in (("yearly probabilities", 1), ("monthly probabilities", 12)):
                some = [pair for pair in mine if self.rules[pair][0].figures == kind]
                total = sum(figures[pair] for pair in some)
                if total > 1 + 1e-9:
                    raise DocumentError(f"moves: the {kind} of leaving '{state}' add up to {total:g}")
                whole = CERTAIN if total >= 1 - 1e-15 else -a_year * math.log1p(-total)
                forces |= {pair: whole * figures[pair] / total for pair in some if total > 0}
        return forces

    def parts(self, start: int, months: int) -> list[tuple[Fraction, bool]]:
        """Return the parts of a step, in years, and whether they come after a birthday in it."""
        length = Fraction(months, 12)
        if self.offset == 0:
            return [(length, False)]
        passed = self.offset + Fraction(start, 12)
        birthday = math.floor(passed) + 1 - passed
        return [(length, False)] if birthday >= length else [(birthday, False), (length - birthday, True)]


def step_of_chain(moves: Moves, start: int, months: int) -> Step:
    """Return the step of so many months from a point."""
    if (start, months) not in moves._known:
        moves._known[start, months] = _made(moves, start, months)
    return moves._known[start, months]


def _made(moves: Moves, start: int, months: int) -> Step:
    if start >= moves.last:
        # Nobody is left.
        nobody = dict.fromkeys(moves.states, 0.0)
        return {state: dict(nobody) for state in moves.states}, {
            state: dict.fromkeys(moves.pairs, 0.0) for state in moves.states
        }
    if months == 12 and moves.kinds - {"yearly probabilities"}:
        step = step_of_chain(moves, start, 1)
        for month in range(start + 1, start + 12):
            step = _followed(moves, step, step_of_chain(moves, month, 1))
        return step
    hazard = dict.fromkeys(moves.pairs, 0.0)
    for part, later in moves.parts(start, months):
        for pair, force in moves.forces(start, later).items():
            hazard[pair] += float(part) * force
    if "force" in moves.kinds and all(one < 1e-6 * CERTAIN / 12 for one in hazard.values()):
        return _forward(moves, start, months)
    return _one_move(moves, hazard)


def _one_move(moves: Moves, hazard: dict[Pair, float]) -> Step:
    """A step in which nobody moves twice, from the forces added up over it."""
    stay = {state: dict.fromkeys(moves.states, 0.0) for state in moves.states}
    moved = {state: dict.fromkeys(moves.pairs, 0.0) for state in moves.states}
    for state in moves.states:
        total = sum(force for pair, force in hazard.items() if pair[0] == state)
        stay[state][state] = math.exp(-total)
        for pair, force in hazard.items():
            if pair[0] == state and force > 0:
                moved[state][pair] = -math.expm1(-total) * force / total
                if pair[1] != DEAD:
                    stay[state][pair[1]] += moved[state][pair]
    return stay, moved


def _followed(moves: Moves, one: Step, two: Step) -> Step:
    stay, moved = {}, {}
    for state in moves.states:
        row = one[0][state]
        stay[state] = {
            end: sum(row[between] * two[0][between][end] for between in moves.states) for end in moves.states
        }
        moved[state] = {
            pair: one[1][state][pair] + sum(row[between] * two[1][between][pair] for between in moves.states)
            for pair in moves.pairs
        }
    return stay, moved


def _forward(moves: Moves, start: int, months: int) -> Step:
    """Kolmogorov's forward equations over a step, by exponentials of two halves of each part.

    Magnus's expansion to order 4: the exponent is the mean of the rates at two Gauss points and a commutator.
    """
    found: Step | None = None
    t = Fraction(start, 12)
    for part, later in moves.parts(start, months):
        for _ in range(2):
            h = float(part) / 2
            near, far = (float(t) + h * (0.5 + sign * math.sqrt(3) / 6) for sign in (-1, 1))
            one, two = moves.forces(start, later, near), moves.forces(start, later, far)
            step = _exponential(moves, one, two, h)
            found = step if found is None else _followed(moves, found, step)
            t += part / 2
    assert found is not None
    return found


def _exponential(moves: Moves, one: dict[Pair, float], two: dict[Pair, float], h: float) -> Step:
    key = (h, *one.values(), *two.values())
    if key not in moves._exponentials:
        q1, r1 = _rates(moves, one)
        q2, r2 = _rates(moves, two)
        c = math.sqrt(3) / 12 * h * h
        exponent = _sum((h / 2, q1), (h / 2, q2), (c, _product(q1, q2)), (-c, _product(q2, q1)))
        moving = _sum((h / 2, r1), (h / 2, r2), (c, _product(q1, r2)), (-c, _product(q2, r1)))
        # exp(Q) = sum of Q^k / k!, and the mean of exp(Q s) for s from 0 to 1 = sum of Q^k / (k + 1)!
        size = range(len(moves.states))
        power: Matrix = [[float(i == j) for j in size] for i in size]
        whole, mean, k = power, power, 0
        while k < 60 and max(abs(x) for row in power for x in row) > 1e-18:
            k += 1
            power = _sum((1 / k, _product(power, exponent)))
            whole = _sum((1.0, whole), (1.0, power))
            mean = _sum((1.0, mean), (1 / (k + 1), power))
        moves._exponentials[key] = whole, _product(mean, moving)
    stay, moved = moves._exponentials[key]
    return (
        {state: dict(zip(moves.states, row, strict=True)) for state, row in zip(moves.states, stay, strict=True)},
        {state: dict(zip(moves.pairs, row, strict=True)) for state, row in zip(moves.states, moved, strict=True)},
    )


def _rates(moves: Moves, forces: dict[Pair, float]) -> tuple[Matrix, Matrix]:
    """Return the matrix of rates of the living states, and the rates of the moves by the state left."""
    places = {state: place for place, state in enumerate(moves.states)}
    q: Matrix = [[0.0] * len(places) for _ in places]
    r: Matrix = [[0.0] * len(moves.pairs) for _ in places]
    for number, (begin, end) in enumerate(moves.pairs):
        force = forces[begin, end]
        q[places[begin]][places[begin]] -= force
        if end != DEAD:
            q[places[begin]][places[end]] += force
        r[places[begin]][number] = force
    return q, r


def _product(a: Matrix, b: Matrix) -> Matrix:
    columns = list(zip(*b, strict=True))
    return [[sum(x * y for x, y in zip(row, column, strict=True)) for column in columns] for row in a]


def _sum(*terms: tuple[float, Matrix]) -> Matrix:
    first = terms[0][1]
    return [[sum(c * m[i][j] for c, m in terms) for j in range(len(first[0]))] for i in range(len(first))]
