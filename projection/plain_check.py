"""The sample check of a run: some policies valued a second time by the plain twin."""

from __future__ import annotations

import heapq
from dataclasses import dataclass
from threading import Lock
from typing import Any

import numpy as np

from assumptions.basis import Basis
from portfolios.chunk import Chunk
from portfolios.designs import Design

from .engine import Valued
from .plain import plain_value
from .results import SampleCheck
from .settings import Settings


@dataclass(frozen=True)
class Candidate:
    """A policy with what the engine found: benefits, expenses, premiums in currency, not rounded."""

    policy: dict[str, Any]
    design: int
    parts: list[float]


def check_sample(chosen: list[Candidate], designs: list[Design], basis: Basis, settings: Settings) -> SampleCheck:
    """Value the chosen policies with the plain twin and return the largest difference.

    The difference is that of the parts, relative to the sum of their absolute values. A policy that the twin
    refuses to value counts as a difference without bounds.
    """
    worst = SampleCheck(0, 0.0, 0.0, "")
    for candidate in chosen:
        difference, relative = _difference(candidate, designs, basis, settings)
        if not relative <= worst.largest_relative or worst.policies == 0:
            worst = SampleCheck(1, difference, relative, str(candidate.policy["policy_id"]))
    return SampleCheck(len(chosen), worst.largest_difference, worst.largest_relative, worst.policy_id)


def _difference(candidate: Candidate, designs: list[Design], basis: Basis, settings: Settings) -> tuple[float, float]:
    try:
        plain = plain_value(candidate.policy, designs[candidate.design], basis, settings, payments=False)
    except ValueError:
        return float("inf"), float("inf")
    again = (plain.benefits, plain.expenses, plain.premiums)
    difference = max(abs(one - other) for one, other in zip(candidate.parts, again, strict=True))
    size = sum(abs(part) for part in again)
    return difference, difference / size if size else difference


class Sample:
    """The policies with the smallest hashes among those valued: the same ones in whatever order they come."""

    def __init__(self, size: int) -> None:
        self.size = size
        self._kept: list[tuple[int, int, Candidate]] = []
        self._lock = Lock()

    def offer(self, chunk: Chunk, valued: Valued) -> None:
        """Take the policies of a chunk into account; may be called from several threads."""
        good = np.flatnonzero(valued.valued)
        hashes = chunk.hashes[good]
        few = good if len(good) <= self.size else good[np.argpartition(hashes, self.size)[: self.size]]
        with self._lock:
            for i in few.tolist():
                key = -int(chunk.hashes[i])
                if len(self._kept) >= self.size and key <= self._kept[0][0]:
                    continue
                candidate = Candidate(chunk.policy(i), int(valued.checked.product[i]), valued.results.parts[i].tolist())
                push = heapq.heappush if len(self._kept) < self.size else heapq.heappushpop
                push(self._kept, (key, chunk.start + i, candidate))

    def chosen(self) -> list[Candidate]:
        """The sample, in order of hash."""
        return [candidate for _, _, candidate in sorted(self._kept, key=lambda kept: -kept[0])]
