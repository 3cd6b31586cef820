"""Expected cash flows in the workbook: by calendar year and stream with a chart, and by month."""

from __future__ import annotations

from collections import defaultdict
from datetime import date
from typing import Any

from .figures import words
from .report import Report
from .workbook_sheets import Formats, Table, put_table

MOST_MONTHLY_CELLS = 30_000
"""More would cost more time than a workbook is worth; all of it is in cash_flows.parquet."""

Key = tuple[str, str, str]


def add_cash_flows(book: Any, report: Report, formats: Formats) -> Any:
    """Add the sheet by calendar year and stream; return a run-off chart, or None without cash flows."""
    sheet = book.add_worksheet("Cash flows")
    keys, table = report.stream_years
    rows = []
    for year in report.years:
        cells = table.get(int(year.label), {})
        rows.append([int(year.label), year.paid_out, year.paid_in, year.net, *(cells.get(key) for key in keys)])
    names = ["year", "paid out", "received", "out less in", *map(_name, keys)]
    plain = book.add_format({"num_format": "0", "align": "left"})
    layout = Table(names, [plain, *(formats.money for _ in names[1:])], [10, *(18 for _ in names[1:])])
    note = f"Expected amounts in {report.currency} by calendar year, not discounted. Full detail is in cash_flows.parquet."
    number = put_table(sheet, layout, rows, formats, note=note)
    sheet.freeze_panes(2, 1)
    return _chart(book, sheet, number, report) if number else None


def _chart(book: Any, sheet: Any, rows: int, report: Report) -> Any:
    chart = book.add_chart({"type": "column"})
    for column, colour in ((1, "#3d5a4c"), (2, "#c79a4b")):
        chart.add_series(
            {
                "name": [sheet.name, 1, column],
                "categories": [sheet.name, 2, 0, rows + 1, 0],
                "values": [sheet.name, 2, column, rows + 1, column],
                "fill": {"color": colour},
                "gap": 30,
            }
        )
    chart.set_title({"name": "Expected cash flows by calendar year, undiscounted", "name_font": {"size": 12}})
    chart.set_y_axis(
        {"name": report.currency, "num_format": "#,##0", "major_gridlines": {"visible": True, "line": {"color": "#d5d9dd"}}}
    )
    chart.set_x_axis({"interval_unit": max(1, rows // 16)})
    chart.set_legend({"position": "bottom"})
    chart.set_size({"width": 860, "height": 400})
    return chart


def add_monthly(book: Any, report: Report, formats: Formats) -> None:
    """Add the sheet by calendar month and stream, over all products, as far as it is small enough."""
    sheet = book.add_worksheet("Monthly")
    keys = report.stream_years[0]
    table = _by_month(report)
    most = max(1, MOST_MONTHLY_CELLS // max(1, len(keys)))
    months = sorted(table)
    rows = [[_serial(month), *(table[month].get(key) for key in keys)] for month in months[:most]]
    layout = Table(
        ["month", *map(_name, keys)],
        [formats.month, *(formats.money for _ in keys)],
        [10, *(18 for _ in keys)],
    )
    cut = f" The first {most:,} of {len(months):,} months; all are in cash_flows.parquet." if len(months) > most else ""
    put_table(sheet, layout, rows, formats, note=f"Expected amounts in {report.currency} by calendar month.{cut}")
    sheet.freeze_panes(2, 1)


def _by_month(report: Report) -> dict[date, dict[Key, float]]:
    flows = report.outcome.cash_flows
    summed = flows.group_by(["month", "part", "stream", "direction"]).aggregate([("amount", "sum")])
    table: dict[date, dict[Key, float]] = defaultdict(dict)
    for row in summed.to_pylist():
        table[row["month"]][row["part"], row["stream"], row["direction"]] = float(row["amount_sum"])
    return table


def _serial(day: date) -> int:
    """Return the number under which a workbook knows a date."""
    return (day - date(1899, 12, 30)).days


def _name(key: Key) -> str:
    part, stream, direction = key
    return f"{words(stream)} ({words(part)}, {direction})"
