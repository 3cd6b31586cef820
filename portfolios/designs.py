"""Product designs: documents of payment streams hung on states.

A stream is one line of money. It is paid *while* a state lasts or *on* a move, from one duration to another,
so many times a year, in advance or arrears, as a relative pattern times one amount per policy.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import date
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationInfo, field_validator, model_validator

from .returns import Returns, check_design, check_stream, looked_back_at
from .states import LEFT_ON, WHILE


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, strict=True)


class AtAge(_Part):
    """The first monthly due date on or after a birthday."""

    age: int = Field(ge=0, le=130, description="age in whole years")


class AfterGuarantee(_Part):
    """The end of the guarantee of another stream."""

    after: str = Field(description="name of a stream with a guarantee")


class Share(_Part):
    """One piece of a pattern: a relative amount for so many years; the last piece may run on."""

    years: int | None = Field(None, ge=1, le=120, description="length of the piece in years; absent: for ever")
    share: float = Field(ge=0, description="relative amount")


class Increase(_Part):
    """Yearly increase of a stream's relative amount on each anniversary of its clock, or in a calendar month."""

    rate: float | str | None = Field(None, description="yearly rate, or the extract column that holds it")
    index: str | None = Field(None, description="in place of 'rate': name of an index of the basis")
    share: float = Field(1.0, ge=0, le=10, description="factor on the index's rate")
    plus: float = Field(0.0, ge=-0.5, le=0.5, description="added to the index's rate, after 'share'")
    floor: float | None = Field(None, ge=-0.5, le=1, description="least rate of an increase by index")
    cap: float | None = Field(None, ge=-0.5, le=1, description="largest rate of an increase by index")
    kind: Literal["compound", "simple"] = Field("compound", description="on the last amount or on the first")
    month: int | None = Field(
        None,
        ge=1,
        le=12,
        description="calendar month of the increases, which hold for payments from that month on; absent: the "
        "anniversaries of the clock",
    )
    amount: Literal["at its start", "at the valuation date"] | None = Field(
        None,
        description="which amount is given: before any increase, or with all increases up to the valuation date; "
        "absent: 'at its start' with 'rate', 'at the valuation date' with 'index', which knows no other",
    )

    @model_validator(mode="after")
    def _one_form(self) -> Increase:
        if (self.rate is None) == (self.index is None):
            raise ValueError("an increase needs one of 'rate' and 'index'")
        if self.index is None:
            _none_of(self.model_fields_set, "whose increase has no 'index'", "share", "plus", "floor", "cap")
        elif self.amount == "at its start":
            raise ValueError("an increase by 'index' needs the amount at the valuation date; past rates are not known")
        if self.floor is not None and self.cap is not None and self.floor > self.cap:
            raise ValueError(f"floor {self.floor} lies above cap {self.cap}")
        return self

    @property
    def current(self) -> bool:
        """Whether the amount given holds the increases up to the valuation date."""
        return self.index is not None or self.amount == "at the valuation date"

    @property
    def needs_calendar(self) -> bool:
        """Whether the increases depend on calendar time."""
        return self.current or self.month is not None


class Loan(_Part):
    """A fall like the balance of a loan that is paid off in level instalments from a stream's start to its end."""

    loan: float | str = Field(description="effective yearly rate of the loan, -0.5 to 1, or the extract column of it")
    instalments: Literal["monthly", "yearly"] = Field("monthly", description="how often the loan is paid off")

    @field_validator("loan")
    @classmethod
    def _in_range(cls, rate: float | str) -> float | str:
        if not isinstance(rate, str) and not -0.5 <= rate <= 1:
            raise ValueError(f"the rate {rate} of a loan is outside -0.5 to 1")
        return rate


Duration = float | str | AtAge
Start = Duration | AfterGuarantee
Kind = Literal["premium", "benefit", "expense", "commission"]
While = Literal["alive", "both", "either", "first", "second", "first only", "second only", "certain"]
On = Literal["death", "first death", "second death", "death of first", "death of second", "lapse"]


