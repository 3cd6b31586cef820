"""What the XML parser calls for each start, text and end while it reads an XTbML file."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import NoReturn

from .rate_table import TableError
from .table_files import NUMBER

MAX_DEPTH = 24
"""Deepest nesting of elements; the standard itself needs 7."""
MAX_VALUES = 1_000_000
"""Most values in one file."""
MAX_TEXT = 200_000
"""Most characters of one piece of text."""

_ABOUT_FILE = ("TableName", "TableReference", "ContentType")
_ABOUT_TABLE = ("ScalingFactor", "TableDescription")
_ABOUT_AXIS = ("ScaleType", "AxisName", "MinScaleValue", "MaxScaleValue")

Ticks = tuple[int, ...]


@dataclass
class FoundTable:
    """One table as it stands in the file: words about it, about its axes, and values by their ticks."""

    about: dict[str, str] = field(default_factory=dict)
    axes: list[dict[str, str]] = field(default_factory=list)
    cells: dict[Ticks, float] = field(default_factory=dict)
    outer: set[Ticks] = field(default_factory=set)


class TableStream:
    """Keeps what tables are made of and passes over everything else.

    Raises TableError at the first fault, so that a hostile file is left where it turns hostile.
    """

    def __init__(self, file: str) -> None:
        self.file = file
        self.about: dict[str, str] = {}
        self.found: list[FoundTable] = []
        self._path: list[str] = []
        self._ticks: list[int | None] = []
        self._text: list[str] = []
        self._length = 0
        self._count = 0

    def start(self, tag: str, attributes: dict[str, str]) -> None:
        """Begin an element; names count without their namespace."""
        tag = tag.rpartition("}")[2]
        path = self._path
        if not path and tag != "XTbML":
            self._fail(f"the root element is '{tag[:80]}', not 'XTbML'; is this a table file?")
        path.append(tag)
        if len(path) > MAX_DEPTH:
            self._fail(f"elements lie more than {MAX_DEPTH} deep, the limit")
        self._forget_text()
        if len(path) < 2 or path[1] != "Table":
            return
        if len(path) == 2:
            self.found.append(FoundTable())
        elif len(path) > 3 and path[2] == "Values":
            self._start_value(tag, attributes)
        elif len(path) == 4 and tag == "AxisDef":
            self.found[-1].axes.append({"id": attributes.get("id", "")})

    def data(self, text: str) -> None:
        """Take a piece of text."""
        self._length += len(text)
        if self._length > MAX_TEXT:
            self._fail(f"a text of more than {MAX_TEXT} characters, the limit")
        self._text.append(text)

    def end(self, _tag: str) -> None:
        """End an element; its text counts only if it has no elements inside."""
        path = self._path
        tag = path.pop()
        if len(path) == 2 and path[1] == "ContentClassification" and tag in _ABOUT_FILE:
            self.about[tag] = self._words()
        elif len(path) > 2 and path[1] == "Table":
            if path[2] == "Values":
                if tag == "Y":
                    self._value()
                self._ticks.pop()
            elif len(path) == 3 and tag in _ABOUT_TABLE:
                self.found[-1].about[tag] = self._words()
            elif len(path) == 4 and path[3] == "AxisDef" and tag in _ABOUT_AXIS:
                self.found[-1].axes[-1][tag] = self._words()
        self._forget_text()

    def close(self) -> None:
        """Refuse a file without tables."""
        if not self.found:
            self._fail("no table in it; an XTbML file needs at least one 'Table' element")

    def _start_value(self, tag: str, attributes: dict[str, str]) -> None:
        if tag not in ("Axis", "Y"):
            self._fail(f"{self._place()}: '{tag[:80]}' among the values; only 'Axis' and 'Y' belong there")
        # An Axis without a tick only encloses the values of the innermost axis.
        tick = self._whole(attributes.get("t", "")) if "t" in attributes or tag == "Y" else None
        self._ticks.append(tick)
        if tag == "Axis" and tick is not None:
            here, outer = self._here(), self.found[-1].outer
            if here in outer:
                self._fail(f"{self._place()}: the axis value {tick} is there twice; remove one")
            outer.add(here)

    def _value(self) -> None:
        cells, here, text = self.found[-1].cells, self._here(), "".join(self._text).strip()
        self._count += 1
        if self._count > MAX_VALUES:
            self._fail(f"more than {MAX_VALUES} values, the limit")
        if here in cells:
            self._fail(f"{self._place()}: two values at {_and(here)}; remove one")
        value = float(text) if NUMBER.fullmatch(text) else math.nan
        if text and not math.isfinite(value):
            self._fail(f"{self._place()}: '{text[:40]}' at {_and(here)} is no number; write a plain figure")
        cells[here] = value

    def _whole(self, text: str) -> int:
        if len(text) < 7 and text.isascii() and text.isdigit():
            return int(text)
        number = float(text) if NUMBER.fullmatch(text.strip()) else math.nan
        if number % 1 or abs(number) > 1e6:
            self._fail(f"{self._place()}: axis value '{text[:40]}' is no whole number")
        return int(number)

    def _here(self) -> Ticks:
        return tuple([tick for tick in self._ticks if tick is not None])

    def _words(self) -> str:
        return " ".join("".join(self._text).split())

    def _forget_text(self) -> None:
        self._text.clear()
        self._length = 0

    def _place(self) -> str:
        return f"table {len(self.found)}"

    def _fail(self, fault: str) -> NoReturn:
        raise TableError(f"{self.file}: {fault}")


def _and(ticks: Ticks) -> str:
    return " and ".join(map(str, ticks))
