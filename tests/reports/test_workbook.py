from __future__ import annotations

import io
import zipfile
from dataclasses import replace
from datetime import date, datetime
from typing import Any
from xml.etree import ElementTree

import openpyxl
import pyarrow as pa
import pytest
import reports_examples as examples

import reports.workbook
from reports.report import Report
from reports.workbook import workbook_bytes

SHEETS = ["Summary", "Totals", "Cash flows", "Monthly", "Exceptions", "Conventions", "Inputs", "Cautions"]


@pytest.fixture(scope="module")
def content(report: Report) -> bytes:
    return workbook_bytes(report)


@pytest.fixture(scope="module")
def book(content: bytes) -> Any:
    return openpyxl.load_workbook(io.BytesIO(content))


def rows(sheet: Any) -> list[list[Any]]:
    return [list(row) for row in sheet.iter_rows(values_only=True)]


def test_sheets_and_frozen_heads(book: Any) -> None:
    assert book.sheetnames == SHEETS
    assert {name: book[name].freeze_panes for name in SHEETS[1:]} == {
        **dict.fromkeys(SHEETS[1:], "A3"),
        **dict.fromkeys(("Cash flows", "Monthly"), "B3"),
    }


def test_no_text_became_a_formula_or_a_link(content: bytes, book: Any) -> None:
    for sheet in book:
        for row in sheet.iter_rows():
            for cell in row:
                assert cell.data_type != "f", cell
                assert cell.hyperlink is None
    with zipfile.ZipFile(io.BytesIO(content)) as parts:
        for name in parts.namelist():
            if name.startswith("xl/worksheets/sheet"):
                assert b"<f>" not in parts.read(name)
    shown = [row[0] for row in rows(book["Exceptions"])[2:]]
    assert shown[:5] == ["=1+1", "<script>alert(1)</script>", "@SUM(A1)", "https://example.invalid", "-7"]


def test_text_of_any_kind_gives_a_workbook_that_can_be_read(report: Report) -> None:
    """The writer keeps copies of labels in charts and properties, and knows markup of its own: '<r>...</r>'."""
    wicked = ("\x1b[31mred", "<r><t>rich</t></r>", "<r>&</r>", "a\ufffeb", "<b>&amp;</b>")
    results = examples.policies(50)
    groups = pa.array([wicked[row % len(wicked)] for row in range(50)])
    outcome = examples.outcome(results.set_column(2, "sex", groups), examples.exceptions(5), ("sex",))
    settings = report.record["settings"] | {"currency": "\x1b\ufffe&<r>"}
    content = workbook_bytes(Report(outcome, report.record | {"title": "\x07<r>&</r>", "settings": settings}))
    with zipfile.ZipFile(io.BytesIO(content)) as parts:
        for name in parts.namelist():
            ElementTree.fromstring(parts.read(name))
    shown = {row[0] for row in rows(openpyxl.load_workbook(io.BytesIO(content))["Totals"])[2:]}
    assert {"<r><t>rich</t></r>", "<r>&</r>", "<b>&amp;</b>"} <= shown


def test_totals_are_numbers_and_add_up(book: Any, report: Report) -> None:
    head, *body = rows(book["Totals"])[1:]
    reserve, groups = head.index("reserve"), len(report.outcome.group_by)
    found = [row for row in body if row[groups] is not None]
    assert len(found) == report.outcome.totals.num_rows
    assert round(sum(row[reserve] for row in found) * 100) == report.outcome.total["reserve"]
    assert book["Totals"].cell(3, reserve + 1).number_format == "#,##0.00"


def test_summary_shows_reserve_and_gate(book: Any, report: Report) -> None:
    cells = rows(book["Summary"])
    reserve = next(row for row in cells if row[0] == "= reserve")
    assert round(reserve[1] * 100) == report.outcome.total["reserve"]
    assert next(row for row in cells if row[0] == "policies")[1:5] == [509, 500, 9, "closes"]


def test_cash_flows_by_year_and_month_agree(book: Any, report: Report) -> None:
    years, months = rows(book["Cash flows"])[2:], rows(book["Monthly"])[2:]
    assert [row[0] for row in years] == [int(year.label) for year in report.years]
    for row, year in zip(years, report.years, strict=True):
        assert row[1:4] == pytest.approx([year.paid_out, year.paid_in, year.net])
        outgo = [value for name, value in zip(rows(book["Cash flows"])[1][4:], row[4:], strict=True) if "out" in name]
        assert sum(outgo) == pytest.approx(year.paid_out)
    assert months[0][0] == datetime(2026, 12, 1)
    second = [row for row in months if row[0].year == 2027]
    assert sum(sum(row[1:]) for row in second) == pytest.approx(years[1][1] + years[1][2])


def test_months_and_years_without_any_flow_at_the_ends_are_left_out(report: Report) -> None:
    """The table of cash flows may begin with the month of the valuation date, in which all is settled."""
    flows = report.outcome.cash_flows
    quiet = flows.slice(0, 2).set_column(5, "amount", pa.array([0.0, 0.0]))
    ends = [quiet.set_column(0, "month", pa.array([day] * 2)) for day in (date(2025, 11, 1), date(2150, 1, 1))]
    around = Report(replace(report.outcome, cash_flows=pa.concat_tables([ends[0], flows, ends[1]])), report.record)
    assert [(year.label, year.net) for year in around.years] == [(year.label, year.net) for year in report.years]
    book = openpyxl.load_workbook(io.BytesIO(workbook_bytes(around)))
    assert rows(book["Monthly"])[2][0] == datetime(2026, 12, 1)
    assert rows(book["Cash flows"])[2][0] == 2026


def test_two_native_charts(content: bytes) -> None:
    with zipfile.ZipFile(io.BytesIO(content)) as parts:
        assert len([name for name in parts.namelist() if name.startswith("xl/charts/chart")]) == 2


def test_cut_exceptions_are_said(report: Report, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reports.workbook, "MOST_EXCEPTIONS", 4)
    book = openpyxl.load_workbook(io.BytesIO(workbook_bytes(report)))
    cells = rows(book["Exceptions"])
    assert cells[0][0] == "Only the first 4 of 9 rows; all are in the Parquet file of the run folder."
    assert len(cells) == 2 + 4


@pytest.mark.parametrize("group_by", [(), ("sex",)])
def test_nothing_to_show_is_no_error(report: Report, group_by: tuple[str, ...]) -> None:
    outcome = examples.outcome(examples.policies(0), examples.exceptions(0), group_by, years=0)
    record = report.record | {"exceptions_by_reason": {}, "conventions": [], "inputs": []}
    book = openpyxl.load_workbook(io.BytesIO(workbook_bytes(Report(outcome, record))))
    assert book.sheetnames == SHEETS


def test_very_long_text_is_cut_to_the_cell(report: Report) -> None:
    long = examples.exceptions(1).set_column(5, "rule", [["x" * 40_000]])
    book = openpyxl.load_workbook(
        io.BytesIO(workbook_bytes(Report(replace(report.outcome, exceptions=long), report.record)))
    )
    assert len(rows(book["Exceptions"])[2][5]) == 32_767
    record = report.record | {"conventions": [{"matter": "long", "rule": "x" * 40_000}]}
    book = openpyxl.load_workbook(io.BytesIO(workbook_bytes(Report(report.outcome, record))))
    assert book["Conventions"].row_dimensions[3].height <= 409
