from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser

import pyarrow as pa
import pytest
import reports_examples as examples

from reports.cautions import ONE_SCENARIO, OUTSIDE_THE_MODEL, SENSITIVITIES, cautions
from reports.page import MOST_EXCEPTIONS, page
from reports.report import Report, YearFlows, in_blocks

VOID = {"meta", "br", "rect", "line"}


class Reader(HTMLParser):
    """Reads the page as a browser would: tags, their nesting, and the text between them."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.open: list[str] = []
        self.text: list[str] = []
        self.attributes: list[tuple[str, str | None]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes += attrs
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        if tag not in VOID:
            assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text.append(data)

    @property
    def words(self) -> str:
        return " ".join(" ".join(self.text).split())


def read(text: str) -> Reader:
    reader = Reader()
    reader.feed(text)
    assert reader.open == []
    return reader


def test_the_first_things_said(report: Report) -> None:
    words = read(page(report)).words
    for said in (
        report.money(report.outcome.total["reserve"]),
        report.money(report.outcome.total["value_of_premiums"]),
        "2026-11-30",
        "unsigned",
        "9 of 509 policies read are not valued",
        "3 policies run beyond the last age",
        "policies 509 500 9 closes",
        "sum assured 1,234,567,890.12 1,234,560,000.12 7,890.00 closes",
        "both agree",
        *report.record["cautions"],
    ):
        assert said in words


def test_text_from_inputs_is_escaped(report: Report) -> None:
    reader = read(page(report))
    assert {"script", "img", "b", "i", "a"} & set(reader.tags) == set()
    assert not [name for name, _ in reader.attributes if name.startswith("on")]
    for said in (
        "<script>alert(1)</script>",
        "<img src=x onerror=alert(1)>",
        "<b>LARBOARD</b>",
        "a rule with <b>marks</b> & ampersands",
    ):
        assert said in reader.words


def test_the_page_needs_nothing_from_outside(report: Report) -> None:
    reader = read(page(report))
    assert {"link", "script", "img", "iframe", "object"} & set(reader.tags) == set()
    assert [value for name, value in reader.attributes if name in ("src", "href", "xlink:href")] == []
    assert "url(" not in page(report)
    assert "@import" not in page(report)


def test_charts_have_titles_and_every_year(report: Report) -> None:
    text = page(report)
    charts = re.findall(r"<svg.*?</svg>", text, flags=re.DOTALL)
    assert [re.search(r"<title>(.*?)</title>", chart).group(1) for chart in charts] == [  # type: ignore[union-attr]
        "Reserve by product",
        "Expected cash flows by calendar year",
    ]
    assert charts[1].count('<rect class="out"') == charts[1].count('<rect class="in"') == len(report.years) == 61


def test_flows_add_up(report: Report) -> None:
    flows = report.outcome.cash_flows
    expected = sum(row["amount"] for row in flows.to_pylist() if row["direction"] == "out")
    assert sum(year.paid_out for year in report.years) == pytest.approx(expected, rel=1e-12)
    blocks = in_blocks(report.years)
    assert sum(year.paid_in for year in blocks) == pytest.approx(sum(year.paid_in for year in report.years), rel=1e-12)
    assert blocks[10].label == "2036 to 2040"


def test_years_without_payments_are_not_skipped(report: Report) -> None:
    flows = report.outcome.cash_flows
    ends = pa.concat_tables([flows.slice(0, 4), flows.slice(flows.num_rows - 4)])
    sparse = Report(replace(report.outcome, cash_flows=ends), report.record)
    assert [year.label for year in sparse.years] == [str(year) for year in range(2026, 2087)]
    assert sparse.years[5] == YearFlows("2031", {}, 0.0, 0.0)


def test_many_exceptions_are_cut_and_it_is_said(report: Report) -> None:
    many = replace(report.outcome, exceptions=examples.exceptions(MOST_EXCEPTIONS + 1_234))
    words = read(page(Report(many, report.record))).words
    assert "The first 200; 1,234 more in exceptions.parquet." in words
    assert f"X-{MOST_EXCEPTIONS - 1}" in words
    assert f"X-{MOST_EXCEPTIONS} " not in words


@pytest.mark.parametrize("group_by", [(), ("sex",), ("product",), ("sex", "product")])
def test_any_grouping(report: Report, group_by: tuple[str, ...]) -> None:
    outcome = examples.outcome(examples.policies(50), examples.exceptions(0), group_by)
    reader = read(page(Report(outcome, report.record | {"exceptions_by_reason": {}})))
    assert "None: every policy read is valued." in reader.words
    assert ("Reserve by" in reader.words) == bool(group_by)


def test_nothing_valued_at_all(report: Report) -> None:
    outcome = examples.outcome(examples.policies(0), examples.exceptions(3), ("product",), years=0)
    reader = read(page(Report(outcome, report.record)))
    assert "0.00" in reader.words


def test_a_gate_or_sample_that_fails_is_said(report: Report) -> None:
    control = (replace(report.outcome.control[0], read=777), report.outcome.control[1])
    sample = replace(report.outcome.sample, largest_relative=1e-3)
    words = read(page(Report(replace(report.outcome, control=control, sample=sample), report.record))).words
    assert "does not close" in words
    assert "they differ" in words


def test_cautions_count_first(report: Report) -> None:
    said = cautions(report.outcome)
    assert said[0].startswith("9 of 509")
    assert said[1] == report.outcome.notes[0]
    assert {ONE_SCENARIO, OUTSIDE_THE_MODEL} <= set(said)
    assert SENSITIVITIES not in said
    assert SENSITIVITIES in cautions(report.outcome, sensitivities=True)
