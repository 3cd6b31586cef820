"""Shocks: small documents that say how one basis becomes another.

A shock is a title, its intent in words, and a list of changes. Each change says what changes (mortality, lapse,
interest ...), for which policies, ages, durations, calendar years or maturities, how (by an amount, by a share, or to
an amount), how much, from when and for how long. They are made one after the other. An empty list is 'no change'.
"""

from __future__ import annotations

from typing import Literal

from pydantic import Field, field_validator, model_validator

from .adjustments import ALWAYS, How, Span
from .items import Sourced
from .rules import Band, Rule

What = Literal["mortality", "improvement", "lapse", "interest", "expenses", "inflation", "disability", "recovery"]
Part = Literal["mortality", "lapse", "interest", "expenses", "disability"]

PARTS: dict[str, Part] = {
    "mortality": "mortality",
    "improvement": "mortality",
    "lapse": "lapse",
    "interest": "interest",
    "expenses": "expenses",
    "inflation": "expenses",
    "disability": "disability",
    "recovery": "disability",
}
"""The part of a basis that each change lies in."""

_RATES = {"for", "durations", "calendar_years", "from_months", "for_months", "counted_by", "at_most"}
_KNOWN: dict[str, set[str]] = {
    "mortality": {"ages", *_RATES},
    "improvement": {"for", "ages", "calendar_years"},
    "lapse": _RATES,
    "interest": {"for", "maturities", "by_maturity", "rates", "at_least"},
    "expenses": {"for", "items"},
    "inflation": {"items", "from_months", "for_months"},
    "disability": {"ages", *_RATES},
    "recovery": {"ages", *_RATES},
}
"""Keys that go with each change, beside what, how and how much."""


class Target(Rule):
    """What a change is of: everything but how much."""

    what: What = Field(description="what changes")
    how: How = Field(description="by an amount, by a share of what is there, or to an amount")
    ages: Band | None = Field(None, description="ages at which the rates are entered, and the years since; absent: all")
    durations: Band | None = Field(None, description="completed years since commencement, from 0; absent: all")
    calendar_years: Band | None = Field(
        None, description="calendar years in which a year of the rates begins; of 'improvement', the years to which it "
        "leads, as far as they lie after the valuation date's; absent: all"
    )  # fmt: skip
    maturities: Band | None = Field(None, description="maturities in years from the valuation date; absent: all")
    from_months: int = Field(0, ge=0, le=1200, description="months from the valuation date until the change begins")
    for_months: int | None = Field(None, ge=1, le=1200, description="months that it lasts; absent: for good")
    counted_by: Literal["months", "quarters", "years"] = Field(
        "months", description="how closely 'from_months' and 'for_months' look at when a year of the rates begins: a "
        "month has rows of survival of its own, many in a large portfolio; quarters a third of them, years a twelfth"
    )  # fmt: skip
    rates: Literal["spot", "forward"] = Field(
        "spot", description="whether spot rates change at their maturities, or forward rates year by year ('interest')"
    )
    at_least: float | None = Field(None, ge=0, le=1, description="least change of a rate of 'interest', upwards")
    at_most: float | None = Field(None, gt=0, le=1, description="greatest change of a yearly rate, either way")
    items: list[str] | None = Field(None, min_length=1, description="names of items of expense; absent: all")

    @model_validator(mode="after")
    def _keys_go_together(self) -> Target:
        given = {"for" if name == "for_" else name for name in self.model_fields_set}
        given -= {"title", "effective", "reference", "what", "how", "amount", "amounts"}
        for key in sorted(given - _KNOWN[self.what]):
            known = ", ".join(sorted(_KNOWN[self.what]))
            raise ValueError(f"'{key}' does not go with a change of {self.what}; with it go {known}")
        for key in ("ages", "durations", "calendar_years", "maturities"):
            band: Band | None = getattr(self, key)
            if band is not None and not all(isinstance(x, int | float | None) for x in (band.from_, band.to)):
                raise ValueError(f"'{key}' takes numbers")
        return self

    @property
    def part(self) -> Part:
        """The part of a basis that the change lies in."""
        return PARTS[self.what]


