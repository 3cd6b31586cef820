"""Expected cash flows in the workbook: by calendar year and stream with a chart, and by month."""

from __future__ import annotations

from collections import defaultdict
from datetime import date
from typing import Any

from .figures import visible, words
from .report import Report
from .workbook_sheets import Formats, Table, put_table

MOST_MONTHS = 360
"""Months shown; a workbook with more takes longer than it is worth."""

EPOCH = date(1970, 1, 1).toordinal()

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
    note = f"Expected amounts in {report.currency} by calendar year, not discounted; all in cash_flows.parquet."
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
        {
            "name": visible(report.currency),
            "num_format": "#,##0",
            "major_gridlines": {"visible": True, "line": {"color": "#d5d9dd"}},
        }
    )
    chart.set_x_axis({"interval_unit": max(1, rows // 16)})
    chart.set_legend({"position": "bottom"})
    chart.set_size({"width": 860, "height": 400})
    return chart


def add_monthly(book: Any, report: Report, formats: Formats) -> None:
    """Add the sheet by calendar month and part, over all products and streams."""
    sheet = book.add_worksheet("Monthly")
    table = _by_month(report)
    keys = sorted({key for row in table.values() for key in row})
    months = sorted(month for month, row in table.items() if any(row.values()))
    rows = [[month, *(table[month].get(key) for key in keys)] for month in months[:MOST_MONTHS]]
    layout = Table(
        ["month", *(f"{words(part)} ({direction})" for part, direction in keys)],
        [formats.month, *(formats.money for _ in keys)],
        [10, *(18 for _ in keys)],
    )
    cut = f"the first {MOST_MONTHS} of {len(months):,} months" if len(months) > MOST_MONTHS else "not discounted"
    note = f"Expected amounts in {report.currency} by calendar month, {cut}; all in cash_flows.parquet."
    put_table(sheet, layout, rows, formats, note=note)
    sheet.freeze_panes(2, 1)


def _by_month(report: Report) -> dict[date, dict[tuple[str, str], float]]:
    """Amounts by month, part and direction; added row by row, so that the last bits are the same every time."""
    import numpy as np

    flows = report.outcome.cash_flows
    part, direction = (flows.column(name).combine_chunks() for name in ("part", "direction"))
    parts, directions = (column.dictionary_encode() for column in (part, direction))
    months, at = np.unique(flows.column("month").cast("int32").to_numpy(), return_inverse=True)
    ways = len(directions.dictionary)
    codes = parts.indices.to_numpy(zero_copy_only=False) * ways + directions.indices.to_numpy(zero_copy_only=False)
    width = len(parts.dictionary) * ways
    cells = at * width + codes
    sums = np.bincount(cells, weights=flows.column("amount").to_numpy(), minlength=len(months) * width)
    met = np.bincount(cells, minlength=len(months) * width)
    keys = [(one, other) for one in parts.dictionary.to_pylist() for other in directions.dictionary.to_pylist()]
    table: dict[date, dict[tuple[str, str], float]] = defaultdict(dict)
    for place in np.flatnonzero(met).tolist():
        month, key = divmod(place, width)
        table[date.fromordinal(int(months[month]) + EPOCH)][keys[key]] = float(sums[place])
    return table


def _name(key: Key) -> str:
    part, stream, direction = key
    return f"{words(stream)} ({words(part)}, {direction})"
