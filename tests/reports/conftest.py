from __future__ import annotations

import io
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
import reports_examples as examples

import reports.reserve_run
from portfolios.demo_office import write_office
from reports.prepared import Prepared, prepare
from reports.progress import LogLines
from reports.record import build_record
from reports.report import Report
from reports.reserve_run import reserve_run


@pytest.fixture(scope="session")
def office(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("demo") / "office"
    write_office(folder, 300, 1)
    return folder


@pytest.fixture(scope="session")
def prepared(office: Path) -> Prepared:
    return prepare(office / "month-end.toml")


@pytest.fixture(scope="session")
def report(prepared: Prepared) -> Report:
    outcome = examples.outcome(examples.policies(500), examples.exceptions(9))
    started = datetime(2026, 12, 1, 4, 30, tzinfo=UTC)
    record = build_record(prepared, outcome, {}, "duecourse reserve month-end.toml --out november", "november", started)
    return Report(outcome, record)


@pytest.fixture
def made_up(monkeypatch: pytest.MonkeyPatch) -> None:
    """Put a valuation in place of the engine whose amounts are made up from the row numbers."""
    monkeypatch.setattr(reports.reserve_run, "value_extract", made_up_values)


def made_up_values(extract: Any, designs: Any, basis: Any, settings: Any, **asked: Any) -> Any:
    """Stand in for the engine: the last 5 policies are exceptions, the others get amounts."""
    results = examples.policies(extract.rows - 5)
    for start in range(0, results.num_rows, 64):
        asked["sink"](results.slice(start, 64))
        asked["progress"](start, extract.rows)
    return examples.outcome(results, examples.exceptions(5), asked["group_by"], years=3)


@pytest.fixture
def finished(made_up: None, office: Path, tmp_path: Path) -> Path:
    """A finished run folder."""
    out = tmp_path / "november"
    reserve_run(office / "month-end.toml", out, lambda what: LogLines(what, io.StringIO()))
    return out
