"""Shocks at random over their whole vocabulary, as hypothesis strategies."""

from __future__ import annotations

from typing import Any

from hypothesis import strategies as st
from random_contracts import Draw, chance, conditions, one_of

from assumptions.shocks import Shock

KINDS = ("mortality", "lapse", "interest", "inflation", "expenses", "improvement")


@st.composite
def changes(draw: Draw, kinds: tuple[str, ...] = (*KINDS, "mortality", "lapse")) -> dict[str, Any]:
    what = one_of(draw, *kinds) if not chance(draw, 20) else "disability"
    # There is no part for disability yet, of which a share is nothing, and to which nothing can be added.
    hows = ("relative",) if what == "disability" else ("relative", "absolute", "replaced")
    change: dict[str, Any] = {"what": what, "how": one_of(draw, *hows)}
    change["amount"] = draw(amounts(what, change["how"]))
    if what != "inflation" and chance(draw, 3):
        life = st.just({"life": "second"}) if what in ("mortality", "improvement") else st.nothing()
        change["for"] = draw(conditions() | life)
    if what == "interest":
        _on_curves(draw, change)
    if what in ("mortality", "improvement") and chance(draw, 3):
        change["ages"] = one_of(draw, {"from": 60}, {"to": 70}, {"from": 50, "to": 75})
    if what in ("mortality", "lapse"):
        if chance(draw, 3):
            change["durations"] = one_of(draw, {"from": 5}, {"to": 15}, {"from": 3, "to": 20})
        if chance(draw, 4):
            change["at_most"] = one_of(draw, 0.2, 0.01)
    if what in ("mortality", "lapse", "improvement") and chance(draw, 4):
        change["calendar_years"] = one_of(draw, {"from": 2030}, {"from": 2027, "to": 2040}, {"to": 2035})
    if what in ("mortality", "lapse", "inflation"):
        if chance(draw, 3):
            change["for_months"] = one_of(draw, 12, 7, 30)
        if chance(draw, 4):
            change["from_months"] = one_of(draw, 12, 5, 120)
        if what != "inflation" and chance(draw, 3):
            change["counted_by"] = one_of(draw, "quarters", "years")
    return change


@st.composite
def amounts(draw: Draw, what: str, how: str) -> float:
    if how == "relative":
        return float(one_of(draw, 0.15, -0.2, 0.0, 1.0, -1.0, 5.0))
    if what == "expenses":
        return float(one_of(draw, 10.0, 0.0, 3.5) if how == "replaced" else one_of(draw, 0.01, -5.0, 0.0))
    if how == "absolute":
        return float(one_of(draw, 0.01, -0.005, 0.0, 0.0015))
    return float(one_of(draw, 0.02, 0.0, 0.05))


def _on_curves(draw: Draw, change: dict[str, Any]) -> None:
    if chance(draw, 3):
        change["rates"] = "forward"
    if chance(draw, 3):
        change["maturities"] = one_of(draw, {"from": 5}, {"to": 10}, {"from": 1, "to": 20})
    if chance(draw, 3):
        held = change.pop("amount")
        change["by_maturity"] = one_of(draw, {"1": held, "10": 0.01}, {"5": 0.0, "7": held, "10": 0.0}, {"3": held})
    if change["how"] != "replaced" and chance(draw, 3):
        change["at_least"] = one_of(draw, 0.01, 0.0025)


@st.composite
def shocks(draw: Draw, kinds: tuple[str, ...] = (*KINDS, "mortality", "lapse")) -> Shock:
    """Up to three changes of some kinds, one after the other."""
    listed = [draw(changes(kinds)) for _ in range(draw(st.integers(0, 3)))]
    return Shock.model_validate({"title": "random", "change": listed})