class Change(Target):
    """One change of a basis: what, for which policies and when, how, and how much."""

    amount: float | None = Field(
        None, description="how much: 0.01 is one point or 1 %, a 'relative' 0.15 is 15 % more, a 'replaced' 0.03 is 3 %"
    )
    by_maturity: dict[float, float] | None = Field(
        None, min_length=1, description="how much by maturity in years, linear between and held outside ('interest')"
    )

    @field_validator("by_maturity", mode="before")
    @classmethod
    def _numbers(cls, value: object) -> object:
        # TOML keys are text; maturities are numbers.
        return {float(key): amount for key, amount in value.items()} if isinstance(value, dict) else value

    @model_validator(mode="after")
    def _in_range(self) -> Change:
        if (self.amount is None) == (self.by_maturity is None):
            raise ValueError("a change needs one of 'amount' and 'by_maturity'")
        for amount in self.amounts:
            low, high = _range(self.what, self.how)
            if not low <= amount <= high:
                raise ValueError(
                    f"{self.what}, {self.how}: {amount:g} does not lie between {low:g} and {high:g}; "
                    "1 % and 100 basis points are 0.01"
                )
        return self

    @property
    def amounts(self) -> list[float]:
        """The amounts that are stated."""
        return [self.amount] if self.amount is not None else list((self.by_maturity or {}).values())

    @property
    def neutral(self) -> bool:
        """Whether nothing changes, whatever the basis."""
        return self.how != "replaced" and not any(self.amounts) and not self.at_least


def _range(what: str, how: str) -> Span:
    if what == "expenses":
        return (-1.0, 100.0) if how == "relative" else (-1e9 if how == "absolute" else 0.0, 1e9)
    if how == "relative":
        return (-1.0, 100.0)
    if how == "absolute":
        return (-1.0, 1.0)
    return (0.0, 1.0) if what in ("mortality", "lapse", "disability", "recovery") else (-0.49, 1.0)


def span(band: Band | None) -> Span:
    """Return a band of numbers as a pair, open ends without limit."""
    if band is None:
        return ALWAYS
    low, high = band.from_, band.to
    return (
        ALWAYS[0] if low is None else float(low),  # type: ignore[arg-type]
        ALWAYS[1] if high is None else float(high),  # type: ignore[arg-type]
    )


class Shock(Sourced):
    """What becomes of a basis, and why one asks."""

    intent: str = Field("", description="what the shock is meant to show, in words")
    basis: str = Field(
        "", pattern="^([0-9a-f]{64})?$", description="digest of the basis that it is made for; absent: any"
    )
    change: list[Change] = Field(default_factory=list, description="changes, one after the other; none: no change")

    @property
    def name_in_words(self) -> str:
        """The title, or the changes in words."""
        return self.title or ", ".join(words(one) for one in self.change) or "no change"


def touched(shock: Shock) -> frozenset[Part]:
    """Return the parts of a basis that a shock may change; the others are the same objects in the shocked basis."""
    return frozenset(change.part for change in shock.change if not change.neutral)


def words(change: Change) -> str:
    """Say a change in words: 'interest -100 bp', 'mortality +15 %', 'lapse at 3 %'."""
    said = f"{change.what} {_amount(change)}"
    if change.rates == "forward":
        said = f"forward {said}"
    for key, name in (("ages", "ages"), ("durations", "durations"), ("calendar_years", "years"), ("maturities", "y")):
        band: Band | None = getattr(change, key)
        if band is not None:
            low, high = ("" if one is None else f"{one:g}" for one in (band.from_, band.to))
            said += f", {name} {f'from {low} ' if low else ''}{f'to below {high}' if high else ''}".rstrip()
    if change.at_least:
        said += f", at least {10_000 * change.at_least:g} bp"
    if change.at_most:
        said += f", at most {100 * change.at_most:g} points"
    if change.from_months:
        said += f", from month {change.from_months}"
    if change.for_months:
        said += f", for {change.for_months} months"
    if change.for_:
        said += f", where {' and '.join(_condition(column, one) for column, one in change.for_.items())}"
    return said


def _amount(change: Change) -> str:
    if change.by_maturity is not None:
        return f"{change.how} by maturity"
    amount = change.amount or 0.0
    if change.neutral:
        return "unchanged"
    money = change.what == "expenses" and change.how != "relative"
    if change.how == "replaced":
        return f"at {amount:g}" if money else f"at {100 * amount:g} %"
    if change.how == "relative":
        return f"{100 * amount:+.10g} %"
    if money:
        return f"{amount:+g}"
    return f"{10_000 * amount:+.10g} bp" if change.what == "interest" else f"{100 * amount:+.10g} points"


def _condition(column: str, condition: object) -> str:
    if isinstance(condition, Band):
        ends = (("from", condition.from_), ("to below", condition.to))
        return f"{column} {' '.join(f'{word} {end}' for word, end in ends if end is not None)}"
    members = condition if isinstance(condition, list) else [condition]
    return f"{column} is {' or '.join(str(member) for member in members)}"