class Stream(_Part):
    """One line of money of a contract."""

    name: str = Field(min_length=1, description="name in cash flows and reports")
    kind: Kind | None = Field(
        None,
        description="part of the reserve that it belongs to; absent: 'premium' if the direction is in, else 'benefit'",
    )
    for_: dict[str, str | list[str]] = Field(
        default_factory=dict,
        alias="for",
        description="text columns of the extract and the values, or lists of them, of the policies that have this "
        "stream; absent: every policy",
    )
    direction: Literal["in", "out"] | None = Field(None, description="whether the office receives or pays it")
    amount: float | str | None = Field(
        None, description="an extract column or a number: a year for payments while a state lasts, else each time"
    )
    share: float = Field(1.0, ge=0, le=1000, description="factor on the amount")
    returns: Returns | None = Field(
        None, description="replaces 'amount' on a move or once: what another stream has paid up to then"
    )
    less: str | None = Field(
        None,
        description="name of another stream: on a move or once, the amount less what that stream has paid up to then, "
        "and nothing from when it has paid as much",
    )
    proportion: str | None = Field(
        None,
        description="replaces 'amount' on a death: name of a stream paid in arrears, of whose instalment the part for "
        "the time since its last date is paid",
    )
    of: str | None = Field(
        None,
        description="name of another stream: paid whenever that one pays, as a share of it; replaces amount and dates",
    )
    while_: While | None = Field(
        None,
        alias="while",
        description="paid as long as the policy is in force and the life lives, or for certain; on two lives: as long "
        "as both live, either, the first (whether or not the second lives), the second, or one of them only",
    )
    on: On | None = Field(
        None, description="paid on this move; 'death' is for one life, the others with 'death' are for two"
    )
    from_: Start = Field(
        0.0,
        alias="from",
        description='years from commencement to its start: a number, a column, { age = x }, or { after = "name" } '
        "when the guarantee of the stream of that name ends",
    )
    to: Duration | None = Field(None, description="years from commencement to its end; absent: for life")
    a_year: int | str = Field(1, description="payments a year, 1, 2, 4 or 12: a number or a column")
    paid: Literal["advance", "arrears", "once"] = Field(
        "advance", description="at the start or the end of each period, or a single time at 'from'"
    )
    guarantee: float | str | None = Field(
        None, description="years from its start for which it is paid for certain if the life lives at its start"
    )
    pattern: list[Share] | None = Field(
        None, min_length=1, description="relative amounts by years of the stream's clock"
    )
    increase: Increase | None = Field(None, description="yearly increase")
    decrease: Literal["yearly", "monthly"] | Loan | None = Field(
        None,
        description="falls from 1 at its start to nothing at its end: in equal steps, or like the balance of a loan, "
        "{ loan = 0.05 }",
    )
    clock: Literal["stream", "commencement"] = Field(
        "stream", description="from when pattern and increase count their years"
    )
    payments: Literal["at their dates", "Woolhouse 2", "Woolhouse 3"] = Field(
        "at their dates", description="valued one by one, or by Woolhouse's formula with two or three terms"
    )

    @field_validator("a_year")
    @classmethod
    def _frequency(cls, value: int | str) -> int | str:
        if isinstance(value, int) and value not in (1, 2, 4, 12):
            raise ValueError(f"{value} payments a year are not known; the choice is 1, 2, 4 and 12")
        return value

    @field_validator("decrease", mode="before")
    @classmethod
    def _loan(cls, value: Any) -> Any:
        return Loan.model_validate(value) if isinstance(value, dict) else value

    @field_validator("from_", "to", mode="before")
    @classmethod
    def _one_kind(cls, value: Any, info: ValidationInfo) -> Any:
        if not isinstance(value, dict):
            return value
        if "after" not in value:
            return AtAge.model_validate(value)
        if info.field_name == "to":
            raise ValueError("only 'from' may be 'after' another stream's guarantee")
        return AfterGuarantee.model_validate(value)

    @model_validator(mode="after")
    def _complete(self) -> Stream:
        given = self.model_fields_set
        if self.of is not None:
            extra = sorted(given - {"name", "kind", "direction", "of", "share", "pattern", "clock", "for_"})
            if extra:
                raise ValueError(f"a stream paid as a share 'of' another takes no '{extra[0].rstrip('_')}'")
            return self
        if self.direction is None or (self.amount is None and self.returns is None and self.proportion is None):
            raise ValueError("a stream needs 'direction' and 'amount', or 'of'")
        if (self.while_ is None) == (self.on is None):
            raise ValueError("a stream needs one of 'while' and 'on'")
        if self.on is not None:
            _none_of(given, f"paid on {self.on}", "a_year", "paid", "guarantee", "payments")
        if self.paid == "once":
            _none_of(given, "paid once", "to", "a_year", "guarantee", "decrease", "payments")
        if self.decrease is not None and self.increase is not None and self.increase.needs_calendar:
            raise ValueError("an increase by calendar time takes no 'decrease' beside it")
        if self.decrease is not None and self.to is None:
            raise ValueError("a decrease to nothing needs 'to'")
        if self.while_ == "certain" and self.to is None and self.paid != "once":
            raise ValueError("a stream paid for certain needs 'to'")
        if self.pattern and any(piece.years is None for piece in self.pattern[:-1]):
            raise ValueError("only the last piece of a pattern may leave out 'years'")
        if self.guarantee is not None and self.while_ in (None, "certain"):
            raise ValueError("a guarantee needs a stream paid while alive")
        if self.payments != "at their dates" and (self.guarantee is not None or self.while_ != "alive"):
            raise ValueError(f"{self.payments} needs a stream paid while alive, without a guarantee")
        if self.returns is not None or self.less is not None or self.proportion is not None:
            check_stream(self)
        return self

    @property
    def part(self) -> Kind:
        """The kind, stated or by direction."""
        return self.kind or ("premium" if self.direction == "in" else "benefit")

    def is_for(self, policy: Mapping[str, Any]) -> bool:
        """Say whether a policy, a mapping of extract column to value, has this stream."""
        asked = ((column, [one] if isinstance(one, str) else one) for column, one in self.for_.items())
        return all(policy.get(column) in values for column, values in asked)

    def columns(self) -> Iterator[str]:
        """Extract columns that the stream looks at."""
        increase = self.increase.rate if self.increase else None
        interest = self.returns.interest if self.returns else None
        loan = self.decrease.loan if isinstance(self.decrease, Loan) else None
        for value in (self.amount, self.from_, self.to, self.a_year, self.guarantee, increase, interest, loan):
            if isinstance(value, str):
                yield value


