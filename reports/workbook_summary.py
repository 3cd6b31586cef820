"""The first sheet of the workbook."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from .figures import words
from .report import Report
from .workbook_sheets import Formats, text


def fill_summary(sheet: Any, report: Report, formats: Formats, charts: Sequence[Any]) -> None:
    """Fill the first sheet: reserve and parts, gate, sample, exceptions, cautions and the charts."""
    total, settings, scale = report.outcome.total, report.outcome.settings, 10**report.decimals
    sheet.set_column(0, 0, 44)
    sheet.set_column(1, 3, 20)
    sheet.set_column(4, 4, 16)
    sheet.hide_gridlines(2)
    sheet.set_portrait()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 1)
    text(sheet, 0, 0, report.title, formats.title)
    text(
        sheet,
        1,
        0,
        f"Unsigned. Valuation date {settings.valuation_date}; basis {report.record['basis']['title']}.",
    )
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
        text(sheet, row, 2, report.currency, formats.beside)
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
        text(sheet, row, 4, "closes" if total.closes else "DOES NOT CLOSE", formats.beside)
    return row + 1
