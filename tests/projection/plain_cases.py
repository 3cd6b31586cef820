"""Small bases, designs and policies of an invented mutual office, for the tests of the plain twin."""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import date
from typing import Any

from assumptions.basis import Basis, prepare_basis
from portfolios.designs import Design
from projection.plain import PlainValue, plain_value
from projection.settings import Settings

BORN = date(1986, 3, 10)
COMMENCED = date(2026, 3, 10)
MAKEHAM = {"law": "Makeham", "A": 0.00022, "B": 2.7e-6, "c": 1.124}


@dataclass(frozen=True)
class Listed:
    """Ultimate rates from a first age on."""

    q: tuple[float, ...]
    first_age: int
    whole_ages_only: bool = True
    select_years: int = 0

    @property
    def final_age(self) -> int:
        return self.first_age + len(self.q)

    @property
    def closed(self) -> bool:
        return self.q[-1] == 1

    def rate(self, entry_age: float, duration: int) -> float:
        return self.q[int(entry_age) + duration - self.first_age]


def basis(rates: Listed | None = None, age: str = "exact", i: float = 0.04, **parts: Any) -> Basis:
    """A basis with one mortality rule; other parts and ``fractions`` as in the document."""
    mortality = {"age": age, "rule": [{"table": MAKEHAM, **parts.pop("mortality_rule", {})}]}
    mortality["fractions"] = parts.pop("fractions", "constant force")
    document = {"mortality": mortality, "interest": {"rule": [{"flat": i}]}, **parts}
    prepared = prepare_basis(document)
    return prepared if rates is None else replace(prepared, rates=(rates,))


def constant(q: float, years: int = 80, last: float | None = None) -> Listed:
    """The same rate at every age from 20; the last one may differ."""
    return Listed((q,) * (years - 1) + (q if last is None else last,), 20)


def stream(name: str, amount: float | str = 1.0, **keys: Any) -> dict[str, Any]:
    """A stream out, paid while alive unless it says otherwise; ``start`` stands for 'from'."""
    given = {"name": name, "direction": "out", "amount": amount, **keys}
    if "start" in given:
        given["from"] = given.pop("start")
    if "on" not in given and "of" not in given and "certain" not in given:
        given["while"] = "alive"
    if given.pop("certain", False):
        given["while"] = "certain"
    if "of" in given:
        del given["amount"], given["direction"]
        given |= {key: keys[key] for key in ("direction",) if key in keys}
    return given


def design(*streams: dict[str, Any]) -> Design:
    return Design.model_validate({"code": "PIER", "title": "Pier endowment", "stream": list(streams)})


def policy(**columns: Any) -> dict[str, Any]:
    given = {"policy_id": "P1", "product": "PIER", "birth_date": BORN, "commencement_date": COMMENCED}
    return {**given, **columns}


def value(
    contract: Design,
    assumed: Basis,
    on: date = COMMENCED,
    step: Any = "year",
    due: Any = "outstanding",
    **columns: Any,
) -> PlainValue:
    return plain_value(policy(**columns), contract, assumed, Settings(on, step, due))
