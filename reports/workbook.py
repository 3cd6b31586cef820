"""The report as a workbook. Text stays text: nothing from the inputs can become a formula or a link."""

from __future__ import annotations

import io
from collections.abc import Iterable, Sequence
from typing import Any

import xlsxwriter

from .figures import size, words
from .report import Report
from .workbook_flows import add_cash_flows, add_monthly
from .workbook_sheets import Formats, Table, formats_for, put_table, text

MOST_EXCEPTIONS = 100_000
MOST_TOTALS = 100_000


def workbook_bytes(report: Report) -> bytes:
    """Return the workbook: Summary, Totals, Cash flows, Monthly, Exceptions, Conventions, Inputs, Cautions."""
    content = io.BytesIO()
    options = {
        "strings_to_formulas": False,
        "strings_to_urls": False,
        "strings_to_numbers": False,
        "nan_inf_to_errors": True,
        "in_memory": True,
    }
    with xlsxwriter.Workbook(content, options) as book:
        book.set_properties({"title": report.title, "comments": "Unsigned; not an actuarial opinion."})
        formats = formats_for(book, report.decimals)
        summary = book.add_worksheet("Summary")
        bars = _totals(book, report, formats)
        chart = add_cash_flows(book, report, formats)
        _summary(summary, report, formats, [item for item in (bars, chart) if item is not None])
        add_monthly(book, report, formats)
        _exceptions(book, report, formats)
        _conventions(book, report, formats)
        _inputs(book, report, formats)
        _cautions(book, report, formats)
    return content.getvalue()


def _summary(sheet: Any, report: Report, formats: Formats, charts: Sequence[Any]) -> None:
    total, settings, scale = report.outcome.total, report.outcome.settings, 10**report.decimals
    sheet.set_column(0, 0, 44)
    sheet.set_column(1, 3, 20)
    sheet.set_column(4, 4, 16)
    sheet.hide_gridlines(2)
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)
    text(sheet, 0, 0, report.title, formats.title)
    text(sheet, 1, 0, f"Unsigned. Valuation date {settings.valuation_date.isoformat()}; basis {report.record['basis']['title']}.")
    row = 3
    for name, value in (
        ("value of benefits", total["value_of_benefits"]),
        ("+ value of expenses and commission", total["value_of_expenses"]),
        ("- value of premiums", total["value_of_premiums"]),
        ("rounding (each part is rounded by policy)", report.rounding),
        ("= reserve", total["reserve"]),
    ):
        text(sheet, row, 0, name, formats.head if name.startswith("=") else None)
        sheet.write_number(row, 1, value / scale, formats.money_head if name.startswith("=") else formats.money)
        text(sheet, row, 2, report.currency)
        row += 1
    row = _gate(sheet, row + 1, report, formats)
    sample = report.outcome.sample
    verdict = "both agree" if sample.passes else "THEY DIFFER"
    said = f"Sample valued a second time by the plain implementation: {sample.policies} policies, {verdict}"
    text(sheet, row + 1, 0, f"{said}; largest difference {sample.largest_difference:.1e} {report.currency}.")
    row += 3
    for reason, number in report.record["exceptions_by_reason"].items():
        text(sheet, row, 0, f"exceptions: {reason}")
        sheet.write_number(row, 1, number, formats.count)
        row += 1
    row = _counted(sheet, row + 1, report, formats)
    for chart in charts:
        sheet.insert_chart(row + 1, 0, chart)
        row += 22


def _counted(sheet: Any, row: int, report: Report, formats: Formats) -> int:
    for caution in report.record["cautions"][:4]:
        sheet.merge_range(row, 0, row, 4, "", formats.wrapped)
        text(sheet, row, 0, caution, formats.wrapped)
        sheet.set_row(row, 30)
        row += 1
    text(sheet, row, 0, "All cautions are on the sheet 'Cautions'.")
    return row + 1


def _gate(sheet: Any, row: int, report: Report, formats: Formats) -> int:
    for column, name in enumerate(("in-force gate", "read", "valued", "exceptions", "gate")):
        text(sheet, row, column, name, formats.head if column in (0, 4) else formats.head_right)
    for place, total in enumerate(report.outcome.control):
        row += 1
        text(sheet, row, 0, words(total.name))
        scale, shape = (1, formats.count) if place == 0 else (10**report.decimals, formats.money)
        for column, figure in enumerate((total.read, total.valued, total.exceptions), 1):
            sheet.write_number(row, column, figure / scale, shape)
        text(sheet, row, 4, "closes" if total.closes else "DOES NOT CLOSE")
    return row + 1


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
    put_table(sheet, table, rows, formats, note=f"Amounts in {report.currency}. " + _cut(report.total_rows, MOST_TOTALS))
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
        text(sheet, place, column, label)
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
    chart.set_title({"name": f"Reserve by {name}", "name_font": {"size": 12}, "overlay": False})
    chart.set_x_axis({"name": report.currency, "num_format": "#,##0", "major_gridlines": {"visible": True, "line": {"color": "#d5d9dd"}}})
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
        ["part", "file", "bytes", "size", "policies", "SHA-256"],
        [None, None, formats.count, None, formats.count, None],
        [20, 40, 16, 12, 14, 68],
    )
    rows = [
        (
            item["role"],
            item["path"],
            item.get("bytes"),
            size(item["bytes"]) if "bytes" in item else "",
            item.get("rows"),
            item["sha256"],
        )
        for item in report.record["inputs"]
    ]
    rows.append(("basis and its tables", report.record["basis"]["title"], None, "", None, report.record["basis"]["sha256"]))
    put_table(book.add_worksheet("Inputs"), table, rows, formats, note="Paths are relative to the run document's folder.")


def _cautions(book: Any, report: Report, formats: Formats) -> None:
    table = Table(["caution"], [formats.wrapped], [130])
    rows = [(caution,) for caution in report.record["cautions"]]
    put_table(book.add_worksheet("Cautions"), table, rows, formats, note="To be read with every figure.")


def _cell(value: object) -> object:
    return value if isinstance(value, int | float | str) and not isinstance(value, bool) else "(missing)" if value is None else str(value)


def _cut(rows: Iterable[object] | Sequence[object], most: int) -> str:
    number = len(rows)  # type: ignore[arg-type]
    return f"Only the first {most:,} of {number:,} rows; all are in the Parquet file of the run folder." if number > most else ""
