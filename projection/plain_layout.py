"""Plain text for the working of a policy: aligned columns, numbers and dates as a reader expects them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any


def table(headings: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    """Return lines of right-aligned columns under their headings."""
    widths = [max(len(row[place]) for row in [headings, *rows]) for place in range(len(headings))]
    return [
        "  " + "  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True))
        for row in [headings, *rows]
    ]


def pairs(facts: Iterable[tuple[str, str]]) -> list[str]:
    """Return lines of names and what they are."""
    facts = list(facts)
    width = max(len(name) for name, _ in facts)
    return [f"  {name.ljust(width)}  {what}" for name, what in facts]


def money(amount: float, decimals: int) -> str:
    """Return an amount with thousands separators, rounded half-even, never as minus nought."""
    return f"{round(amount, decimals) + 0.0:,.{decimals}f}"


def plain(value: Any) -> str:
    """Return a value of the extract as one line; control characters, which could deceive, become '?'."""
    return "".join(letter if letter.isprintable() else "?" for letter in str(value))
