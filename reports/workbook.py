"""The report as a workbook. Text stays text: nothing from the inputs can become a formula or a link."""

from __future__ import annotations

import io
from collections.abc import Iterable, Sequence
from typing import Any

import xlsxwriter

from .figures import short, visible, words
from .report import Report
from .workbook_bases import add_bases
from .workbook_flows import add_cash_flows, add_monthly
from .workbook_sheets import OPTIONS, Formats, Table, formats_for, put_table, text
from .workbook_summary import fill_summary

MOST_EXCEPTIONS = 100_000
MOST_TOTALS = 100_000


def workbook_bytes(report: Report) -> bytes:
    """Return the workbook, sheet by sheet in the order below."""
    content = io.BytesIO()
    with xlsxwriter.Workbook(content, OPTIONS) as book:
        book.set_properties({"title": visible(report.title), "comments": "Unsigned; not an actuarial opinion."})
        formats = formats_for(book, report.decimals)
        summary = book.add_worksheet("Summary")
        bars = _totals(book, report, formats)
        if report.outcome.further:
            add_bases(book, report, formats)
        chart = add_cash_flows(book, report, formats)
        fill_summary(summary, report, formats, [item for item in (bars, chart) if item is not None])
        add_monthly(book, report, formats)
        _exceptions(book, report, formats)
        _conventions(book, report, formats)
        _inputs(book, report, formats)
        _cautions(book, report, formats)
    return content.getvalue()


def _totals(book: Any, report: Report, formats: Formats) -> Any:
    sheet = book.add_worksheet("Totals")
    groups = report.outcome.group_by
    money = ("reserve", "value_of_benefits", "value_of_expenses", "value_of_premiums", "rounding")
    rows = [
        [*(_cell(row[name]) for name in groups), row["policies"], *(row[name] for name in money)]
        for row in report.total_rows[:MOST_TOTALS]
    ]
    table = Table(
        [*map(words, groups), "policies", *map(words, money)],
        [*(None for _ in groups), formats.count, *(formats.money for _ in money)],
        [*(18 for _ in groups), 12, *(20 for _ in money)],
    )
    put_table(
        sheet,
        table,
        rows,
        formats,
        note=f"Amounts in {report.currency}. " + _cut(report.total_rows, MOST_TOTALS),
    )
    return _bars(book, sheet, report, formats, len(table.names) + 1)


def _bars(book: Any, sheet: Any, report: Report, formats: Formats, column: int) -> Any:
    """Put reserves by product beside the totals and return a chart of them."""
    rows = sorted(report.by_first_group, key=lambda row: -row[1])[:40]
    if not rows:
        return None
    name = words(report.bar_group or "")
    text(sheet, 1, column, name, formats.head)
    text(sheet, 1, column + 1, "reserve", formats.head_right)
    sheet.set_column(column, column + 1, 20)
    for place, (label, value) in enumerate(rows, 2):
        # The chart keeps a copy of its labels, in which the writer lets control characters stand.
        text(sheet, place, column, short(visible(label), 40))
        sheet.write_number(place, column + 1, value, formats.money)
    chart = book.add_chart({"type": "bar"})
    chart.add_series(
        {
            "name": "reserve",
            "categories": [sheet.name, 2, column, len(rows) + 1, column],
            "values": [sheet.name, 2, column + 1, len(rows) + 1, column + 1],
            "fill": {"color": "#3d5a4c"},
            "gap": 40,
        }
    )
    chart.set_title({"name": f"Reserve by {visible(name)}", "name_font": {"size": 12}, "overlay": False})
    grid = {"visible": True, "line": {"color": "#d5d9dd"}}
    # The largest comes first, so the categories run downwards; 'high' is then the lower edge.
    chart.set_x_axis(
        {"name": visible(report.currency), "num_format": "#,##0", "major_gridlines": grid, "label_position": "high"}
    )
    chart.set_y_axis({"reverse": True, "label_position": "low"})
    chart.set_legend({"none": True})
    chart.set_size({"width": 860, "height": 400})
    return chart


def _exceptions(book: Any, report: Report, formats: Formats) -> None:
    names = ("policy_id", "product", "reason", "field", "value", "rule")
    table = Table([words(name) for name in names], [None] * 6, [20, 14, 32, 22, 24, 80])
    shown = report.outcome.exceptions.slice(0, MOST_EXCEPTIONS)
    columns = [shown.column(name).to_pylist() for name in names]
    note = _cut(range(report.outcome.exceptions.num_rows), MOST_EXCEPTIONS) or "Policies read but not valued."
    put_table(book.add_worksheet("Exceptions"), table, zip(*columns, strict=True), formats, note=note)


def _conventions(book: Any, report: Report, formats: Formats) -> None:
    table = Table(["matter", "rule"], [formats.top, formats.wrapped], [34, 110])
    rows = [(row["matter"], row["rule"]) for row in report.record["conventions"]]
    put_table(book.add_worksheet("Conventions"), table, rows, formats, note="What every number means.")


def _inputs(book: Any, report: Report, formats: Formats) -> None:
    table = Table(
        ["part", "file", "SHA-256", "bytes", "policies"],
        [None, None, None, formats.count, formats.count],
        [20, 40, 68, 16, 14],
    )
    basis = report.record["basis"]
    rows = [
        *(
            (item["role"], item["path"], item["sha256"], item.get("bytes"), item.get("rows"))
            for item in report.record["inputs"]
        ),
        ("basis with its tables", basis["title"], basis["sha256"], None, None),
        *(
            (f"basis {other['name']} with its tables", other["title"], other["sha256"], None, None)
            for other in report.record["further_bases"]
        ),
    ]
    put_table(
        book.add_worksheet("Inputs"),
        table,
        rows,
        formats,
        note="Paths are relative to the run document's folder.",
    )


def _cautions(book: Any, report: Report, formats: Formats) -> None:
    table = Table(["caution"], [formats.wrapped], [110])
    rows = [(caution,) for caution in report.record["cautions"]]
    put_table(book.add_worksheet("Cautions"), table, rows, formats, note="To be read with every figure.")


def _cell(value: object) -> object:
    return (
        value
        if isinstance(value, int | float | str) and not isinstance(value, bool)
        else "(missing)"
        if value is None
        else str(value)
    )


def _cut(rows: Iterable[object] | Sequence[object], most: int) -> str:
    number = len(rows)  # type: ignore[arg-type]
    return (
        f"Only the first {most:,} of {number:,} rows; all are in the Parquet file of the run folder."
        if number > most
        else ""
    )
