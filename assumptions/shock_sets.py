"""Sets of shocks: shocks one by one, grids, one at a time, key rates; and what they add up to as a figure of capital.

A set is dated: its ``effective`` and ``reference`` say which rules it follows, and it stays as it is when they change.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import product
from typing import Literal

from pydantic import Field, model_validator

from .basis import Basis
from .items import Item, Sourced
from .rules import Rule
from .shocking import need_same_basis
from .shocks import Change, Shock, Target, words


class NamedShock(Shock):
    """A shock of a set."""

    name: str = Field(min_length=1, description="name within the set")


class Axis(Target):
    """A change in several sizes."""

    amounts: list[float] = Field(min_length=1, description="how much, one after the other; 0 is 'no change'")

    def changes(self) -> list[Change]:
        """Return the change in each size."""
        keys = {"for_" if name == "for" else name for name in self.model_fields_set} - {"amounts"}
        held = {name: getattr(self, name) for name in keys}
        return [Change(**held, amount=amount) for amount in self.amounts]


class Grid(Sourced):
    """Every size of each change with every size of the others."""

    name: str = Field(min_length=1, description="name; its shocks are called 'name 1', 'name 2' ...")
    axis: list[Axis] = Field(min_length=1, max_length=4, description="the changes, the last one moving first")

    def shocks(self) -> Iterator[NamedShock]:
        """Yield the shocks, row by row."""
        for number, changes in enumerate(product(*(axis.changes() for axis in self.axis)), 1):
            yield _made(f"{self.name} {number}", list(changes), self.title)


class OneAtATime(Sourced):
    """Each size of each change by itself."""

    name: str = Field(min_length=1, description="name; its shocks are called 'name 1', 'name 2' ...")
    change: list[Axis] = Field(min_length=1, description="the changes")

    def shocks(self) -> Iterator[NamedShock]:
        """Yield the shocks in order."""
        changes = [change for axis in self.change for change in axis.changes()]
        for number, change in enumerate(changes, 1):
            yield _made(f"{self.name} {number}", [change], self.title)


class KeyRates(Sourced):
    """A shift of spot rates cut into tents, each at its full height at one maturity and 0 at the next ones.

    The first tent keeps its height before its maturity, the last one after. At every maturity they add up to the
    shift.
    """

    name: str = Field(min_length=1, description="name; its shocks are called 'name 1', 'name 2' ... by year")
    years: list[float] = Field(min_length=1, description="maturities of the tents in years, ascending")
    shift: float = Field(ge=-0.2, le=0.2, description="height of a tent; 0.01 is one point")

    @model_validator(mode="after")
    def _ascending(self) -> KeyRates:
        if any(later <= year for year, later in zip([0.0, *self.years], self.years, strict=False)):
            raise ValueError("'years' must be above 0 and ascend")
        return self

    def shocks(self) -> Iterator[NamedShock]:
        """Yield one shock for each tent."""
        for year in self.years:
            amounts = {other: self.shift if other == year else 0.0 for other in self._beside(year)}
            change = Change(what="interest", how="absolute", by_maturity=amounts)
            title = f"interest {10_000 * self.shift:+.10g} bp at key rate {year:g}"
            yield NamedShock(name=f"{self.name} {year:g}", title=title, change=[change])

    def _beside(self, year: float) -> list[float]:
        place = self.years.index(year)
        return self.years[max(0, place - 1) : place + 2]


class Leaving(Rule):
    """A share of the policies in force that leaves at once, on the valuation date, and is paid its surrender value."""

    name: str = Field(min_length=1, description="name within the set")
    share: float = Field(ge=0, le=1, description="share of the policies that leaves")


class Revision(Rule):
    """Benefits that rise at once, on the valuation date, for good."""

    name: str = Field(min_length=1, description="name within the set")
    share: float = Field(ge=-1, le=10, description="share by which the benefits rise")


class Risk(Item):
    """One figure of capital: the worst of some shocks."""

    name: str = Field(min_length=1, description="name in correlations")
    shocks: list[str] = Field(min_length=1, description="names of shocks of the set; the worst of them counts")
    counts: Literal["all policies", "where the reserve rises"] = Field(
        "all policies", description="whether falls of the reserve of some policies make up for rises of others"
    )


class Correlation(Item):
    """How two risks go together."""

    between: list[str] = Field(min_length=2, max_length=2, description="names of two risks")
    figure: float = Field(ge=-1, le=1, description="correlation")


class ShockSet(Sourced):
    """Shocks that are asked for together."""

    basis: str = Field(
        "", pattern="^([0-9a-f]{64})?$", description="digest of the basis that the set is made for; absent: any"
    )
    shock: list[NamedShock] = Field(default_factory=list, description="shocks one by one")
    grid: list[Grid] = Field(default_factory=list, description="every size of a change with every one of others")
    one_at_a_time: list[OneAtATime] = Field(default_factory=list, description="each size of each change by itself")
    key_rates: list[KeyRates] = Field(default_factory=list, description="a shift of spot rates cut into tents")
    leaving: list[Leaving] = Field(default_factory=list, description="policies that leave at once")
    revision: list[Revision] = Field(default_factory=list, description="benefits that rise at once")
    risk: list[Risk] = Field(default_factory=list, description="figures of capital")
    correlation: list[Correlation] = Field(
        default_factory=list, description="correlations between risks; those not named are 0"
    )

    @model_validator(mode="after")
    def _names_fit(self) -> ShockSet:
        shocks = [one.name for one in expanded(self)]
        names = [*shocks, *(one.name for one in self.leaving), *(one.name for one in self.revision)]
        _once(names, "shocks")
        risks = [risk.name for risk in self.risk]
        _once(risks, "risks")
        for risk in self.risk:
            for name in risk.shocks:
                if name not in names:
                    raise ValueError(f"risk '{risk.name}': there is no shock '{name}'; there are {', '.join(names)}")
        pairs = [" and ".join(sorted(one.between)) for one in self.correlation]
        _once(pairs, "correlations")
        for one in self.correlation:
            if one.between[0] == one.between[1]:
                raise ValueError(f"correlation: '{one.between[0]}' stands beside itself; name two risks")
            for name in one.between:
                if name not in risks:
                    raise ValueError(f"correlation: there is no risk '{name}'; there are {', '.join(risks) or 'none'}")
        return self

    @property
    def dated(self) -> str:
        """Title, date and reference in one line, as results print it."""
        day = f", rules of {self.effective.isoformat()}" if self.effective else ""
        return f"{self.title or 'untitled set of shocks'}{day}" + (f" ({self.reference})" if self.reference else "")

    def need(self, basis: Basis) -> None:
        """Raise WrongBasisError where the set, or one of its shocks, bears the digest of another basis."""
        need_same_basis(self.basis, basis, self.title or "set of shocks")
        for one in self.shock:
            need_same_basis(one.basis, basis, one.name_in_words)


def expanded(shocks: ShockSet) -> list[NamedShock]:
    """Return every shock of a set: those written out, then grids, one at a time, and key rates."""
    made = list(shocks.shock)
    several: list[Grid | OneAtATime | KeyRates] = [*shocks.grid, *shocks.one_at_a_time, *shocks.key_rates]
    return made + [shock for one in several for shock in one.shocks()]


def _made(name: str, changes: list[Change], title: str) -> NamedShock:
    said = ", ".join(words(change) for change in changes)
    if all(change.neutral for change in changes):
        said = "no change"
    return NamedShock(name=name, title=f"{title}: {said}" if title else said, change=changes)


def _once(names: list[str], what: str) -> None:
    for name in names:
        if names.count(name) > 1:
            raise ValueError(f"{what}: '{name}' is there {names.count(name)} times; give each its own name, once")
