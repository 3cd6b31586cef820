"""The sample check of a run: some policies valued a second time by the plain twin."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from assumptions.basis import Basis
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.identifiers import Hashes

from .engine import Valued
from .plain import plain_value
from .results import SampleCheck
from .settings import Settings

SPARE = 24
"""Policies that may step in where others of the sample turn out to be exceptions."""


@dataclass(frozen=True)
class Candidate:
    """A policy with what the engine found: benefits, expenses, premiums in currency, not rounded."""

    hash: int
    policy: dict[str, Any]
    design: int
    parts: list[float]


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
    """The policies with the smallest hashes among those valued: the same ones in whatever order they come.

    smallest: the smallest hashes of the extract, ascending, some more than the sample has policies, because
    some may turn out to be exceptions. Each of the first is valued by the plain twin as soon as it comes
    along, while other threads go on; the others wait until it is known how many are missing.
    """

    def __init__(self, size: int, smallest: Hashes, designs: list[Design], basis: Basis, settings: Settings) -> None:
        self.size = size
        self._likely = smallest[min(size, len(smallest)) - 1] if len(smallest) else np.uint64(0)
        self._bound = smallest[-1] if len(smallest) else np.uint64(0)
        self._designs, self._basis, self._settings = designs, basis, settings
        self._checked: list[tuple[float, float, str]] = []
        self._waiting: list[Candidate] = []

    def candidates(self, chunk: Chunk, valued: Valued) -> list[Candidate]:
        """Return the policies of a chunk that may belong to the sample; may be called from several threads."""
        rows = np.flatnonzero((chunk.hashes <= self._bound) & valued.valued)
        return [
            Candidate(
                int(chunk.hashes[i]),
                chunk.policy(i),
                int(valued.checked.product[i]),
                valued.results.parts[i].tolist(),
            )
            for i in rows.tolist()
        ]

    def take(self, candidates: list[Candidate]) -> None:
        """Value those that belong to the sample for certain, and keep the others."""
        for candidate in candidates:
            if candidate.hash <= self._likely:
                self._check(candidate)
            else:
                self._waiting.append(candidate)

    def result(self) -> SampleCheck:
        """Fill up the sample and return the largest difference.

        The difference is that of the parts, relative to the sum of their absolute values. A policy that the
        twin refuses to value counts as a difference without bounds.
        """
        missing = max(0, self.size - len(self._checked))
        for candidate in sorted(self._waiting, key=lambda waiting: waiting.hash)[:missing]:
            self._check(candidate)
        if not self._checked:
            return SampleCheck(0, 0.0, 0.0, "")
        relative, difference, policy_id = max(self._checked)
        return SampleCheck(len(self._checked), difference, relative, policy_id)

    def _check(self, candidate: Candidate) -> None:
        difference, relative = _difference(candidate, self._designs, self._basis, self._settings)
        self._checked.append((relative, difference, str(candidate.policy["policy_id"])))
