"""The sample check of a run: some policies valued a second time by the plain twin."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from assumptions.basis import Basis
from portfolios.designs import Design

from .plain import plain_value
from .results import SampleCheck
from .settings import Settings


@dataclass(frozen=True)
class Candidate:
    """A policy with what the engine found: benefits, expenses, premiums in currency, not rounded."""

    policy: dict[str, Any]
    design: int
    parts: list[float]


def check_sample(
    chosen: list[Candidate], designs: list[Design], basis: Basis, settings: Settings
) -> SampleCheck:
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


def _difference(
    candidate: Candidate, designs: list[Design], basis: Basis, settings: Settings
) -> tuple[float, float]:
    try:
        plain = plain_value(candidate.policy, designs[candidate.design], basis, settings, payments=False)
    except ValueError:
        return float("inf"), float("inf")
    again = (plain.benefits, plain.expenses, plain.premiums)
    difference = max(abs(one - other) for one, other in zip(candidate.parts, again, strict=True))
    size = sum(abs(part) for part in again)
    return difference, difference / size if size else difference
