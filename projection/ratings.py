"""Ratings of lives: from the columns of the extract to few distinct ratings, and to rows of survival.

Each distinct rating has a number. Policies with the same rating, rule and age share their rows. Time since
commencement is cut where a part of a rating ends; each piece has rates of its own, and survival goes on from
piece to piece.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from assumptions.mortality import STANDARD, Rating
from portfolios.chunk import Chunk
from portfolios.columns import RATINGS
from portfolios.rating_rules import SECOND

from . import loops
from .streams import LONGEST

Row = NDArray[np.float64]
Mask = NDArray[np.bool_]

FOR_EVER = LONGEST // 12 + 1
"""Years for which a part of a rating holds that ends never."""

_NOTHING = np.array([1.0, 0.0, 0.0])
"""Values of the columns that change no rate."""


class Key(NamedTuple):
    """A distinct rating: values as in the extract, the whole years that each holds, and the piece of time at T."""

    multiple: float
    age: float
    extra: float
    multiple_years: float
    age_years: float
    extra_years: float
    piece: float

    def pieces(self) -> list[tuple[int, Rating]]:
        """Return the year since commencement in which each piece of time begins, and its rating."""
        ends = sorted({0.0, self.multiple_years, self.age_years, self.extra_years} - {float(FOR_EVER)})
        return [(int(year), self._after(year)) for year in ends]

    def _after(self, year: float) -> Rating:
        return Rating(
            self.multiple if year < self.multiple_years else 1.0,
            int(self.age) if year < self.age_years else 0,
            self.extra / 1000 if year < self.extra_years else 0.0,
        )


class Ratings:
    """The distinct ratings met in the portfolio, numbered from 1; 0 is a life without one.

    by_piece: tell ratings apart also by the piece of time in which the valuation date lies. Years of age that
    begin between anniversaries need it, since a piece may end within one.
    """

    def __init__(self, columns: tuple[str, ...], by_piece: bool) -> None:
        self.columns = columns
        self.by_piece = by_piece
        self.keys: list[Key] = []
        self._known: dict[Key, int] = {}

    def numbers(self, chunk: Chunk, counting: Mask, of_second: Mask, places: loops.Places) -> NDArray[np.int64]:
        """Return the number of each life's rating; of_second: whose second life it is; counting: who is asked for."""
        numbers = np.zeros(chunk.n, dtype=np.int64)
        if not self.columns:
            return numbers
        parts = [self._column(chunk, name, of_second) for name in RATINGS]
        rated = counting & np.any([~np.isnan(part) for part in parts], axis=0)
        rows = np.flatnonzero(rated)
        if len(rows) == 0:
            return numbers
        found = self._values(chunk, rows, [part[rows] for part in parts], of_second, places)
        keys, inverse = _distinct_rows(found)
        numbers[rows] = np.array([self._number(key) for key in keys.tolist()], dtype=np.int64)[inverse]
        return numbers

    def _values(
        self, chunk: Chunk, rows: NDArray[np.int64], parts: list[Row], of_second: Mask, places: loops.Places
    ) -> Row:
        """Fields of the keys of some policies, one row each; what changes nothing is the same for all."""
        years = [self._column(chunk, f"{name}_years", of_second)[rows] for name in RATINGS]
        for part, time, nothing in zip(parts, years, _NOTHING, strict=True):
            time[np.isnan(time) | (time > FOR_EVER)] = FOR_EVER
            none = np.isnan(part) | (part == nothing) | (time == 0)
            part[none], time[none] = nothing, FOR_EVER
        piece = np.zeros(len(rows))
        if self.by_piece:
            passed = (places.k[rows] + (places.part[rows] > 0) * 0.5) / 12
            # On the day on which a piece ends, what was before still counts; times that are equal end one piece.
            times = np.sort(np.array(years), axis=0)
            for place, time in enumerate(times):
                again = time == times[place - 1] if place else False
                piece += (passed > time) & ~np.asarray(again)
        return np.column_stack([*parts, *years, piece])

    def _column(self, chunk: Chunk, name: str, of_second: Mask) -> Row:
        """A column of the first life, or of the second where that is asked for; a copy."""
        values = [
            chunk.number(one) if one in self.columns else np.full(chunk.n, np.nan) for one in (name, SECOND + name)
        ]
        return np.where(of_second, values[1], values[0])

    def _number(self, fields: list[float]) -> int:
        key = Key(*fields)
        if all(rating == STANDARD for _, rating in key.pieces()):
            return 0
        if key not in self._known:
            self.keys.append(key)
            self._known[key] = len(self.keys)
        return self._known[key]


_ODD = np.array([3, 0x9E3779B97F4A7C15, 0x2545F4914F6CDD1D, 0x1B03738712FAD5C9, 7, 0x27BB2EE687B0B0FD, 11], np.uint64)
"""Odd factors that mix the fields of a key into one number."""


def _distinct_rows(rows: Row) -> tuple[Row, NDArray[np.int64]]:
    """Distinct rows of a matrix, and per row the place of its own; by a mixture of the bits, which is then checked.

    Comparing whole rows while sorting takes ten times as long, and is left for rows that look alike and are not.
    """
    bits = (rows + 0.0).view(np.uint64).reshape(rows.shape)
    mixed = np.bitwise_xor.reduce((bits ^ (bits >> np.uint64(29))) * _ODD, axis=1)
    _, first, inverse = np.unique(mixed, return_index=True, return_inverse=True)
    if np.array_equal(rows[first[inverse]], rows):
        return rows[first], inverse
    keys, inverse = np.unique(rows, axis=0, return_inverse=True)
    return keys, inverse.reshape(-1)


class Course(NamedTuple):
    """Survival of a rated life: at points from commencement, and through the years of age of one piece of time.

    closed: nobody is left at the last point; yearly and reached: rates of the years of age from commencement and
    survival to their starts. Where years of age begin between anniversaries, they are right for the piece asked for.
    """

    living: Row
    closed: bool
    yearly: Row
    reached: Row


def course_of(pieces: list[tuple[int, Row]], piece: int, passed: float, fractions: int, closes: bool) -> Course:
    """Return the survival of a rated life.

    pieces: the year since commencement in which each begins, and its rates of all years from commencement on; piece:
    the one in which the valuation date lies; passed: share of the first year of age that has passed at commencement;
    closes: the rates end with nobody left.
    """
    living = np.ones(1)
    yearly, reached = np.zeros(0), np.ones(1)
    ends = [begin for begin, _ in pieces[1:]] + [FOR_EVER]
    for number, ((begin, rates), end) in enumerate(zip(pieces, ends, strict=True)):
        own = rates[begin:]
        if len(own) == 0:
            if not closes:
                break
            own = np.ones(1)
        start, products = living[-1], np.concatenate(([1.0], np.cumprod(1 - own)))
        further = np.zeros(12 * len(own) + 1)
        loops.fill_living(own, products, passed, fractions, further)
        if number == 0:
            start = living[0] = further[0]
        if passed == 0:
            # Years of age begin with the pieces, so that one row of rates serves all of them.
            yearly = np.concatenate((yearly[:begin], own))
            reached = np.concatenate((reached[:begin], start * products))
        elif number <= piece:
            # The first rate stands in for the years before, so that the share of it that has passed is taken off.
            yearly = np.concatenate((np.full(begin, own[0]), own))
            reached = np.concatenate((np.ones(begin), products)) * start
        points = min(12 * (end - begin), 12 * len(own))
        living = np.concatenate((living, start * further[1 : points + 1]))
        if 12 * len(own) < 12 * (end - begin):
            break
    return Course(living, closes or living[-1] == 0.0, yearly, reached)
