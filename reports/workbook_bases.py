"""The sheet of the workbook that holds the bases side by side."""

from __future__ import annotations

from typing import Any

from projection.results import MONEY_COLUMNS

from .figures import words
from .report import Report
from .workbook_sheets import Formats, Table, put_table, text

MOST_GROUPS = 100_000


def add_bases(book: Any, report: Report, formats: Formats) -> None:
    """Add the sheet: sums by basis, below them the reserve by product and basis."""
    sheet = book.add_worksheet("Bases")
    names = ["basis", "title", *map(words, MONEY_COLUMNS), "reserve less the first"]
    table = Table(names, [None, None, *[formats.money] * 5], [24, 40, *[20] * 5])
    scale = 10**report.decimals
    own = report.outcome.total["reserve"]
    rows = [
        [
            name or "(the run's own)",
            title,
            *(total[column] / scale for column in MONEY_COLUMNS),
            (total["reserve"] - own) / scale,
        ]
        for name, title, total in report.basis_rows
    ]
    note = f"Amounts in {report.currency}; every policy valued is valued on each basis."
    put_table(sheet, table, rows, formats, note=note)
    if report.bar_group is not None:
        _by_group(sheet, len(rows) + 4, report, formats)


def _by_group(sheet: Any, row: int, report: Report, formats: Formats) -> None:
    text(sheet, row, 0, words(report.bar_group or ""), formats.head)
    for column, (name, title, _) in enumerate(report.basis_rows, 2):
        text(sheet, row, column, f"reserve, {name or title}", formats.head_right)
    for place, (group, reserves) in enumerate(report.reserves_by_group[:MOST_GROUPS], row + 1):
        text(sheet, place, 0, group)
        for column, reserve in enumerate(reserves, 2):
            sheet.write_number(place, column, reserve, formats.money)
