"""The pool: all rows of all curves, one after the other in one array.

A row is known by the place of its first number. The first row holds ones, for whatever does not vary.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from .streams import LONGEST

ONES = 0
"""Place of the row of ones."""


class Pool:
    """Rows of numbers that only ever grow in number; whoever holds the array keeps what was there."""

    def __init__(self) -> None:
        self.numbers: NDArray[np.float64] = np.ones(1 << 17)
        self.used = LONGEST + 64

    def add(self, row: NDArray[np.float64]) -> int:
        """Add a row and return its place."""
        place = self.space(len(row))
        self.numbers[place : place + len(row)] = row
        return place

    def space(self, count: int) -> int:
        """Make room for a row and return its place."""
        place = self.used
        self.used += count
        while self.used > len(self.numbers):
            # A new array: a loop that runs in another thread keeps the one it was given.
            self.numbers = np.concatenate((self.numbers, np.ones(len(self.numbers))))
        return place

    def row(self, place: int, count: int) -> NDArray[np.float64]:
        """Return the numbers of a row."""
        return self.numbers[place : place + count]
