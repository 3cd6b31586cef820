"""What a policy-month costs on named states and on two lives, beside the same on one life.

    python -m tests.benchmarks.states --policies 200000

Policies of an invented office in memory: a premium, an annuity and a death benefit on one life and on the states
healthy and disabled with recovery; an annuity on one life and one with a reversion on two. Time by the clock of
the compiled loops, one thread, divided by the policy-months projected; designs take turns, the medians count.
"""

from __future__ import annotations

import statistics
from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa

from assumptions.basis import prepare_basis
from portfolios.checks import needed_columns
from portfolios.designs import Design
from portfolios.extract import open_extract
from projection.engine import Engine
from projection.lives import rule_columns
from projection.settings import Settings

from .measure import Result, Row, arguments

TODAY = date(2026, 11, 30)

DYING = {"law": "Makeham", "A": 0.0002, "B": 0.00003, "c": 1.1}

BASIS: dict[str, Any] = {
    "mortality": {"age": "last birthday", "rule": [{"table": DYING}]},
    "interest": {"rule": [{"flat": 0.02}]},
    "lapse": {"rule": [{"rates": [0.05, 0.03]}]},
    "move": [
        {"from": "healthy", "to": "disabled", "rule": [{"rate": 0.01, "figures": "force"}]},
        {"from": "disabled", "to": "healthy", "rule": [{"rate": 0.1, "figures": "force"}]},
        {"from": ["healthy", "disabled"], "to": "dead", "rule": [{"table": DYING, "figures": "force"}]},
    ],
}


def _stream(name: str, direction: str, amount: float, **more: Any) -> dict[str, Any]:
    return {"name": name, "direction": direction, "amount": amount, **more}


def _three(premium_while: str, annuity_while: str) -> list[dict[str, Any]]:
    to = {"to": "term_years"}
    return [
        _stream("premium", "in", 1200.0, a_year=12, **{"while": premium_while}, **to),
        _stream("annuity", "out", 6000.0, a_year=12, paid="arrears", **{"while": annuity_while}, **to),
        _stream("death benefit", "out", 50_000.0, on="death", **to),
    ]


def _for_life(name: str, words: str, amount: float) -> dict[str, Any]:
    return _stream(name, "out", amount, a_year=12, **{"while": words})


DESIGNS: dict[str, dict[str, Any]] = {
    "three streams on one life": {"stream": _three("alive", "alive")},
    "three streams on named states": {
        "states": ["healthy", "disabled"],
        "lapses_from": ["healthy"],
        "stream": _three("healthy", "disabled"),
    },
    "an annuity on one life": {"stream": [_for_life("annuity", "alive", 12_000.0)]},
    "an annuity with reversion on two lives": {
        "states": "two lives",
        "stream": [_for_life("annuity", "first", 12_000.0), _for_life("reversion", "second only", 7200.0)],
    },
}
BOUNDS = (("three streams on named states", "three streams on one life", "<= 8"),
          ("an annuity with reversion on two lives", "an annuity on one life", "<= 3"))  # fmt: skip


def policies(count: int) -> pa.Table:
    """Policies of ages 25 to 64, commenced on some day of the last ten years, for 10 to 34 years."""
    random = np.random.default_rng(1)
    today = np.datetime64(TODAY)
    commenced = today - random.integers(0, 3650, count)

    def born() -> Any:
        return pa.array(commenced - random.integers(25 * 366, 65 * 365, count))

    return pa.table(
        {
            "policy_id": pa.array([f"S{number}" for number in range(count)]),
            "product": pa.array(["X"] * count),
            "status": pa.array(["in force"] * count),
            "birth_date": born(),
            "second_birth_date": born(),
            "commencement_date": pa.array(commenced),
            "lives": pa.array(["both"] * count),
            "state": pa.array(np.array(["healthy", "disabled"])[(random.random(count) < 0.1).astype(int)]),
            "term_years": pa.array(random.integers(10, 35, count).astype(float)),
        }
    )


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 200_000)
    parser.add_argument("--rounds", type=int, default=7)
    given = parser.parse_args()
    extract = open_extract(policies(given.policies))
    runs = {name: _prepared(extract, streams) for name, streams in DESIGNS.items()}
    taken: dict[str, list[float]] = {name: [] for name in runs}
    months = {}
    for _ in range(given.rounds):
        for name, (engine, chunk) in runs.items():
            valued = engine.value(chunk)
            months[name] = valued.months
            taken[name].append(valued.seconds["loops"])
    result = Result(f"{given.policies:,} policies of each design, compiled loops, median of {given.rounds}")
    each = {name: statistics.median(seconds) / months[name] for name, seconds in taken.items()}
    targets = {name: (other, bound) for name, other, bound in BOUNDS}
    for name, seconds in each.items():
        whole = statistics.median(taken[name])
        other, bound = targets.get(name, ("", ""))
        ratio = seconds / each[other] if other else None
        note = f"{1e9 * seconds:.2f} ns a policy-month, {months[name] / given.policies:.0f} months a policy"
        result.rows.append(Row(name, wall=whole, ratio=ratio, target=bound, note=note))
    result.show(given.json)


def _prepared(extract: Any, streams: dict[str, Any]) -> tuple[Engine, Any]:
    designs, basis = [Design.model_validate({"code": "X", **streams})], prepare_basis(BASIS)
    asked = rule_columns(basis, designs, extract.column_names)
    needed = needed_columns(designs, asked)
    kinds = {column: str(extract.column_kind(column)) for column in asked}
    engine = Engine(designs, basis, Settings(TODAY, "month", "settled", 2), needed, kinds)
    chunk = next(iter(extract.chunks(needed)))
    assert (engine.value(chunk).checked.reason == 0).all()
    return engine, chunk


if __name__ == "__main__":
    main()
