"""What the working of a policy says, as typed rows: text as text, numbers as numbers, dates as dates."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import date
from fractions import Fraction
from typing import Any

from pydantic import BaseModel

from assumptions.basis import Basis
from portfolios.columns import BY_NAME
from portfolios.designs import Design
from portfolios.named_states import DEAD
from projection.plain import NotValued, Payment, PlainValue, plain_value
from projection.plain_chain import Chain
from projection.plain_dates import monthiversary
from projection.plain_life import Survival
from projection.settings import Settings

from .figures import words

Row = tuple[Any, ...]

MOST_ITEMS = 200
"""Items of a list in a document that are shown in one cell."""


@dataclass(frozen=True)
class Working:
    """A policy of the extract, what it is valued by, and its value by the plain implementation."""

    policy: Mapping[str, Any]
    design: Design
    basis: Basis
    settings: Settings
    value: PlainValue

    @property
    def lives(self) -> list[tuple[str, Survival]]:
        """The life that the value rests on, or both, by name: 'life', or 'first' and 'second'; none on named states."""
        if self.value.life is None:
            return []
        if self.design.states == "one life":
            return [("life", self.value.life)]
        if self.value.second is not None:
            return [("first", self.value.life), ("second", self.value.second)]
        return [(str(self.policy["lives"]), self.value.life)]

    @property
    def of_states(self) -> list[str]:
        """Heads of what the steps say of named states: each state, then each move."""
        chain = self.value.chain
        return [] if chain is None else [*chain.states, *(f"{begin} to {end}" for begin, end in chain.moves.pairs)]

    @property
    def policy_id(self) -> str:
        """Identifier of the policy."""
        return str(self.policy["policy_id"])


def work_out(policy: Mapping[str, Any], design: Design, basis: Basis, settings: Settings) -> Working:
    """Value a policy by the plain implementation. Raises what ``plain_value`` does."""
    return Working(policy, design, basis, settings, plain_value(policy, design, basis, settings))


def extract_rows(working: Working) -> Iterator[Row]:
    """Yield column, value, unit and meaning for each column of the extract that holds something."""
    for name, value in working.policy.items():
        column = BY_NAME.get(name)
        if value is not None:
            unit, meaning = (column.unit, column.meaning) if column else ("", "a further column of the extract")
            yield name, value, unit, meaning


def derived_rows(working: Working) -> Iterator[Row]:
    """Yield name, value and explanation of what follows from the policy's dates and the conventions."""
    value, settings = working.value, working.settings
    position = value.position
    elapsed = f"{(settings.valuation_date - position.last).days} of {(position.following - position.last).days} days"
    yield "valuation date", settings.valuation_date, f"end of day; cash flows due on it: {settings.due}"
    yield "last step date", position.last, f"step: {settings.step}"
    yield "next step date", position.following, ""
    yield "since last step date", float(position.step), f"of a step: {elapsed}"
    yield "months since commencement", float(position.u), f"u = k + f = {position.k} + {position.f}"
    for name, life in working.lives:
        of = "" if name == "life" else f", {name} life"
        yield f"age at commencement{of}", _age(life, 0), f"{working.basis.document.mortality.age}, in years"
        yield f"survival to valuation{of}", life.at(position.u), "L(T), from commencement"
    if value.chain is not None:
        yield "age at commencement", float(value.age), f"{working.basis.document.mortality.age}, in years"
        yield "state at valuation", value.chain.state, "probabilities go on from it"
    yield "persistency to valuation", value.persistency, "P(T), from commencement"


def rule_rows(working: Working) -> Iterator[Row]:
    """Yield part, rule number, key and value for every rule that fits the policy, as its document has them."""
    document, used = working.basis.document, working.value.rules
    yield "basis", None, "title", working.basis.title
    yield "basis", None, "reference", document.reference or None
    yield "basis", None, "SHA-256", working.basis.digest
    yield from _keys("mortality", None, document.mortality, {"rule"})
    for name, life in working.lives:
        rule, place = life.rates.rule, "mortality" if name == "life" else f"mortality of the {name} life"
        number = 1 + next(i for i, other in enumerate(document.mortality.rule) if other is rule)
        yield from _keys(place, number, rule)
        yield place, number, "rate of the last age", 1 if life.rates.closed else "as the table"
    if working.value.chain is not None:
        for (begin, end), (move, _) in working.value.chain.moves.rules.items():
            place = f"move from {begin} to {end}"
            other = next(one for one in document.move if any(rule is move for rule in one.rule))
            yield from _keys(place, 1 + next(i for i, rule in enumerate(other.rule) if rule is move), move)
    if document.lapse:
        yield from _keys("lapse", None, document.lapse, {"rule"})
        yield from _keys("lapse", used.lapse, document.lapse.rule[used.lapse - 1])
        if working.value.lapses.until is not None:
            yield "lapse", used.lapse, "until, in months", working.value.lapses.until
    else:
        yield "lapse", None, "rule", "none; nobody lapses"
    yield from _keys("interest", used.interest, document.interest.rule[used.interest - 1])
    yield from _keys("claims", None, document.claims)
    for item in document.expense:
        place, number = f"expense '{item.name}'", used.expenses[item.name]
        # How often a year matters only to what is paid for each policy.
        yield from _keys(place, None, item, {"rule", "name"} | ({"a_year"} if item.per != "policy" else set()))
        yield from _keys(place, number, item.rule[number - 1])


