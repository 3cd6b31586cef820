"""How sheets of the workbook are laid out: formats, tables with a frozen head, text that stays text."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date
from typing import Any

LONGEST_TEXT = 32_767
"""Characters that a cell can hold."""

HIGHEST_ROW = 409
"""Points that a row can be high."""

OPTIONS = {
    "strings_to_formulas": False,
    "strings_to_urls": False,
    "strings_to_numbers": False,
    "nan_inf_to_errors": True,
    "in_memory": True,
}
"""How every workbook is written: text stays text."""

# Workbooks count 29 February 1900, which never was; dates before the day after it would be shown a day off.
FIRST_DATE = date(1900, 3, 1)


@dataclass(frozen=True)
class Formats:
    """The cell formats in use."""

    title: Any
    head: Any
    head_right: Any
    money: Any
    money_head: Any
    whole: Any
    count: Any
    month: Any
    date: Any
    top: Any
    wrapped: Any
    note: Any
    beside: Any


@dataclass(frozen=True)
class Table:
    """Columns of a table: names, cell formats (None: text as it is) and widths in characters.

    numeric: further formats under which a column holds figures, so that its head stands flush right.
    """

    names: Sequence[str]
    formats: Sequence[Any]
    widths: Sequence[float]
    numeric: Sequence[Any] = ()


def formats_for(book: Any, decimals: int) -> Formats:
    """Add the formats to a book."""
    money = "#,##0" + ("." + "0" * decimals if decimals else "")
    return Formats(
        title=book.add_format({"bold": True, "font_size": 14}),
        head=book.add_format({"bold": True, "bottom": 1, "text_wrap": True, "valign": "bottom"}),
        head_right=book.add_format(
            {"bold": True, "bottom": 1, "align": "right", "text_wrap": True, "valign": "bottom"}
        ),
        money=book.add_format({"num_format": money}),
        money_head=book.add_format({"num_format": money, "bold": True, "top": 1}),
        whole=book.add_format({"num_format": "#,##0"}),
        count=book.add_format({"num_format": "#,##0"}),
        month=book.add_format({"num_format": "yyyy-mm", "align": "left"}),
        date=book.add_format({"num_format": "yyyy-mm-dd", "align": "left"}),
        top=book.add_format({"valign": "top", "text_wrap": True}),
        wrapped=book.add_format({"valign": "top", "text_wrap": True, "align": "left"}),
        note=book.add_format({"italic": True, "font_color": "#5c6670"}),
        beside=book.add_format({"indent": 1}),
    )


def put_table(sheet: Any, table: Table, rows: Iterable[Sequence[Any]], formats: Formats, note: str = "") -> int:
    """Write a note, a frozen head and rows; return the number of rows. None leaves a cell empty."""
    text(sheet, 0, 0, note, formats.note)
    for column, (name, shape, width) in enumerate(zip(table.names, table.formats, table.widths, strict=True)):
        numeric = shape in (formats.money, formats.whole, formats.count, *table.numeric)
        text(sheet, 1, column, name, formats.head_right if numeric else formats.head)
        sheet.set_column(column, column, width)
    sheet.freeze_panes(2, 0)
    sheet.repeat_rows(1)
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)
    sheet.set_footer("&L&A&R&P / &N")
    wrapped = [i for i, shape in enumerate(table.formats) if shape in (formats.wrapped, formats.top)]
    number = 0
    for number, row in enumerate(rows, 1):
        for column, value in enumerate(row):
            put(sheet, number + 1, column, value, table.formats[column], formats)
        if wrapped:
            # Not every program makes room for wrapped text by itself.
            lines = max(_lines(row[i], table.widths[i]) for i in wrapped)
            sheet.set_row(number + 1, min(15 * lines, HIGHEST_ROW))
    sheet.print_area(0, 0, number + 1, len(table.names) - 1)
    if number:
        sheet.autofilter(1, 0, number + 1, len(table.names) - 1)
    return number


def put(sheet: Any, row: int, column: int, value: object, shape: Any, formats: Formats) -> None:
    """Write a value as what it is: a date as a date, a number as a number, the rest as text; None not at all."""
    if isinstance(value, date) and value >= FIRST_DATE:
        sheet.write_number(row, column, serial(value), shape or formats.date)
    elif isinstance(value, int | float) and not isinstance(value, bool):
        sheet.write_number(row, column, value, shape)
    elif value is not None:
        text(sheet, row, column, str(value).lower() if isinstance(value, bool) else str(value), shape)


def serial(day: date) -> int:
    """Return the number under which a workbook knows a date."""
    return (day - date(1899, 12, 30)).days


def _lines(value: object, width: float) -> int:
    return max(1, math.ceil(len(str(value)) * 1.08 / width))


def text(sheet: Any, row: int, column: int, value: str, shape: Any = None) -> None:
    """Write text as text, whatever it begins with, cut to what a cell can hold."""
    value = value[:LONGEST_TEXT]
    if value.startswith("<r>") and value.endswith("</r>"):
        # The writer takes such text for markup of its own and would not escape it; in pieces it does.
        pieces = value[0], value[1], value[2:]
        sheet.write_rich_string(row, column, *pieces, *([] if shape is None else [shape]))
    elif value:
        sheet.write_string(row, column, value, shape)