def _none_of(given: set[str], what: str, *keys: str) -> None:
    for key in keys:
        if key in given:
            raise ValueError(f"a stream {what} takes no '{key}'")


class Design(_Part):
    """A product: its states and its streams."""

    code: str = Field(min_length=1, description="value of the extract's column 'product'")
    title: str = Field("", description="name in reports")
    effective: date | None = Field(None, description="date from which it is sold")
    reference: str = Field("", description="where its terms are laid down")
    states: Literal["one life", "two lives"] = Field("one life", description="state model that the streams hang on")
    stream: list[Stream] = Field(min_length=1, description="the payment streams")

    @model_validator(mode="after")
    def _consistent(self) -> Design:
        names = [stream.name for stream in self.stream]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f"two streams are called '{name}'")
        for stream in self.stream:
            self._check_words(stream)
            self._check_start(stream)
            if stream.of is None:
                continue
            base = next((other for other in self.stream if other.name == stream.of), None)
            if base is None:
                raise ValueError(f"stream '{stream.name}' is a share of '{stream.of}', which is not there")
            if base.of is not None:
                raise ValueError(f"stream '{stream.name}' is a share of '{stream.of}', which is itself a share")
        check_design(self)
        self._check_filters()
        return self

    def _check_filters(self) -> None:
        for stream in self.stream:
            after = stream.from_.after if isinstance(stream.from_, AfterGuarantee) else None
            for name in (looked_back_at(stream), after):
                if name is not None and self.named(name).for_ not in ({}, stream.for_):
                    raise ValueError(
                        f"stream '{stream.name}' looks at '{name}', which not every policy has; make 'for' the same"
                    )

    def having(self, streams: tuple[bool, ...]) -> Design:
        """Return the design of policies that have some of the streams only; a share goes with its stream."""
        kept = {stream.name for stream, has in zip(self.stream, streams, strict=True) if has}
        rest = [one for one in self.stream if one.name in kept and (one.of is None or one.of in kept)]
        return self if len(rest) == len(self.stream) else self.model_copy(update={"stream": rest})

    def filters(self) -> Iterator[tuple[str, str, list[str]]]:
        """Yield stream, column and values of everything that streams ask of the policies that have them."""
        for stream in self.stream:
            for column, values in stream.for_.items():
                yield stream.name, column, [values] if isinstance(values, str) else values

    def _check_start(self, stream: Stream) -> None:
        if not isinstance(stream.from_, AfterGuarantee):
            return
        base = next((other for other in self.stream if other.name == stream.from_.after), None)
        if base is None or base.guarantee is None:
            raise ValueError(f"stream '{stream.name}' begins after '{stream.from_.after}', which has no guarantee")
        if isinstance(base.from_, AfterGuarantee):
            raise ValueError(f"stream '{stream.name}' begins after '{base.name}', which itself begins after another")

    def begins_at_age(self, stream: Stream) -> bool:
        """Whether the start of a stream is stated by age, be it that of the stream whose guarantee it waits for."""
        start = self.named(stream.from_.after).from_ if isinstance(stream.from_, AfterGuarantee) else stream.from_
        return isinstance(start, AtAge)

    def _check_words(self, stream: Stream) -> None:
        one = self.states == "one life"
        asked = (("while", stream.while_, "alive", WHILE), ("on", stream.on, "death", LEFT_ON))
        for key, word, single, words in asked:
            if word in words and (word == single) != one:
                known = f"'{single}'" if one else ", ".join(f"'{other}'" for other in words if other != single)
                raise ValueError(f"stream '{stream.name}': {key} '{word}' is not for {self.states}; use {known}")
        if not one and stream.payments != "at their dates":
            raise ValueError(f"stream '{stream.name}': {stream.payments} is for one life")

    def columns(self) -> list[str]:
        """Extract columns that the design looks at as numbers, in order of first mention."""
        return list(dict.fromkeys(column for stream in self.stream for column in stream.columns()))

    def named(self, name: str) -> Stream:
        """Return the stream of this name."""
        return next(stream for stream in self.stream if stream.name == name)