def _keys(place: str, number: int | None, item: BaseModel, without: set[str] | None = None) -> Iterator[Row]:
    """Yield the keys of an item that hold something, defaults included: they count too."""
    for key, value in item.model_dump(by_alias=True, exclude=without, exclude_none=True).items():
        if value not in ("", {}, []):
            single = isinstance(value, bool | int | float | str | date)
            yield place, number, words(key), value if single else _said(value)


def _said(value: Any) -> str:
    if isinstance(value, dict):
        return "; ".join(f"{words(str(key))} = {_said(part)}" for key, part in value.items() if part not in ("", None))
    if isinstance(value, list | tuple):
        more = f" and {len(value) - MOST_ITEMS} more" if len(value) > MOST_ITEMS else ""
        return ", ".join(_said(part) for part in value[:MOST_ITEMS]) + more
    return str(value).lower() if isinstance(value, bool) else str(value)


def mortality_rows(working: Working) -> list[Row]:
    """Return life, year, age at its start and yearly rate, from the year of the valuation date on."""
    return [
        (name, year, float(life.rates.entry) + year, life.yearly[year])
        for name, life in working.lives
        for year in range(int(life.rates.offset + working.value.position.u / 12), len(life.yearly))
    ]


def lapse_rows(working: Working) -> list[Row]:
    """Return policy year from 1 and yearly rate of lapse, as far as there are payments and lapses count."""
    lapses = working.value.lapses
    if lapses.rule is None:
        return []
    last = _last_point(working)
    end = last if lapses.until is None else min(last, math.floor(lapses.until))
    years = range(working.value.position.k // 12, (end - 1) // 12 + 1)
    return [(year + 1, lapses.yearly(year)) for year in years]


def step_rows(working: Working) -> Iterator[Row]:
    """Yield point, date, years and discount by step, then persistency and lapses, then the columns of each life.

    On named states, those of each state and move follow. The columns of a life are its age, yearly rate, survival and
    deaths. One row for each step boundary after the valuation date up to the last payment; survival and persistency
    are from the valuation date. Where payments for certain outlast the table, nothing is said of survival.
    """
    value, length = working.value, working.settings.step_months
    curve = working.basis.curves[value.rules.interest - 1]
    lives = [life for _, life in working.lives]
    alive: list[float | None] = [1.0] * len(lives)
    stay = 1.0
    start = int(value.position.u // length + 1) * length
    for point in range(start, _last_point(working) + 1, length):
        stayed = value.lapses.at(point) / value.persistency
        t = (point - float(value.position.u)) / 12
        row = [point, monthiversary(working.policy["commencement_date"], point), t, curve.factor(t)]
        row += [stayed, stay - stayed]
        for place, life in enumerate(lives):
            before, now = alive[place], _alive(life, value.position.u, point)
            died = None if now is None or before is None else before - now
            row += [_age(life, point), life.rate_before(point), now, died]
            alive[place] = now
        if value.chain is not None:
            row += _states_at(value.chain, point)
        yield tuple(row)
        stay = stayed


def _states_at(chain: Chain, point: int) -> list[float | None]:
    """Return the probability of each state after the lapses of a point, and the expected moves of its step."""
    if chain.state == DEAD or (point > chain.moves.last and not chain.moves.closed):
        return [None] * (len(chain.states) + len(chain.moves.pairs))
    shares = [chain.share(point, frozenset({state}), True) for state in chain.states]
    return [*shares, *(chain.moved(point, frozenset({pair})) for pair in chain.moves.pairs)]


def payment_rows(working: Working) -> Iterator[Row]:
    """Yield every payment, stream by stream, with what it is multiplied from."""
    for paid in working.value.payments:
        yield (
            paid.stream, paid.part, paid.direction, paid.point, paid.due, paid.survival, paid.persistency,
            paid.survival * paid.persistency, paid.t, paid.discount, paid.policy_year, paid.relative,
            paid.amount * paid.relative, paid.expected, paid.value,
            *(cell for _, life in working.lives for cell in (_age(life, paid.point), life.rate_before(paid.point))),
        )  # fmt: skip


def stream_rows(working: Working) -> list[Row]:
    """Return stream, part, direction, number of payments, sums of expected payments and of values."""
    streams: dict[Row, list[Payment]] = {}
    for payment in working.value.payments:
        streams.setdefault((payment.stream, payment.part, payment.direction), []).append(payment)
    return [
        (*stream, len(paid), math.fsum(one.expected for one in paid), math.fsum(one.value for one in paid))
        for stream, paid in streams.items()
    ]


def _last_point(working: Working) -> int:
    return max((payment.point for payment in working.value.payments), default=0)


def _age(life: Survival, point: int) -> float:
    """Return the age of a life at a point, in years: as counted at commencement, and the time since."""
    return float(life.rates.entry) + float(life.rates.offset) + point / 12


def _alive(life: Survival, u: Fraction, point: int) -> float | None:
    try:
        return life.at(point) / life.at(u)
    except NotValued:
        return None
