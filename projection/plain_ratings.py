"""A life's own rating, in ordinary Python: a multiple, added years and a flat extra, each for a time."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any, NamedTuple

from assumptions.mortality import STANDARD, Fractions, Rating

from .plain_faults import NotValued
from .plain_life import Months, Survival, YearlyRates


class Piece(NamedTuple):
    """Time from ``begin`` (years since commencement), in which a rating holds; as far as the next piece."""

    begin: int
    rating: Rating


def pieces_of(policy: Mapping[str, Any], life: str) -> list[Piece]:
    """Return the pieces of time of a life's rating; life: 'first' or 'second'.

    Raises NotValued for a value out of range, or one that should be whole and is not.
    """
    of = "second_" if life == "second" else ""
    multiple = _number(policy, f"{of}rating_multiple", 0, 20)
    multiple_years = _number(policy, f"{of}rating_multiple_years", 0, 120, whole=True)
    age = _number(policy, f"{of}rating_age", -40, 40, whole=True)
    age_years = _number(policy, f"{of}rating_age_years", 0, 120, whole=True)
    extra = _number(policy, f"{of}rating_extra", 0, 500)
    extra_years = _number(policy, f"{of}rating_extra_years", 0, 120, whole=True)
    times = [
        time
        for what, time in ((multiple, multiple_years), (age, age_years), (extra, extra_years))
        if what is not None and time is not None
    ]

    def holds(what: float | None, time: float | None, year: int) -> bool:
        return what is not None and (time is None or year < time)

    pieces: list[Piece] = []
    for year in sorted({0, *(int(time) for time in times)}):
        rating = Rating(
            multiple=float(multiple or 0) if holds(multiple, multiple_years, year) else 1.0,
            added_years=int(age or 0) if holds(age, age_years, year) else 0,
            extra=float(extra or 0) / 1000 if holds(extra, extra_years, year) else 0.0,
        )
        if not pieces or pieces[-1].rating != rating:
            pieces.append(Piece(year, rating))
    return pieces


def _number(policy: Mapping[str, Any], column: str, low: float, high: float, whole: bool = False) -> float | None:
    value = policy.get(column)
    if value is None:
        return None
    if not math.isfinite(value):
        raise NotValued("amount not a number", column, value, "a finite number")
    if not low <= value <= high:
        raise NotValued("amount out of range", column, value, f"{low:g} to {high:g}")
    if whole and value != int(value):
        raise NotValued("number not whole", column, value, "years of a rating are whole")
    return float(value)


def survival_of(pieces: list[YearlyRates], fractions: Fractions) -> Survival:
    """Return the survival of a life from the rates of each piece of time.

    Raises NotValued where some piece lacks a rate from commencement to the end of the table.
    """
    for rates in pieces if len(pieces) > 1 or pieces[0].rating != STANDARD else ():
        entered = rates.entry + rates.rule.added_years + rates.rating.added_years
        for year in range(math.ceil(rates.rates.final_age - entered)):
            rates._replace(begun=0).rate(year)
    lives = [(rates.begun, Survival(rates, fractions)) for rates in pieces]
    return lives[0][1] if len(lives) == 1 else RatedSurvival(lives)


class RatedSurvival(Survival):
    """Survival from piece to piece: each begins with who is left, at the age reached, with rates of its own."""

    def __init__(self, lives: list[tuple[int, Survival]]) -> None:
        super().__init__(lives[0][1].rates, lives[0][1].fractions)
        self.lives = lives
        self._ends: list[int | None] = [*(begin for begin, _ in lives[1:]), None]

    @property
    def pieces(self) -> list[YearlyRates]:
        """The rates of each piece of time."""
        return [life.rates for _, life in self.lives]

    @property
    def yearly(self) -> list[float]:
        """The rates used so far by year of age, where a piece ends within one those of the earlier piece."""
        used: list[float] = []
        for (begin, life), end in zip(self.lives, self._ends, strict=True):
            # With an offset, the year of age at the beginning of a piece belongs to the piece before.
            first = 0 if begin == 0 or life.rates.offset == 0 else 1
            last = len(life.yearly) if end is None else end - begin + (life.rates.offset > 0)
            if begin + first > len(used):
                break
            used += life.yearly[first:last]
        return used

    def at(self, months: Months) -> float:
        """Return L, the probability at commencement to live ``months`` months (whole or a fraction)."""
        found = 1.0
        for (begin, life), end in zip(self.lives, self._ends, strict=True):
            last = end is None or months <= 12 * end
            found *= life.at((months if last else 12 * (end or 0)) - 12 * begin)
            if last or found == 0:
                break
        return found

    def end(self) -> int:
        """Return the first point at which nobody is left. Raises NotValued where the table is not closed."""
        for (begin, life), end in zip(self.lives, self._ends, strict=True):
            over = life.end_before(None if end is None else 12 * (end - begin))
            if over is not None:
                return 12 * begin + over
        raise AssertionError("the last piece has no end")

    def rate_before(self, point: int) -> float | None:
        """Return the yearly rate in force just before a point."""
        for (begin, life), end in zip(self.lives, self._ends, strict=True):
            if end is None or point <= 12 * end:
                return life.rate_before(point - 12 * begin)
        return None

    def years(self) -> float:
        """Years from commencement to where the rates end."""
        for (begin, life), end in zip(self.lives, self._ends, strict=True):
            years = life.years()
            if end is None or begin + years < end:
                break
        return begin + max(0.0, years)
