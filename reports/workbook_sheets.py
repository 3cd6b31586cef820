"""How sheets of the workbook are laid out: formats, tables with a frozen head, text that stays text."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

LONGEST_TEXT = 32_767
"""Characters that a cell can hold."""


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
    top: Any
    wrapped: Any
    note: Any
    beside: Any


@dataclass(frozen=True)
class Table:
    """Columns of a table: names, cell formats (None: text as it is) and widths in characters."""

    names: Sequence[str]
    formats: Sequence[Any]
    widths: Sequence[float]


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
        top=book.add_format({"valign": "top", "text_wrap": True}),
        wrapped=book.add_format({"valign": "top", "text_wrap": True}),
        note=book.add_format({"italic": True, "font_color": "#5c6670"}),
        beside=book.add_format({"indent": 1}),
    )


def put_table(
    sheet: Any, table: Table, rows: Iterable[Sequence[Any]], formats: Formats, note: str = ""
) -> int:
    """Write a note, a frozen head and rows; return the number of rows. None leaves a cell empty."""
    text(sheet, 0, 0, note, formats.note)
    for column, (name, shape, width) in enumerate(zip(table.names, table.formats, table.widths, strict=True)):
        numeric = shape in (formats.money, formats.whole, formats.count)
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
            if isinstance(value, str):
                text(sheet, number + 1, column, value, table.formats[column])
            elif value is not None:
                sheet.write_number(number + 1, column, value, table.formats[column])
        if wrapped:
            # Not every program makes room for wrapped text by itself.
            sheet.set_row(number + 1, 15 * max(_lines(row[i], table.widths[i]) for i in wrapped))
    sheet.print_area(0, 0, number + 1, len(table.names) - 1)
    if number:
        sheet.autofilter(1, 0, number + 1, len(table.names) - 1)
    return number


def _lines(value: object, width: float) -> int:
    return max(1, math.ceil(len(str(value)) * 1.08 / width))


def text(sheet: Any, row: int, column: int, value: str, shape: Any = None) -> None:
    """Write text as text, whatever it begins with, cut to what a cell can hold."""
    if value:
        sheet.write_string(row, column, value[:LONGEST_TEXT], shape)
