"""Portfolios, laws and bases at random for the identities, and how to value them.

Amounts are so large (UNIT) that rounding to the minor unit leaves eleven digits.
"""

from __future__ import annotations

from datetime import date
from random import Random
from typing import Any

import numpy as np
import pyarrow as pa
from hypothesis import strategies as st
from numpy.typing import NDArray

import projection

UNIT = 1e8
CENT = 0.005 / UNIT
"""Half a minor unit, as a share of UNIT: what the rounding of one figure may take away."""

POLICIES = 12
ON = date(2027, 3, 17)
AGES = ("exact", "last birthday", "nearest birthday", "next birthday")
INTEREST = st.sampled_from([0.025, 0.0, 0.001, 0.04, 0.11, -0.005])
ALIVE = {"while": "alive"}

Two = tuple[NDArray[np.float64], NDArray[np.float64]]


def stream(name: str, direction: str = "out", /, **terms: Any) -> dict[str, Any]:
    """UNIT, a year or each time."""
    return {"name": name, "direction": direction, "amount": UNIT, **terms}


def design(*streams: dict[str, Any]) -> dict[str, Any]:
    """The only product."""
    return {"code": "A", "title": "invented", "stream": list(streams)}


@st.composite
def laws(draw: Any) -> dict[str, Any]:
    """A law of mortality, closed at its last age, whose rates can be written down."""
    found = {"law": "Makeham", "A": draw(st.sampled_from([0.0004, 0.0, 0.02])), "c": draw(st.floats(1.04, 1.13))}
    return {**found, "B": draw(st.floats(1e-6, 3e-5)), "last_age": draw(st.sampled_from([129, 99, 112]))}


@st.composite
def mortalities(draw: Any) -> dict[str, Any]:
    """The mortality part of a basis, with adjustments."""
    rule = {"table": draw(laws()), "multiple": draw(st.sampled_from([1.0, 0.7, 1.9]))}
    rule |= {"extra": draw(st.sampled_from([0.0, 0.003])), "added_years": draw(st.sampled_from([0, 4]))}
    fractions = draw(st.sampled_from(["constant force", "uniform deaths", "Balducci"]))
    return {"age": draw(st.sampled_from(AGES)), "fractions": fractions, "rule": [rule]}


@st.composite
def lapses(draw: Any, timing: str | None = None) -> dict[str, Any]:
    """The lapse part of a basis."""
    timing = timing or draw(st.sampled_from(["each step", "anniversaries"]))
    ways = ["lapses at the end"] + (["dependent rates"] if timing == "each step" else [])
    rates = draw(st.sampled_from([[0.08, 0.03, 0.0, 0.05], [0.2, 0.01]]))
    return {"timing": timing, "competing": draw(st.sampled_from(ways)), "rule": [{"rates": rates}]}


@st.composite
def portfolios(draw: Any, monthly: bool = False, years: int | None = None) -> pa.Table:
    """Policies that have their anniversary (or monthiversary) on ON; years: that all of them have run."""
    # A seed gives policies that differ from the first example on.
    chosen, rows = Random(draw(st.integers(0, 2**32))), []
    for number in range(POLICIES):
        year = ON.year - (years or chosen.randint(1, 25))
        month = chosen.randint(1, 12) if monthly else ON.month
        born = date(year - chosen.randint(20, 70), chosen.randint(1, 12), chosen.randint(1, 28))
        rows.append((f"Q{number}", "A", "in force", born, date(year, month, ON.day), float(chosen.randint(30, 45))))
    names = ("policy_id", "product", "status", "birth_date", "commencement_date", "term_years")
    return pa.table({name: list(column) for name, column in zip(names, zip(*rows, strict=True), strict=True)})


def basis(mortality: dict[str, Any], interest: float, lapse: dict[str, Any] | None = None) -> dict[str, Any]:
    """A basis with flat interest."""
    document = {"mortality": mortality, "interest": {"rule": [{"flat": interest}]}}
    return {**document, "lapse": lapse} if lapse else document


def parts(policies: pa.Table, contract: Any, assumed: Any, on: date = ON, step: Any = "year", due: Any = "") -> Two:
    """Benefits and premiums of each policy as shares of UNIT, payments due on the date still to come."""
    found = projection.value(policies, contract, assumed, on, step=step, due=due or "outstanding", sample=3)
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    out = found.policies["value_of_benefits"].to_numpy() / UNIT
    return out, found.policies["value_of_premiums"].to_numpy() / UNIT
