"""Rules cut in two: a copy for the policies that a change is for, before the rule itself for all others."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

from .rules import AnyRule, Band, Condition, Scalar, holds


class Piece(NamedTuple):
    """One rule of the list that comes out: the rule that it came from, by position, and whether it is to change."""

    of: int
    changes: bool


def split(rules: Sequence[AnyRule], condition: Mapping[str, Condition]) -> tuple[list[AnyRule], list[Piece]]:
    """Return rules of which some are for policies that meet a condition, and where each comes from.

    Reading from the top, the first fit is a copy of the rule that was the first fit before, and one that is to change
    exactly where the policy meets the condition. Without a condition every rule is to change and stays the same object.
    """
    if not condition:
        return list(rules), [Piece(number, True) for number in range(len(rules))]
    made: list[AnyRule] = []
    pieces: list[Piece] = []
    for number, rule in enumerate(rules):
        both = meet(rule.for_, condition)
        if both is not None:
            made.append(rule.model_copy(update={"for_": both}))
            pieces.append(Piece(number, True))
        made.append(rule)
        pieces.append(Piece(number, False))
    return made, pieces


def meet(first: Mapping[str, Condition], second: Mapping[str, Condition]) -> dict[str, Condition] | None:
    """Return the conditions that a policy meets that meets both; None where no policy does."""
    made = dict(first)
    for column, condition in second.items():
        if column not in made:
            made[column] = condition
            continue
        both = _both(made[column], condition)
        if both is None:
            return None
        made[column] = both
    return made


def _both(first: Condition, second: Condition) -> Condition | None:
    if isinstance(first, Band) and isinstance(second, Band):
        # Dates with dates, numbers with numbers: the column holds one kind.
        lows: list[Any] = [one for one in (first.from_, second.from_) if one is not None]
        highs: list[Any] = [one for one in (first.to, second.to) if one is not None]
        low, high = max(lows, default=None), min(highs, default=None)
        if low is not None and high is not None and not low < high:
            return None
        return Band.model_construct(from_=low, to=high)
    if isinstance(first, Band):
        first, second = second, first
    members: list[Any] = first if isinstance(first, list) else [first]
    held: list[Scalar] = [member for member in members if holds(second, member)]
    return held or None
