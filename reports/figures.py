"""Figures as people read them: thousands separators, ISO dates, units."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from decimal import Decimal

_DECEIVING = re.compile("[\x00-\x09\x0b-\x1f\x7f-\x9f\u200e\u200f\u2028-\u202e\u2066-\u2069\ufffe\uffff]")


def count(number: int) -> str:
    """Return 1234567 as 1,234,567."""
    return f"{number:,}"


def counted(number: int, one: str, many: str = "") -> str:
    """Return '1 policy' or '2,000 policies'."""
    return f"{number:,} {one if number == 1 else many or one + 's'}"


def decimal_text(minor: int, decimals: int) -> str:
    """Return minor units as an exact decimal without separators, as records hold it: 123456 as 1234.56."""
    sign, digits = "-" if minor < 0 else "", str(abs(minor)).rjust(decimals + 1, "0")
    return f"{sign}{digits[:-decimals]}.{digits[-decimals:]}" if decimals else sign + digits


def minor_units(text: str, decimals: int) -> int:
    """Return the minor units that an exact decimal stands for; the reverse of ``decimal_text``."""
    return int(Decimal(text).scaleb(decimals))


def money(minor: int, decimals: int) -> str:
    """Return minor units as an exact amount of currency: 123456 as 1,234.56."""
    whole, rest = divmod(abs(minor), 10**decimals)
    return f"{'-' if minor < 0 else ''}{whole:,}" + (f".{rest:0{decimals}d}" if decimals else "")


def amount(value: float, decimals: int) -> str:
    """Return an amount in currency, rounded to the decimals; never a negative nothing."""
    text = f"{value:,.{decimals}f}"
    return text[1:] if text.startswith("-") and not text.strip("-0.,") else text


def seconds(value: float) -> str:
    """Return a time taken, from milliseconds to hours."""
    if value < 1:
        return f"{value * 1000:.0f} ms"
    if value < 100:
        return f"{value:.2f} s"
    minutes, rest = divmod(round(value), 60)
    return f"{minutes // 60} h {minutes % 60} min" if minutes >= 60 else f"{minutes} min {rest} s"


def size(number: int) -> str:
    """Return a size in bytes, kilobytes (1,000 bytes), megabytes or gigabytes."""
    value = float(number)
    for unit in ("bytes", "kB", "MB"):
        if value < 1000:
            return f"{value:,.0f} {unit}" if unit == "bytes" or value >= 100 else f"{value:.1f} {unit}"
        value /= 1000
    return f"{value:,.1f} GB"


def words(name: str) -> str:
    """Return a column or setting name as words: 'sum_assured' as 'sum assured'."""
    return name.replace("_", " ")


def visible(text: str) -> str:
    """Return text with '?' for control characters and marks that turn the direction: both could deceive."""
    return _DECEIVING.sub("?", text)


def short(text: str, most: int = 60) -> str:
    """Return text of at most so many letters, its end cut off where it is longer."""
    return text if len(text) <= most else text[: most - 3] + "..."


def shown(value: object) -> str:
    """Return a cell of a group column as text; a missing value is said in words."""
    return "(missing)" if value is None or value == "" else str(value)


def lines_up(rows: Iterable[Sequence[str]], right: Iterable[int] = (), gap: str = "  ") -> list[str]:
    """Return rows of text as lines whose columns line up; the columns in ``right`` are set flush right."""
    table, flush = [list(row) for row in rows], set(right)
    if not table:
        return []
    widths = [max(len(row[i]) for row in table if i < len(row)) for i in range(max(map(len, table)))]
    return [
        gap.join(cell.rjust(widths[i]) if i in flush else cell.ljust(widths[i]) for i, cell in enumerate(row)).rstrip()
        for row in table
    ]
