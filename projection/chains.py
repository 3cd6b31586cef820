"""Chains on named states: matrices of one step by rules of the moves and age at commencement.

For each point g = 1, 2 ... a matrix has one row for each living state at the start of the step in which g lies. The
row holds the probabilities of the living states at g, and then, per move, how often it is expected until g. Rates
given as probabilities make a chain with one move in a step; with a force among them, Kolmogorov's forward equations
are integrated over the step.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.designs import Design
from portfolios.named_states import is_named, living, paid_on

from .cells import Cell, Way
from .chain_rates import NoRates, Rated
from .chain_steps import Steps, chained, forward, one_move, parts_of_year
from .curves import IMPOSSIBLE
from .documents import DocumentError
from .pool import Pool
from .settings import Settings
from .streams import CHAIN, LONGEST

Model = tuple[tuple[str, ...], tuple[Way, ...]]
"""Living states and moves."""


@dataclass
class Chains:
    """Rows of matrices by model and age at commencement, with a record of each.

    keys: how many keys ages may have. Raises DocumentError where designs and basis do not fit together.
    """

    designs: list[Design]
    basis: Basis
    settings: Settings
    pool: Pool
    keys: int
    records: NDArray[Any] = field(default_factory=lambda: np.zeros(0, CHAIN))
    models: dict[Model, int] = field(default_factory=dict)
    known: dict[tuple[int, float], int] = field(default_factory=dict)
    _going: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.any = any(is_named(design) for design in self.designs)
        lapse = self.basis.document.lapse
        if self.any and lapse is not None and lapse.competing == "dependent rates":
            raise DocumentError(
                "lapse: 'dependent rates' are not for designs with named states; take 'lapses at the end', or put "
                "the rates of leaving among the moves"
            )
        if self.any and self.basis.document.mortality.age == "exact":
            for move, rates in zip(self.basis.document.move, self.basis.moves, strict=True):
                if any(getattr(one, "select_years", 0) for one in rates):
                    raise DocumentError(
                        f"{move.place}: select rates of a table need an age at commencement in whole years; set the "
                        "key 'age' of the mortality to last, nearest or next birthday"
                    )
        given = {pair for move in self.basis.document.move for pair in move.pairs}
        for design in self.designs if self.any else ():
            for stream in design.stream:
                for begin, end in sorted(paid_on(design, stream) - given):
                    if stream.on != "death":
                        raise DocumentError(
                            f"product {design.code}, stream '{stream.name}': paid on the move from '{begin}' to "
                            f"'{end}', for which the basis has no rates; add a [[move]]"
                        )

    def going(self, held: list[tuple[int, int, int]]) -> NDArray[np.int64]:
        """Return places of the shares that lapse at each point of those still there, given those of persistency."""
        if not self.any:
            return np.zeros(len(held), dtype=np.int64)
        for place, _, _ in held[len(self._going) :]:
            there = self.pool.row(place - 1, LONGEST + 14)
            gone = 1 - there[1:] / np.where(there[:-1] > 0, there[:-1], 1.0)
            self._going.append(self.pool.add(np.where(there[:-1] > 0, gone, 0.0)))
        return np.array(self._going, dtype=np.int64)

    def model(self, cell: Cell) -> int:
        """Return the number of a cell's model, -1 where it has none."""
        states = living(self.designs[cell.design])
        if not states or cell.missing:
            return -1
        return self.models.setdefault((states, cell.moves), len(self.models))

    def row(self, model: int, age: float) -> int:
        """Return the record of a model from an age, made on first meeting; IMPOSSIBLE where rates lack the age."""
        if (model, age) not in self.known:
            self.known[model, age] = self._add(*list(self.models)[model], age)
        return self.known[model, age]

    def _add(self, states: tuple[str, ...], ways: tuple[Way, ...], age: float) -> int:
        try:
            steps, closed = self.steps(states, ways, age)
        except NoRates:
            return IMPOSSIBLE
        record = np.zeros(1, CHAIN)
        columns = np.concatenate((steps.stay, steps.moved), axis=2)
        record["place"] = self.pool.add(np.ascontiguousarray(columns.transpose(1, 2, 0)).ravel())
        record["over"], record["closed"] = len(steps.stay), closed
        record["states"], record["moves"] = len(states), len(ways)
        self.records = np.concatenate((self.records, record))
        return len(self.records) - 1

    def steps(self, states: tuple[str, ...], ways: tuple[Way, ...], age: float) -> tuple[Steps, bool]:
        """Return the matrices of points 1, 2 ... of a model, and whether nobody is left at the end."""
        document = self.basis.document
        rated = Rated(
            states,
            [(begin, end) for begin, end, _, _ in ways],
            [document.move[number].rule[rule] for _, _, number, rule in ways],
            [self.basis.moves[number][rule] for _, _, number, rule in ways],
            age,
        )
        years, closed = rated.years(LONGEST // 12)
        yearly = self.settings.step == "year"
        figures = {rule.figures for rule in rated.rules}
        if yearly and figures <= {"yearly probabilities"}:
            return parts_of_year(one_move(rated, years, 1)), closed
        monthly = forward(rated, years) if "force" in figures else one_move(rated, years, 12)
        return parts_of_year(chained(monthly, 12)) if yearly else monthly, closed

    def state(self, cell: Cell) -> int:
        """Return the position of a cell's state; behind the last for dead."""
        states = living(self.designs[cell.design])
        return states.index(cell.state) if cell.state in states else len(states)
