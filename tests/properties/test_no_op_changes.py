"""Changes that say nothing new leave the same bits in every figure, on the invented office and its documents."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from copy import deepcopy
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from table_bits import bits

import projection
from assumptions.basis import prepare_basis
from portfolios.demo_office import write_office
from projection.notebook import Valuation

POLICIES = 1_000
NOBODY = {"policy_id": "nobody"}
BASES = ("statutory.toml", "best_estimate.toml")
STEPS: tuple[Any, ...] = ("month", "year")


@dataclass
class Office:
    """Documents as in TOML, and policies."""

    designs: list[dict[str, Any]]
    basis: dict[str, Any]
    extract: pa.Table
    folder: Path

    def value(self, step: Any) -> Valuation:
        prepared = prepare_basis(self.basis, self.folder)
        return projection.value(self.extract, self.designs, prepared, date(2026, 11, 30), step=step, sample=2)

    def rules(self) -> list[list[dict[str, Any]]]:
        """Every list of rules of the basis."""
        parts = [self.basis[part] for part in ("mortality", "lapse", "interest") if part in self.basis]
        return [part["rule"] for part in [*parts, *self.basis["expense"]]]

    def streams(self) -> list[dict[str, Any]]:
        return [stream for design in self.designs for stream in design["stream"]]


def multiples(office: Office) -> None:
    """Write out a multiple of 1 where none stands."""
    for part in ("mortality", "lapse"):
        for rule in office.basis.get(part, {"rule": []})["rule"]:
            rule.setdefault("multiple", 1.0)


def defaults(office: Office) -> None:
    """Write out what a document means where it is silent."""
    for rule in office.basis["mortality"]["rule"]:
        for key, value in (("added_years", 0), ("extra", 0.0), ("close", False)):
            rule.setdefault(key, value)
    for stream in office.streams():
        if "of" not in stream:
            stream.setdefault("from", 0.0)
            stream.setdefault("clock", "stream")


def idle_rules(office: Office) -> None:
    """Put a rule that fits nobody before all others."""
    for rules in office.rules():
        rules.insert(0, {**deepcopy(rules[-1]), "for": NOBODY})


def idle_other_rates(office: Office) -> None:
    """Put a rule that fits nobody, with rates of its own, before the others."""
    for part, rule in (
        ("mortality", {"table": {"law": "de Moivre", "omega": 100}}),
        ("lapse", {"rates": [1.0]}),
        ("interest", {"flat": 0.2}),
    ):
        if part in office.basis:
            office.basis[part]["rule"].insert(0, {**rule, "for": NOBODY})


def rule_twice(office: Office) -> None:
    """Say the last rule, which is for everybody, a second time; the first that fits wins."""
    for rules in office.rules():
        rules.append(deepcopy(rules[-1]))


def shares(office: Office) -> None:
    """Write out a share of 1."""
    for stream in office.streams():
        stream.setdefault("share", 1.0)


def flat_shapes(office: Office) -> None:
    """Write out a pattern of 1 for ever, and an increase by nothing."""
    for stream in office.streams():
        stream.setdefault("pattern", [{"share": 1.0}])
        if "of" not in stream:
            stream.setdefault("increase", {"rate": 0.0})


def free_streams(office: Office) -> None:
    """Add streams of nothing, in and out, within the lifetime of the others."""
    for design in office.designs:
        alive = "alive" if design.get("states", "one life") == "one life" else "both"
        start = {"amount": 0.0, "from": 0.0, "to": 1.0, "while": alive}
        design["stream"].append({"name": "nothing out", "direction": "out", **start})
        design["stream"].insert(0, {"name": "nothing in", "direction": "in", **start})


def free_expenses(office: Office) -> None:
    """Add items of expense that cost nothing."""
    for per in ("policy", "premium", "benefit", "claim"):
        rule = {"first_year": 0.0, "later_years": 0.0}
        office.basis["expense"].append({"name": f"nothing per {per}", "per": per, "rule": [rule]})


def columns(office: Office) -> None:
    """Add columns that nothing looks at, and turn the order of all."""
    table = office.extract.append_column("branch", pa.array([f"b{row % 5}" for row in range(POLICIES)]))
    table = table.append_column("fund", pa.array(np.linspace(0, 1, POLICIES)))
    office.extract = table.select(table.column_names[::-1])


CHANGES: tuple[Callable[[Office], None], ...] = (
    multiples, defaults, idle_rules, idle_other_rates, rule_twice, shares, flat_shapes, free_streams, free_expenses,
    columns,
)  # fmt: skip


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, POLICIES, 11)
    return place


def read(folder: Path, basis: str) -> Office:
    designs = [tomllib.loads(path.read_text("utf-8")) for path in sorted((folder / "designs").glob("*.toml"))]
    assumed = tomllib.loads((folder / "bases" / basis).read_text("utf-8"))
    return Office(designs, assumed, pq.read_table(folder / "inforce"), folder / "bases")


@pytest.fixture(scope="module", params=[(basis, step) for basis in BASES for step in STEPS], ids=str)
def before(request: pytest.FixtureRequest, folder: Path) -> tuple[Valuation, str, str]:
    basis, step = request.param
    found = read(folder, basis).value(step)
    assert found.policies.num_rows > 0.9 * POLICIES
    return found, basis, step


@pytest.mark.parametrize("change", CHANGES, ids=lambda change: change.__name__)
def test_nothing_changes(before: tuple[Valuation, str, str], folder: Path, change: Callable[[Office], None]) -> None:
    found, basis, step = before
    office, untouched = read(folder, basis), read(folder, basis)
    change(office)
    assert office != untouched
    after = office.value(step)
    for name in ("policies", "totals", "cash_flows", "exceptions"):
        assert bits(getattr(found, name)).equals(bits(getattr(after, name))), name
