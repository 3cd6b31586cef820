"""Sources: the rows on named states that the segments of a plan look at, each a sum of members.

Members of a point are the probabilities of the states before its lapses, after them, the expected moves of the step
that ends there, and the lapses. The loops fill the rows for each policy; a segment reads one as its survival.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from portfolios.designs import Design, Stream
from portfolios.named_states import is_named, lapsing, living, occupied, paid_on, reachable, running_in

from .cells import Cell
from .documents import DocumentError
from .lives import Terms
from .streams import JOINT, MOST_SOURCES, SOURCE

Members = tuple[int, ...]


@dataclass
class SourceRows:
    """The sources of all plans, one behind the other, and the range of them that belongs to each cell.

    members: places of members in the numbers that the loops work with; leaving: per cell the bits of the states
    from which it may lapse; most: the most rows of states and sources that a plan has. A plan is made between
    ``begin`` and ``end``.
    """

    records: NDArray[Any] = field(default_factory=lambda: np.zeros(1, SOURCE))
    members: NDArray[np.int64] = field(default_factory=lambda: np.zeros(1, np.int64))
    ranges: NDArray[np.int64] = field(default_factory=lambda: np.zeros((0, 2), np.int64))
    leaving: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))
    most: int = 0
    _known: dict[Any, tuple[int, int, int]] = field(default_factory=dict)

    def begin(self, key: Any, design: Design, cell: Cell) -> None:
        """Begin the plan of a cell; key: what plans are told apart by."""
        self._design, self._cell = design, cell
        self._states = living(design)
        self._pairs = [(begin, end) for begin, end, _, _ in cell.moves]
        self._reached = reachable(cell.state, self._pairs) if is_named(design) else frozenset()
        self._made: dict[Members, int] = {}

    def end(self, key: Any) -> None:
        """End the plan begun, and keep its sources."""
        if key not in self._known:
            first = len(self.records)
            rows = np.zeros(len(self._made), SOURCE)
            for row, members in zip(rows, self._made, strict=True):
                row["begin"], row["end"] = len(self.members), len(self.members) + len(members)
                self.members = np.concatenate((self.members, np.array(members, np.int64)))
            self.records = np.concatenate((self.records, rows))
            leaves = lapsing(self._design) if self._states else frozenset()
            bits = sum(1 << place for place, state in enumerate(self._states) if state in leaves)
            self._known[key] = first, len(self.records), bits
            self.most = max(self.most, 2 * len(self._states) + len(rows))
        first, behind, bits = self._known[key]
        self.ranges = np.concatenate((self.ranges, [(first, behind)]))
        self.leaving = np.concatenate((self.leaving, [bits]))

    def terms(self, stream: Stream) -> Terms:
        """Return the source of a stream as the only term of its probability; none where it cannot be paid."""
        size = len(self._states)
        if stream.on == "lapse":
            mine = (2 * size + len(self._pairs),) if lapsing(self._design) & self._reached else ()
            return self._source(mine)
        if stream.on is not None:
            pairs = paid_on(self._design, stream)
            return self._source(
                tuple(
                    2 * size + number
                    for number, pair in enumerate(self._pairs)
                    if pair in pairs and pair[0] in self._reached
                )
            )
        # What is paid in advance comes after the lapses of its point.
        first = size if stream.paid == "advance" else 0
        states = occupied(self._design, stream)
        return self._occupancy(states, first)

    def running(self) -> Terms:
        """Return the source of the states in which the contract runs, after lapses."""
        return self._occupancy(running_in(self._design), len(self._states))

    def _occupancy(self, states: frozenset[str], first: int) -> Terms:
        wanted = states & self._reached
        return self._source(tuple(first + place for place, state in enumerate(self._states) if state in wanted))

    def _source(self, members: Members) -> Terms:
        if not members:
            return ()
        place = self._made.setdefault(members, len(self._made))
        if place >= MOST_SOURCES:
            raise DocumentError(
                f"product {self._design.code}: its streams look at more than {MOST_SOURCES} different sets of states "
                "and moves; put streams together"
            )
        return ((JOINT + 1 + place, 1.0),)
