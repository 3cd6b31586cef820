"""States that the lives of a contract may be in, and the words of a design for sets of them.

On one life: alive. On two: both live, the first only, or the second only. A stream is paid while the contract is
in one of a set of states; a death benefit is paid when it leaves a set that nobody enters again. When nobody is
left, only what is certain or guaranteed is still paid.
"""

from __future__ import annotations

from typing import Final

ALIVE: Final = "alive"
BOTH: Final = "both"
FIRST_ONLY: Final = "first only"
SECOND_ONLY: Final = "second only"
NOBODY: Final = "nobody"

States = frozenset[str]

WHILE: dict[str, States] = {
    "alive": frozenset({ALIVE}),
    "both": frozenset({BOTH}),
    "first": frozenset({BOTH, FIRST_ONLY}),
    "second": frozenset({BOTH, SECOND_ONLY}),
    "either": frozenset({BOTH, FIRST_ONLY, SECOND_ONLY}),
    "first only": frozenset({FIRST_ONLY}),
    "second only": frozenset({SECOND_ONLY}),
}
"""What a stream is paid while: the states that the word stands for. The first is for one life, the others for two."""

LEFT_ON: dict[str, States] = {
    "death": WHILE["alive"],
    "first death": WHILE["both"],
    "second death": WHILE["either"],
    "death of first": WHILE["first"],
    "death of second": WHILE["second"],
}
"""What a death benefit is paid on: the states that are left then."""

LIVES: dict[str, str] = {"both": BOTH, "first": FIRST_ONLY, "second": SECOND_ONLY, "none": NOBODY}
"""Values of the extract's column 'lives': the state at the valuation date of a contract on two lives.

On one life all of them but 'none' stand for being alive.
"""

EARLIER: dict[str, States] = {
    ALIVE: frozenset({ALIVE}),
    BOTH: frozenset({BOTH}),
    FIRST_ONLY: frozenset({BOTH, FIRST_ONLY}),
    SECOND_ONLY: frozenset({BOTH, SECOND_ONLY}),
    NOBODY: frozenset({ALIVE, BOTH, FIRST_ONLY, SECOND_ONLY}),
}
"""The states that a contract may have been in before, given the one at the valuation date."""
