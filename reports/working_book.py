"""The working of one policy as a workbook: figures as numbers, dates as dates, text never a formula."""

from __future__ import annotations

import io
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import xlsxwriter

from projection.sheet import convention_sheet
from projection.working import LEGEND

from .cautions import GENERAL, ONE_SCENARIO, OUTSIDE_THE_MODEL
from .figures import visible
from .workbook_sheets import OPTIONS, Formats, Table, formats_for, put, put_table, text
from .working_facts import (
    Row,
    Working,
    derived_rows,
    extract_rows,
    lapse_rows,
    mortality_rows,
    payment_rows,
    rule_rows,
    step_rows,
    stream_rows,
)

PAYMENT_COLUMNS = (
    "stream", "part", "direction", "point", "date", "survival", "persistency", "probability", "t", "discount",
    "policy year", "relative", "payment", "expected", "value",
)  # fmt: skip
STEP_COLUMNS = ("point", "date", "t", "discount", "persistency", "lapses")
OF_A_LIFE = ("age", "q", "survival", "deaths")
"""Columns of the steps for each life; the payments have the first two."""

SYMBOLS = (
    *((name.replace("persist.", "persistency"), said.replace("listed above", "on 'Rules'")) for name, said in LEGEND),
    ("probability", "survival x persistency"),
    ("deaths", "probability from the valuation date to die in the step that ends at the point"),
    ("lapses", "share of those still in force that lapses in the step that ends at the point"),
    ("policy year", "from 1; the one of the relative amount"),
)


@dataclass(frozen=True)
class Shapes:
    """Formats that only this workbook needs: probabilities and factors, ages and times, money not rounded."""

    factor: Any
    time: Any
    fine: Any

    @property
    def all(self) -> tuple[Any, ...]:
        """Every one of them; they all hold figures."""
        return self.factor, self.time, self.fine


def working_bytes(working: Working, currency: str = "") -> bytes:
    """Return the workbook: the reserve first, then what it rests on, down to every single payment."""
    content = io.BytesIO()
    with xlsxwriter.Workbook(content, OPTIONS) as book:
        title = visible(f"Working of policy {working.policy_id}")
        book.set_properties({"title": title[:250], "comments": "Unsigned; not an actuarial opinion."})
        formats = formats_for(book, working.settings.decimals)
        shapes = Shapes(
            *(book.add_format({"num_format": shape}) for shape in ("0.000000000", "0.000000", "#,##0.000000"))
        )
        _reserve(book, working, formats, shapes, currency)
        _policy(book, working, formats)
        conventions = convention_sheet(working.basis, working.settings)
        _listed(book, "Conventions", ("matter", "rule"), conventions, formats, "What every number means.")
        _rules(book, working, formats)
        _rates(book, working, formats, shapes)
        _steps(book, working, formats, shapes)
        _payments(book, working, formats, shapes)
        _listed(book, "Symbols", ("symbol", "meaning"), SYMBOLS, formats, "Heads of the sheets 'Steps' and 'Payments'.")
        cautions = [(caution,) for caution in (*GENERAL, ONE_SCENARIO, OUTSIDE_THE_MODEL)]
        _listed(book, "Cautions", ("caution",), cautions, formats, "To be read with every figure.")
    return content.getvalue()


def _reserve(book: Any, working: Working, formats: Formats, shapes: Shapes, currency: str) -> None:
    """Add the first sheet: the streams and their sums, the parts, the reserve."""
    sheet = book.add_worksheet("Reserve")
    value, decimals = working.value, working.settings.decimals
    titled = f"{working.design.code} {working.design.title}".rstrip()
    table = Table(
        ["stream", "part", "direction", "payments", "expected, not discounted", "value"],
        [None, None, None, formats.count, shapes.fine, shapes.fine],
        [34, 14, 12, 12, 24, 24],
        shapes.all,
    )
    unit = f" Amounts in {currency}." if currency else ""
    note = f"Working of policy {working.policy_id}: {titled}; valuation date {working.settings.valuation_date}.{unit}"
    row = 2 + put_table(sheet, table, stream_rows(working), formats, note=note)
    if row == 2:
        text(sheet, row, 0, "No payment is still to come.")
        row += 1
    sums = (
        ("value of benefits", value.benefits, None),
        ("+ value of expenses, with commission", value.expenses, None),
        ("- value of premiums", value.premiums, None),
        ("= reserve, not rounded", value.reserve, formats.head),
    )
    for row, (name, figure, shape) in enumerate(sums, row + 1):  # noqa: B020 - goes on below what stands there
        text(sheet, row, 0, name, shape)
        put(sheet, row, 5, figure, shapes.fine, formats)
    text(sheet, row + 1, 0, "reserve, rounded half to even", formats.head)
    # Adding nought turns minus nought, which half to even may give, into nought.
    put(sheet, row + 1, 5, round(value.reserve, decimals) + 0.0, formats.money_head, formats)
    text(sheet, row + 3, 0, "Unsigned: a qualified person must judge this working; it is not an actuarial opinion.")
    sheet.print_area(0, 0, row + 3, len(table.names) - 1)


