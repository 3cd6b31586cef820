"""What is asked of the ratings of the policies: range, and whole numbers where years are counted.

A missing value is no rating, or a rating for ever. Only the ratings of lives that count are looked at: those of
the one life, or of whoever of two lives is left.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator

import numpy as np
import numpy.typing as npt

from .chunk import Chunk
from .columns import BY_NAME, RATINGS
from .reasons import Reason

Mask = npt.NDArray[np.bool_]

SECOND = "second_"
"""In front of a column of the second life."""


def rating_columns(held: Collection[str], on_two: bool) -> tuple[str, ...]:
    """Return the rating columns among those that an extract holds; on_two: with those of the second life."""
    lives = ("", SECOND) if on_two else ("",)
    asked = [f"{life}{name}{time}" for life in lives for name in RATINGS for time in ("", "_years")]
    return tuple(name for name in asked if name in held)


def rating_faults(held: Collection[str], on_two: bool) -> Iterator[str]:
    """Yield what is wrong with the rating columns of an extract for a basis that asks for ratings."""
    columns = rating_columns(held, on_two)
    known = [f"{life}{name}" for life in ("", SECOND) for name in RATINGS]
    if not any(name in columns for name in known):
        yield f"the extract has none of the columns {', '.join(RATINGS)}; add one, or set the key to false"
    for name in columns:
        if name.endswith("_years") and name.removesuffix("_years") not in columns:
            yield f"the extract has '{name}' without '{name.removesuffix('_years')}'; add it, or remove the former"
    for name in sorted(held):
        if name.startswith(("rating_", f"{SECOND}rating_")) and name not in BY_NAME:
            listed = ", ".join(known)
            yield f"the extract's column '{name}' is no rating known; they are {listed}, and each with '_years'"


def broken_ratings(chunk: Chunk, columns: Collection[str], on_two: Mask) -> Iterator[tuple[str, Reason, Mask]]:
    """Yield column, reason and which policies break it; on_two: which policies are on two lives.

    In the order of the registry; of each column: not finite, negative, out of range, not whole.
    """
    if not columns:
        return
    first, second = _counting(chunk, on_two)
    for name in columns:
        numbers, column = chunk.number(name), BY_NAME[name]
        there = ~np.isnan(numbers) & (second if name.startswith(SECOND) else first)
        if not there.any():
            continue
        low, high = column.low or 0.0, column.high or 0.0
        yield name, Reason.NUMBER_NOT_FINITE, there & np.isinf(numbers)
        if low >= 0:
            yield name, Reason.NUMBER_NEGATIVE, there & (numbers < 0)
        yield name, Reason.NUMBER_OUT_OF_RANGE, there & ((numbers < low) | (numbers > high))
        if column.kind == "years":
            yield name, Reason.NUMBER_NOT_WHOLE, there & (numbers != np.rint(numbers))


def _counting(chunk: Chunk, on_two: Mask) -> tuple[Mask, Mask]:
    """Say whose first and whose second life has a rating that counts."""
    if "lives" not in chunk.column_names:
        return np.ones(chunk.n, dtype=bool), np.zeros(chunk.n, dtype=bool)
    codes, values = chunk.text("lives")

    def among(*words: str) -> Mask:
        found: Mask = np.array([value in words for value in values] + [False]).take(codes, mode="wrap")
        return found

    first = np.where(on_two, among("both", "first"), ~among("none"))
    return first, on_two & among("both", "second")
