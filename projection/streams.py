"""The record in which a stream reaches the compiled loops, and the codes in it.

Every field is a number, so that one array of records holds the streams of every cell.
"""

from __future__ import annotations

from typing import Final

import numpy as np

ADVANCE: Final = 0
ARREARS: Final = 1
ONCE: Final = 2
DEATH: Final = 3
LAPSE: Final = 4
THIRD_TERM: Final = 5

ALIVE: Final = 0
CERTAIN: Final = 1
GUARANTEED: Final = 2
AFTER_GUARANTEE: Final = 3

OWN_DATES: Final = 0
BROKEN_YEAR: Final = 1
WHOLE_YEARS: Final = 2

BENEFITS: Final = 0
EXPENSES: Final = 1
PREMIUMS: Final = 2

LONGEST: Final = 12 * 152
"""Months that any curve covers: the highest age that a table may reach, in months, and a year to spare."""

FOR_EVER: Final = 1 << 20
"""An end of a span or clip that never bites."""

STREAM = np.dtype(
    [
        ("line", "i8"),  # row of the cash flow table
        ("part", "i8"),  # BENEFITS, EXPENSES or PREMIUMS
        ("when", "i8"),  # ADVANCE ... THIRD_TERM
        ("cover", "i8"),  # ALIVE ... AFTER_GUARANTEE
        ("window", "i8"),  # OWN_DATES, or the part of a stream that Woolhouse's formula leaves or takes
        ("amount", "i8"),  # row of the money matrix; -1: 1
        ("factor", "f8"),  # times this
        ("start", "i8"),  # row of the months matrix
        ("end", "i8"),  # row of the months matrix; -1: for life
        ("period", "i8"),  # row of the periods matrix: months between payments
        ("power", "i8"),  # the amount is divided by (payments a year) to this power
        ("guarantee", "i8"),  # row of the months matrix; -1: none
        ("clock", "i8"),  # 0: the stream's start, 1: commencement
        ("relative", "i8"),  # row of relative amounts by months of the clock; -1: level
        ("changing", "i8"),  # row of the matrix that holds the row of relative amounts per policy; -1: none
        ("calendar", "i8"),  # row of relative amounts by calendar month; -1: none
        ("span_from", "i8"),  # payments whose relative month is at least this many months after the stream's start
        ("span_to", "i8"),  # ... and less than this many
        ("clip_from", "i8"),  # payments whose relative month is at least this many months after commencement
        ("clip_to", "i8"),  # ... and less than this many
        ("whole", "i8"),  # 1: its length must be a whole number of periods
        ("own", "i8"),  # 1: a stream of the design, which keeps the contract going
    ],
    align=True,
)
