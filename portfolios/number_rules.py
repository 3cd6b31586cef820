"""What the designs ask of the numbers in the extract's columns."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from .columns import ALWAYS, BY_NAME, COLUMNS, LARGEST_AMOUNT
from .designs import Design, Loan
from .reasons import Reason

Mask = npt.NDArray[np.bool_]

FREQUENCIES = (1, 2, 4, 12)
TWO_LIVES = ("second_birth_date", "lives")
"""Columns that contracts on two lives need."""

MONTH_TOLERANCE = 1e-6
"""How far a duration may lie from a whole number of months, in months."""


@dataclass(frozen=True)
class NumberRule:
    """What a number must be: in a range, perhaps a frequency or a duration; and which designs look at it."""

    column: str
    low: float
    high: float
    frequency: bool
    duration: bool
    products: tuple[bool, ...]

    def broken(self, numbers: npt.NDArray[np.float64], whole: bool) -> Mask:
        """Say of each number whether it breaks the rule; NaN does. whole: the type has no fractions."""
        fine: Mask = numbers >= self.low
        fine &= numbers <= self.high
        if self.frequency:
            fine &= _known_frequency(numbers)
        if self.duration and not whole:
            fine &= _whole_months(numbers)
        return np.logical_not(fine, out=fine)

    def reasons(self, numbers: npt.NDArray[np.float64], missing: Mask) -> npt.NDArray[np.uint8]:
        """Return for numbers that break the rule the first reason why; missing: which are not there."""
        outside = (numbers < self.low) | (numbers > self.high)
        negative = (numbers < 0) & (self.low >= 0)
        frequency = ~_known_frequency(numbers) & self.frequency
        order = [
            (Reason.NUMBER_MISSING, missing),
            (Reason.NUMBER_NOT_FINITE, ~np.isfinite(numbers)),
            (Reason.NUMBER_NEGATIVE, negative),
            (Reason.FREQUENCY_UNKNOWN, frequency),
            (Reason.NUMBER_OUT_OF_RANGE, outside),
        ]
        reasons = np.select([mask for _, mask in order], [reason for reason, _ in order], Reason.NOT_WHOLE_MONTHS)
        return reasons.astype(np.uint8)


def _known_frequency(numbers: npt.NDArray[np.float64]) -> Mask:
    known: Mask = numbers == FREQUENCIES[0]
    for frequency in FREQUENCIES[1:]:
        known |= numbers == frequency
    return known


def _whole_months(numbers: npt.NDArray[np.float64]) -> Mask:
    # An infinite number is out of range already; it need not warn here as well.
    with np.errstate(invalid="ignore", over="ignore"):
        months = numbers * 12
        months -= np.rint(months)
    whole: Mask = np.abs(months, out=months) <= MONTH_TOLERANCE
    return whole


def number_columns(designs: Iterable[Design]) -> list[str]:
    """Return the columns that designs use as numbers, in order of checking."""
    names = {name for design in designs for name in design.columns()}
    listed = [column.name for column in COLUMNS if column.name in names]
    return listed + sorted(names.difference(listed))


def needed_columns(designs: Iterable[Design], others: Iterable[str] = ()) -> tuple[str, ...]:
    """Return the columns that a run reads: those always needed, those of the designs, and others given."""
    designs = list(designs)
    pairs = TWO_LIVES if any(design.states == "two lives" for design in designs) else ()
    return tuple(dict.fromkeys([*ALWAYS, *pairs, *number_columns(designs), *others]))


def number_rules(designs: Sequence[Design]) -> list[NumberRule]:
    """Return what the designs ask of the numbers, in order of checking.

    A column that the registry does not list may be 0 to 120 where it is a duration, -0.5 to 1 where it is a
    rate of increase, and else 0 to the largest amount.
    """
    return [_rule(name, designs) for name in number_columns(designs)]


def _rule(name: str, designs: Sequence[Design]) -> NumberRule:
    streams = [stream for design in designs for stream in design.stream]
    frequency = any(stream.a_year == name for stream in streams)
    duration = any(name in (stream.from_, stream.to, stream.guarantee) for stream in streams)
    rate = any(stream.increase is not None and stream.increase.rate == name for stream in streams)
    rate |= any(stream.returns is not None and stream.returns.interest == name for stream in streams)
    rate |= any(isinstance(stream.decrease, Loan) and stream.decrease.loan == name for stream in streams)
    low, high = (-0.5, 1.0) if rate else (0.0, 120.0) if duration else (0.0, LARGEST_AMOUNT)
    column = BY_NAME.get(name)
    if column is not None:
        low = low if column.low is None else column.low
        high = high if column.high is None else column.high
    products = tuple(name in design.columns() for design in designs)
    return NumberRule(name, low, high, frequency, duration, products)
