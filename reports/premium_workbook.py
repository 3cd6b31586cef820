"""The workbook of a premium run. Text stays text: nothing from the inputs can become a formula or a link."""

from __future__ import annotations

import io
import math
from typing import Any

import xlsxwriter

from .figures import visible, words
from .premium_run import PremiumReport, findings_table
from .rate_tables import cross_tables, decimals_of
from .workbook_sheets import OPTIONS, Formats, Table, formats_for, put, put_table, text

MOST_ROWS = 500_000


def premium_workbook(report: PremiumReport) -> bytes:
    """Return the workbook: rate tables, all figures of every cell, findings, conventions, inputs, cautions."""
    content = io.BytesIO()
    with xlsxwriter.Workbook(content, OPTIONS) as book:
        book.set_properties({"title": visible(report.title), "comments": "Unsigned; not an actuarial opinion."})
        formats = formats_for(book, report.premiums.document.decimals)
        _rates(book, report, formats)
        _cells(book, report, formats)
        _findings(book, report, formats)
        for name, rows, heads, widths in _lists(report):
            put_table(book.add_worksheet(name), Table(heads, [formats.wrapped] * len(heads), widths), rows, formats)
    return content.getvalue()


def _rates(book: Any, report: PremiumReport, formats: Formats) -> None:
    sheet = book.add_worksheet("Rates")
    document = report.premiums.document
    digits = decimals_of(document.rounding.to)
    shape = book.add_format({"num_format": "#,##0" + ("." + "0" * digits if digits else "")})
    per = f", per {document.size.per:,.10g} of {words(document.size.column)}" if document.size else ""
    text(sheet, 0, 0, report.title, formats.title)
    text(sheet, 1, 0, f"Unsigned. {words(document.unknown)}{per}, in {report.currency}; sold on {document.sale_date}.")
    sheet.set_column(0, 0, 18)
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)
    row = 3
    for table in cross_tables(report.premiums):
        text(sheet, row, 0, table.others, formats.head)
        text(sheet, row + 1, 0, " \\ ".join(words(name) for name in (table.rows, table.columns) if name), formats.head)
        for column, value in enumerate(table.column_values, 1):
            put(sheet, row + 1, column, value, formats.head_right, formats)
        first = row + 2
        for row, (value, rates) in enumerate(zip(table.row_values, table.rates.tolist(), strict=True), first):
            put(sheet, row, 0, value, None, formats)
            for column, rate in enumerate(rates, 1):
                if not math.isnan(rate):
                    sheet.write_number(row, column, rate, shape)
        colours = {"type": "2_color_scale", "min_color": "#f3f4f2", "max_color": "#c79a4b"}
        sheet.conditional_format(first, 1, row, len(table.column_values), colours)
        row += 2


def _cells(book: Any, report: PremiumReport, formats: Formats) -> None:
    table = report.premiums.table.slice(0, MOST_ROWS)
    names = table.column_names
    money = ("amount", "charged", "value_of_benefits", "value_of_expenses", "value_of_premiums", "size_at")
    shapes = [formats.money if name in money else None for name in names]
    columns = [[_there(value) for value in table.column(name).to_pylist()] for name in names]
    layout = Table([words(name) for name in names], shapes, [40 if name == "why" else 18 for name in names])
    note = f"Amounts in {report.currency}, at the amount that meets the target; 'charged' is at the rounded rate."
    put_table(book.add_worksheet("Cells"), layout, zip(*columns, strict=True), formats, note=note)


def _there(value: object) -> object:
    return None if isinstance(value, float) and math.isnan(value) else value


def _findings(book: Any, report: PremiumReport, formats: Formats) -> None:
    table = findings_table(report.premiums)
    rows = [tuple(row.values()) for row in table.slice(0, MOST_ROWS).to_pylist()]
    layout = Table(table.column_names, [None, None, formats.wrapped, formats.wrapped], [24, 20, 44, 90])
    put_table(book.add_worksheet("Findings"), layout, rows, formats, note="What the checks of the document found.")


def _lists(report: PremiumReport) -> list[tuple[str, list[tuple[Any, ...]], list[str], list[float]]]:
    record = report.record
    conventions = [(row["matter"], row["rule"]) for row in record["conventions"]]
    inputs = [(item["role"], item["path"], item["sha256"]) for item in record["inputs"]]
    return [
        ("Conventions", conventions, ["matter", "rule"], [34, 110]),
        ("Inputs", inputs, ["part", "file", "SHA-256"], [20, 40, 70]),
        ("Cautions", [(caution,) for caution in record["cautions"]], ["caution"], [110]),
    ]
