"""Forces of the moves of a chain, step by step, from their rules and the age at commencement.

A step is cut where a birthday lies in it, if a table of whole ages is entered at an exact age, into a part before and
one after; else it is one part. Within a part the figures of tables stay the same.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from assumptions.laws import Law
from assumptions.mortality import Rates
from assumptions.moves import CERTAIN, MoveRule
from portfolios.named_states import DEAD

from .documents import DocumentError

Row = NDArray[np.float64]
Whole = NDArray[np.int64]


class NoRates(ValueError):  # noqa: N818  (a verdict on an age, not a fault of the program)
    """Rates that do not cover an age."""


@dataclass(frozen=True)
class Rated:
    """The moves of a model with their rules and rates, from an age at commencement, in years.

    pairs, rules, rates: one each per move; a rate for every age has no rates.
    """

    states: tuple[str, ...]
    pairs: list[tuple[str, str]]
    rules: list[MoveRule]
    rates: list[Rates | None]
    age: float

    @property
    def passed(self) -> float:
        """Part of the year of age that has passed at commencement, where some table is entered at whole ages."""
        whole = any(rates is not None and rates.whole_ages_only for rates in self.rates)
        return self.age % 1 if whole else 0.0

    @property
    def begins(self) -> list[int]:
        """Position of the state that each move leaves."""
        return [self.states.index(begin) for begin, _ in self.pairs]

    @property
    def ends(self) -> list[int]:
        """Position of the state that each move enters; behind the last for dead."""
        return [(*self.states, DEAD).index(end) for _, end in self.pairs]

    def years(self, most: int) -> tuple[int, bool]:
        """Return for how many years from commencement the rates reach, and whether nobody is left then.

        Raises NoRates for an age below a table or beyond it.
        """
        open_ends: list[int] = [most]
        closed: dict[str, list[int]] = {state: [] for state in self.states}
        for (begin, end), rule, rates in zip(self.pairs, self.rules, self.rates, strict=True):
            if rates is None:
                continue
            entered = self.age + rule.added_years
            if np.floor(entered) < rates.first_age:
                raise NoRates(f"age {entered:g} lies below {rates.first_age}")
            left = rates.final_age - entered
            if not (rule.close or rates.closed):
                open_ends.append(int(np.floor(left)))
            elif end == DEAD:
                closed[begin].append(int(np.ceil(left)))
        reached = min(open_ends)
        if reached <= 0:
            raise NoRates(f"age {self.age:g} lies beyond the tables")
        if all(closed.values()):
            last = max(min(ends) for ends in closed.values())
            if last <= 0:
                raise NoRates(f"age {self.age:g} lies beyond the tables")
            if last <= reached:
                return last, True
        return reached, False

    def widths(self, months: Whole, a_year: int) -> tuple[Row, Row]:
        """Return the two parts, in years, of the steps that start at some points; the second where a birthday lies."""
        start = self.passed + months / 12
        length = 1 / a_year
        before = np.where(self.passed > 0, np.minimum(np.floor(start) + 1 - start, length), length)
        after = length - before
        return np.where(after < 1e-12, length, before), np.where(after < 1e-12, 0.0, after)

    def forces(self, months: Whole, after: bool) -> Row:
        """Return the forces (step, move) at the start of a part of the steps that start at some points."""
        year = (self.passed + months / 12).astype(np.int64) + after if self.passed else months // 12
        figures = np.zeros((len(months), len(self.rules)))
        for place in range(len(self.rules)):
            figures[:, place] = self.figures(place, months, year)
        return self._as_forces(figures)

    def figures(self, place: int, months: Whole, year: Whole) -> Row:
        """Return adjusted figures of a move, CERTAIN where it is certain since its table closes.

        months: points at which steps start; year: years of age completed since the whole age at commencement.
        """
        rule, rates = self.rules[place], self.rates[place]
        if rates is None:
            return np.full(len(months), rule.adjusted(float(rule.rate or 0.0)))
        entered = self.age + rule.added_years
        if rates.whole_ages_only:
            entered, since = float(np.floor(entered)), year
        else:
            since = months // 12
        last = int(np.ceil(rates.final_age - entered)) - (1 if self.pairs[place][1] == DEAD else 0)
        ending = rule.close or rates.closed
        # Beyond the end of an open table there are steps without a second part only.
        known = min(last if ending else int(rates.final_age - entered), int(since.max(initial=0)) + 1)
        if isinstance(rates, Law) and rule.figures == "force":
            source = np.array([rates.force(entered + month / 12, month / 12) for month in months])
            found = np.array([rule.adjusted(figure) for figure in source])
        else:
            try:
                source = np.array([rates.rate(entered, duration) for duration in range(known)] or [0.0])
            except ValueError as error:
                raise NoRates(str(error)) from error
            found = np.array([rule.adjusted(figure) for figure in source])[np.minimum(since, max(0, known - 1))]
        if not ending:
            return np.asarray(found)
        return np.where(since >= last, CERTAIN if self.pairs[place][1] == DEAD else 0.0, found)

    def _as_forces(self, figures: Row) -> Row:
        forces = figures.copy()
        for kind, a_year in (("yearly probabilities", 1), ("monthly probabilities", 12)):
            for state, name in enumerate(self.states):
                mine = [
                    place
                    for place, rule in enumerate(self.rules)
                    if rule.figures == kind and self.begins[place] == state
                ]
                if not mine:
                    continue
                closing = np.max(figures[:, mine], axis=1) >= CERTAIN
                given: Row = np.where(closing[:, None], 0.0, figures[:, mine])
                total = given.sum(axis=1)
                if (total > 1 + 1e-9).any():
                    raise DocumentError(
                        f"moves: the {kind} of leaving '{name}' add up to {total.max():g} from age {self.age:g}; "
                        "they may reach 1"
                    )
                leaving = total >= 1 - 1e-15
                force = np.where(leaving, CERTAIN, -a_year * np.log1p(-np.where(leaving, 0.0, total)))
                forces[:, mine] = force[:, None] * given / np.where(total > 0, total, 1.0)[:, None]
        # In the year of certain death nothing else happens.
        for state in range(len(self.states)):
            mine = [place for place, begin in enumerate(self.begins) if begin == state]
            if mine:
                chosen: Row = figures[:, mine]
                certain: Row = np.where(chosen >= CERTAIN, CERTAIN, 0.0)
                forces[:, mine] = np.where(certain.max(axis=1)[:, None] > 0, certain, forces[:, mine])
        return forces

    def smooth(self, place: int) -> Law | None:
        """Return the law whose force a move has at every moment, if it has one."""
        rates = self.rates[place]
        return rates if isinstance(rates, Law) and self.rules[place].figures == "force" else None
