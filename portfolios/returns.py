"""Benefits that look back at what another stream of the design has paid: premiums returned, value protection, and the
proportion of an instalment up to the date of death."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pydantic import BaseModel, ConfigDict, Field

from .states import LEFT_ON, WHILE, States

if TYPE_CHECKING:
    from .designs import Design, Stream


class Returns(BaseModel):
    """What another stream has paid up to then, perhaps with interest."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)

    stream: str = Field(description="name of the stream whose payments are returned")
    interest: float | str = Field(
        0.0, description="yearly rate at which they accumulate, -0.5 to 1, or the extract column that holds it"
    )


def looked_back_at(stream: Stream) -> str | None:
    """Return the name of the stream whose past payments or dates count, if any."""
    return (stream.less or stream.proportion) if stream.returns is None else stream.returns.stream


def check_stream(stream: Stream) -> None:
    """Raise ValueError where a stream that looks back has keys that do not go with it."""
    given = stream.model_fields_set
    ways = [key for key in ("returns", "less", "proportion") if getattr(stream, key) is not None]
    if len(ways) > 1:
        raise ValueError(f"a stream takes one of '{ways[0]}' and '{ways[1]}'")
    name = ways[0]
    if name == "proportion" and (stream.on is None or stream.on == "lapse"):
        raise ValueError("'proportion' needs a stream paid on a death")
    if stream.on is None and stream.paid != "once":
        raise ValueError(f"'{name}' needs a stream paid on a move or once")
    extra = sorted(given & {"pattern", "increase", "decrease", "clock", *(("amount",) if name != "less" else ())})
    if extra:
        raise ValueError(f"a stream with '{name}' takes no '{extra[0]}'")
    if stream.returns is not None:
        interest = stream.returns.interest
        if not isinstance(interest, str) and not -0.5 <= interest <= 1:
            raise ValueError(f"interest {interest} on returned payments is outside -0.5 to 1")


def check_design(design: Design) -> None:
    """Raise ValueError where a stream looks back at one whose payments cannot be counted."""
    for stream in design.stream:
        name = looked_back_at(stream)
        if name is None:
            continue
        base = next((other for other in design.stream if other.name == name), None)
        if base is None:
            raise ValueError(f"stream '{stream.name}' looks back at '{name}', which is not there")
        if base.of is not None or base.on is not None or looked_back_at(base) is not None:
            raise ValueError(
                f"stream '{stream.name}' looks back at '{name}'; it must be a stream with terms of its own, paid "
                "while a state lasts, for certain or once"
            )
        if not isinstance(base.from_, float | int | str) and "after" in type(base.from_).model_fields:
            raise ValueError(f"stream '{stream.name}' looks back at '{name}', which begins after a guarantee")
        if stream.proportion is not None and base.paid != "arrears":
            raise ValueError(f"stream '{stream.name}' is a proportion of '{name}', which is not paid in arrears")
        if base.increase is not None and base.increase.needs_calendar:
            raise ValueError(
                f"stream '{stream.name}' looks back at '{name}', which increases by calendar time; its past payments "
                "cannot be counted"
            )
        if base.decrease not in (None, "yearly", "monthly"):
            raise ValueError(f"stream '{stream.name}' looks back at '{name}', which falls like a loan")
        if not _always_paid(base, _states(stream, design)):
            raise ValueError(
                f"stream '{stream.name}' looks back at '{name}', which need not have been paid all the time "
                "until then; it must be paid for certain, or in all states that may come before"
            )


def _states(stream: Stream, design: Design) -> States | None:
    """The states in which a contract is until a stream is paid; None if any."""
    if stream.while_ == "certain":
        return None
    if stream.on != "lapse":
        return LEFT_ON[stream.on] if stream.on is not None else WHILE[str(stream.while_)]
    words = (LEFT_ON.get(str(other.on)) or WHILE.get(str(other.while_)) for other in design.stream)
    return frozenset().union(*(states for states in words if states))


def _always_paid(base: Stream, states: States | None) -> bool:
    """Whether a contract in these states has been in a state of the base all the time; it begins with all lives."""
    if base.while_ == "certain":
        return True
    begun = WHILE["alive"] if base.while_ == "alive" else WHILE["both"]
    return states is not None and (states | begun) <= WHILE[str(base.while_)]