def _policy(book: Any, working: Working, formats: Formats) -> None:
    sheet = book.add_worksheet("Policy")
    left = book.add_format({"align": "left", "num_format": "General"})
    dates = book.add_format({"align": "left", "num_format": "yyyy-mm-dd"})
    table = Table(["what", "value", "unit", "meaning"], [None, None, None, formats.wrapped], [28, 26, 18, 70])
    rows = [
        *extract_rows(working),
        *((name, value, "", meaning) for name, value, meaning in derived_rows(working)),
    ]
    note = "The policy as in the extract, and what follows from its dates."
    put_table(sheet, table, [(name, None, *rest) for name, _, *rest in rows], formats, note=note)
    for row, (_, value, *_rest) in enumerate(rows, 2):
        put(sheet, row, 1, value, dates if hasattr(value, "year") else left, formats)


def _listed(book: Any, name: str, names: Sequence[str], rows: Iterable[Row], formats: Formats, note: str) -> None:
    """Add a sheet of long text: one column of it, and beside it what it is about."""
    shapes = [*(formats.top for _ in names[1:]), formats.wrapped]
    table = Table(names, shapes, [*(34 for _ in names[1:]), 110])
    put_table(book.add_worksheet(name), table, rows, formats, note=note)


def _rules(book: Any, working: Working, formats: Formats) -> None:
    left = book.add_format({"align": "left", "valign": "top", "num_format": "General"})
    table = Table(["part", "rule", "key", "value"], [formats.top, left, formats.top, formats.wrapped], [34, 8, 24, 90])
    note = "The rules of the basis that fit this policy; rules are numbered from 1 in each part."
    sheet = book.add_worksheet("Rules")
    put_table(sheet, table, rule_rows(working), formats, note=note)


def _rates(book: Any, working: Working, formats: Formats, shapes: Shapes) -> None:
    columns = [None, formats.whole, shapes.time, shapes.factor]
    table = Table(["life", "year", "from age", "q"], columns, [10, 10, 14, 16], shapes.all)
    note = "Yearly rates of death, adjusted as on the sheet 'Rules'; year 0 starts at commencement."
    put_table(book.add_worksheet("Mortality rates"), table, mortality_rows(working), formats, note=note)
    table = Table(["policy year", "w"], [formats.whole, shapes.factor], [14, 16], shapes.all)
    rows = lapse_rows(working)
    note = "Yearly rates of lapse, up to 'until' on the sheet 'Rules'." if rows else "From now on nobody lapses."
    put_table(book.add_worksheet("Lapse rates"), table, rows, formats, note=note)


def _steps(book: Any, working: Working, formats: Formats, shapes: Shapes) -> None:
    factor = shapes.factor
    lives = len(working.lives)
    states = working.of_states
    columns = [formats.whole, formats.date, shapes.time, *[factor] * 3, *[shapes.time, *[factor] * 3] * lives]
    columns += [factor] * len(states)
    widths = [8, 12, 12, *[14] * 3, *[12, *[14] * 3] * lives, *[18] * len(states)]
    table = Table([*STEP_COLUMNS, *_of_lives(working, OF_A_LIFE), *states], columns, widths, shapes.all)
    note = "By step; survival and persistency from the valuation date, deaths and lapses of the step that ends there."
    sheet = book.add_worksheet("Steps")
    put_table(sheet, table, step_rows(working), formats, note=note)
    sheet.freeze_panes(2, 2)


def _payments(book: Any, working: Working, formats: Formats, shapes: Shapes) -> None:
    factor, fine = shapes.factor, shapes.fine
    lives = len(working.lives)
    columns = [
        None, None, None, formats.whole, formats.date, *[factor] * 3, shapes.time, factor, formats.whole,
        shapes.time, fine, fine, fine, *[shapes.time, factor] * lives,
    ]  # fmt: skip
    widths = [22, 10, 10, 8, 12, *[14] * 3, 12, 14, 8, 12, 18, 18, 18, *[12, 14] * lives]
    table = Table([*PAYMENT_COLUMNS, *_of_lives(working, OF_A_LIFE[:2])], columns, widths, shapes.all)
    note = "Every payment to come: expected = payment x probability, value = expected x discount."
    sheet = book.add_worksheet("Payments")
    put_table(sheet, table, payment_rows(working), formats, note=note)
    sheet.freeze_panes(2, 1)


def _of_lives(working: Working, names: Sequence[str]) -> list[str]:
    """Return the heads of the columns of each life."""
    return [name if life == "life" else f"{name} of {life}" for life, _ in working.lives for name in names]
