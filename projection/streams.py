"""The records in which streams and policies reach the compiled loops, and the codes in them.

Every field is a number, so that one array of records holds the streams of every cell. A *segment* is what
streams of a cell have in common where they are paid at the same points in the same shape: a premium, the
commission on it, the expenses charged on it. It is summed once, and each part of the reserve takes its share.
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
BEGUN: Final = 4

OWN_DATES: Final = 0
BROKEN_YEAR: Final = 1
WHOLE_YEARS: Final = 2
LAST_YEAR: Final = 3

FIRST: Final = 0
SECOND: Final = 1
JOINT: Final = 2

NO_SECOND: Final = -1
NOBODY: Final = -2

BENEFITS: Final = 0
EXPENSES: Final = 1
PREMIUMS: Final = 2

LONGEST: Final = 12 * 152
"""Months that any curve covers: the highest age that a table may reach, in months, and a year to spare."""

WIDE: Final = LONGEST + 2
"""Months of a row of relative amounts."""

FOR_EVER: Final = 1 << 20
"""An end of a span or clip that never bites."""

SEGMENT = np.dtype(
    [
        ("account", "i8"),  # where its expected cash flows are gathered
        ("when", "i8"),  # ADVANCE ... THIRD_TERM
        ("before", "i8"),  # 1: paid before the lapses of the same point
        ("cover", "i8"),  # ALIVE ... BEGUN
        ("life", "i8"),  # FIRST ... JOINT: whose survival it depends on
        ("window", "i8"),  # OWN_DATES, or the part of a stream that Woolhouse's formula leaves or takes
        ("amount", "i8"),  # row of the money matrix; -1: 1
        ("factor", "f8"),  # times this
        ("power", "i8"),  # divided by (payments a year) to this power
        ("start", "i8"),  # row of the whole-number matrix: months
        ("end", "i8"),  # row of months; -1: for life
        ("period", "i8"),  # row: months between payments
        ("guarantee", "i8"),  # row of months; -1: none
        ("clock", "i8"),  # 0: the stream's start, 1: commencement
        ("relative", "i8"),  # place of its row of relative amounts by months of the clock
        ("changing", "i8"),  # row with the place of that row per policy; -1: the same for all
        ("largest", "f8"),  # largest relative amount at any time, without that of a row per policy
        ("calendar", "i8"),  # place of a row of relative amounts by calendar month; -1: none
        ("span_from", "i8"),  # payments whose relative month is at least this many months after the stream's start
        ("span_to", "i8"),  # ... and less than this many
        ("clip_from", "i8"),  # payments whose relative month is at least this many months after commencement
        ("clip_to", "i8"),  # ... and less than this many
        ("whole", "i8"),  # 1: its length must be a whole number of periods
        ("own", "i8"),  # 1: belongs to a stream of the design, which keeps the contract going
        ("benefits", "f8"),  # share of its sum that belongs to the value of benefits
        ("expenses", "f8"),  # ... of expenses and commission
        ("premiums", "f8"),  # ... of premiums
    ],
    align=True,
)

SURVIVAL = np.dtype(
    [
        ("living", "i8"),  # place of the row of survival at points 0, 1 ...
        ("over", "i8"),  # last point of the row
        ("yearly", "i8"),  # place of the rates of the years of age
        ("reached", "i8"),  # place of survival to the start of each of them
        ("years", "i8"),  # how many there are
        ("passed", "f8"),  # share of the first of them that has passed at commencement
        ("lasts", "i8"),  # place of the last point that counts beside survival to points 0, 1 ...
        ("closed", "i8"),  # 1: nobody is left at the end
    ],
    align=True,
)

CHAIN = np.dtype(
    [
        ("place", "i8"),  # place of the matrices of points 1, 2 ...
        ("over", "i8"),  # last point
        ("closed", "i8"),  # 1: nobody is left at the end
        ("states", "i8"),  # named states of the living
        ("moves", "i8"),  # moves between them, and to dead
    ],
    align=True,
)
"""A chain on named states. For each state in which a step begins there are rows over the points 1, 2 ...: the
probabilities of the states at the point, one row each, then the expected numbers of the moves until then."""

SOURCE = np.dtype([("begin", "i8"), ("end", "i8")])
"""Of which members a row of occupancy or moves is the sum: a range of the list of members.

Members are states before the lapses of a point, states after them, moves, and lapses, one behind the other.
"""

MOST_SOURCES: Final = 48
"""Sets of states and of moves that the streams of one plan may look at."""

LIFE = np.dtype(
    [
        ("living", "i8"),  # place of survival at point 0, in the pool or for both lives in the room to work in
        ("over", "i8"),  # last point of the row
        ("last", "i8"),  # last point that counts
        ("closed", "i8"),  # 1: nobody is left at the end
        ("alive", "f8"),  # survival to the valuation date
    ],
    align=True,
)
"""What a policy's streams need to know of a life, or of both together."""

POLICY = np.dtype(
    [
        ("k", "i8"),  # months passed at the valuation date
        ("part", "i8"),  # and part / whole of the next one
        ("whole", "i8"),
        ("shift", "i8"),  # calendar months from that of the valuation date to that of commencement
        ("segments", "i8"),  # first segment of its cell
        ("segments_end", "i8"),  # behind the last of them
        ("survival", "i8"),  # record of its survival, or of that of the first life, or of the only one left
        ("second", "i8"),  # record of that of the second life, NO_SECOND or NOBODY
        ("held", "i8"),  # place of persistency at g = 0; one more lies in front for g = -1
        ("dead", "i8"),  # place of the weight of deaths of the step that ends at g = 0
        ("lapsing", "i8"),  # place of the share that lapses at g = 0
        ("payment", "i8"),  # place of the discount factor of a payment at point k
        ("claim", "i8"),  # place of that of a death claim of the step that ends at k
        ("payment_accrued", "f8"),  # factor to all of the former, for the part of the month that has passed
        ("claim_accrued", "f8"),  # the same to the latter
        ("claim_shift", "i8"),  # calendar months from the end of a step to the payment of its death claims
        ("claim_first", "i8"),  # the same for the step in which the valuation date lies
        ("chain", "i8"),  # record of its chain on named states; -1: none
        ("state", "i8"),  # named state at the valuation date
        ("sources", "i8"),  # first source of its plan
        ("sources_end", "i8"),  # behind the last of them
        ("leaving", "i8"),  # bits of the states from which it may lapse
        ("keep", "i8"),  # place of the shares that lapse at g = 0, of those still there, where they depend on the state
    ],
    align=True,
)
