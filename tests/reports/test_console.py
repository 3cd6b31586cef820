from __future__ import annotations

import io
import time
from dataclasses import replace

import pytest
import reports_examples as examples

from reports.console import MOST_GROUPS, summary
from reports.progress import Bar, LogLines, progress_on
from reports.report import Report


def test_the_table_of_totals_lines_up(report: Report) -> None:
    lines = summary(report, "november").splitlines()
    start = next(i for i, line in enumerate(lines) if line.startswith("product"))
    table = lines[start : start + report.outcome.totals.num_rows + 1]
    assert len({len(line) for line in table}) == 1
    total = next(line for line in lines if line.startswith("total"))
    assert len(total) == len(table[0])
    assert report.money(report.outcome.total["reserve"]) in total


def test_what_a_summary_must_say(report: Report) -> None:
    text = summary(report, "november")
    for said in (
        "2026-11-30",
        "exceptions by reason",
        "amount negative",
        "closes",
        "agree",
        "november",
        "not an actuarial opinion",
    ):
        assert said in text


def test_many_groups_are_cut(report: Report) -> None:
    results = examples.policies(500)
    names = [f"group {i:03d}" for i in range(results.num_rows)]
    outcome = examples.outcome(results.set_column(1, "product", [names]), examples.exceptions(0), ("product",), years=1)
    text = summary(Report(outcome, report.record), "november")
    assert f"{500 - MOST_GROUPS} more groups in totals.parquet" in text


def test_failures_are_loud(report: Report) -> None:
    control = (replace(report.outcome.control[0], read=1),)
    sample = replace(report.outcome.sample, largest_relative=1.0)
    text = summary(Report(replace(report.outcome, control=control, sample=sample), report.record), "november")
    assert "DOES NOT CLOSE" in text
    assert "DIFFER" in text


def test_a_short_run_says_nothing_in_a_log() -> None:
    stream = io.StringIO()
    with progress_on("valuing", stream) as progress:
        progress(10, 20)
    assert stream.getvalue() == ""


def test_a_long_run_says_plain_lines() -> None:
    stream = io.StringIO()
    with LogLines("valuing", stream, every=0.0) as progress:
        time.sleep(0.01)
        progress(1_000, 4_000)
    line = stream.getvalue()
    assert "valuing: 1,000 of 4,000 policies" in line
    assert "left" in line
    assert line.count("\n") == 1
    assert "\x1b" not in line


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_a_terminal_gets_a_bar(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TERM", "xterm")
    stream = Terminal()
    with progress_on("valuing", stream) as progress:
        assert isinstance(progress, Bar)
        progress(1_000, 4_000)
    assert "valuing" in stream.getvalue()
