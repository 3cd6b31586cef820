"""The moves of a basis: rates at which a policy goes from one named state to another."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field, field_validator, model_validator

from .items import Item
from .laws import Law
from .mortality import TableFile
from .rules import Rule

Figures = Literal["yearly probabilities", "monthly probabilities", "force"]

CERTAIN = 1e9
"""Force, a year, that stands for a move that is certain: nobody is left after any part of a step."""


class MoveRule(Rule):
    """Rates of one move for the policies that fit, with their adjustments.

    The figure that counts is multiple * figure + extra, for probabilities at most 1, with the table entered at
    the age at commencement plus ``added_years``.
    """

    table: str | TableFile | Law | None = Field(
        None, description="a file of rates by age, one table of it, or a law of mortality"
    )
    rate: float | None = Field(None, ge=0, le=1000, description="the same figure at every age, in place of a table")
    figures: Figures = Field(
        description="what the figures are: probabilities of a year or a month to make this move, or the force, a year"
    )
    multiple: float = Field(1.0, ge=0, le=1000, description="factor on every figure")
    added_years: int = Field(0, ge=-50, le=50, description="years added to the age before the table is entered")
    extra: float = Field(0.0, ge=0, le=1000, description="flat addition to every figure")
    close: bool = Field(
        False,
        description="where the table ends: death is certain in its last year, another move does not happen after it; "
        "otherwise a policy that outlives the table is an exception",
    )

    @field_validator("table", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        if isinstance(value, dict):
            return Law.model_validate(value) if "law" in value else TableFile.model_validate(value)
        return value

    @model_validator(mode="after")
    def _complete(self) -> MoveRule:
        if (self.table is None) == (self.rate is None):
            raise ValueError("a rule of a move needs either 'table' or 'rate'")
        if self.figures != "force" and self.rate is not None and self.rate > 1:
            raise ValueError(f"the probability {self.rate:g} lies above 1; say figures = 'force' if it is a force")
        if self.figures == "monthly probabilities" and isinstance(self.table, Law):
            raise ValueError("a law gives yearly probabilities or a force, not monthly probabilities")
        if self.rate is not None and (self.close or self.added_years):
            raise ValueError("a rate for every age takes no 'close' and no 'added_years'")
        return self

    @property
    def never(self) -> bool:
        """Whether the move never happens, whatever the age."""
        return self.extra == 0 and (self.rate == 0 or self.multiple == 0)

    def adjusted(self, figure: float) -> float:
        """Return the figure that counts for one of the table."""
        counts = self.multiple * figure + self.extra
        return counts if self.figures == "force" else min(1.0, counts)


class Move(Item):
    """A move from one state, or from any of several, to another; ``dead`` is the state of the dead."""

    from_: str | list[str] = Field(alias="from", description="state that is left, or several")
    to: str = Field(description="state that is entered")
    rule: list[MoveRule] = Field(min_length=1, description="read top to bottom, the first that fits wins")

    @property
    def pairs(self) -> list[tuple[str, str]]:
        """The moves, from each of the states on its own."""
        return [(state, self.to) for state in ([self.from_] if isinstance(self.from_, str) else self.from_)]

    @property
    def place(self) -> str:
        """The part of the basis, for messages."""
        states = self.from_ if isinstance(self.from_, str) else " or ".join(self.from_)
        return f"move from {states} to {self.to}"

    @model_validator(mode="after")
    def _apart(self) -> Move:
        for begin, end in self.pairs:
            if begin == end:
                raise ValueError(f"a move from '{begin}' to itself is no move")
            if begin == "dead":
                raise ValueError("nobody leaves 'dead'")
        return self
