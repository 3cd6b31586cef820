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

# Where things stand.
_TABLE = ["XTbML", "Table"]
_VALUES = [*_TABLE, "Values"]
_META = [*_TABLE, "MetaData"]
_AXIS = [*_META, "AxisDef"]
_ABOUT = ["XTbML", "ContentClassification"]

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
        self._text: list[str] = []
        # Open elements among values, each with the ticks that lead to it; the cells are the values' table.
        self._open: list[Ticks] = []
        self._cells: dict[Ticks, float] | None = None
        self._count = 0

    def start(self, tag: str, attributes: dict[str, str]) -> None:
        """Begin an element; names count without their namespace."""
        self._text.clear()
        tag = tag.rpartition("}")[2]
        if self._cells is not None:
            self._start_value(tag, attributes)
            return
        path = self._path
        if not path and tag != "XTbML":
            self._fail(f"the root element is '{tag[:80]}', not 'XTbML'; is this a table file?")
        path.append(tag)
        if len(path) > MAX_DEPTH:
            self._fail(f"elements lie more than {MAX_DEPTH} deep, the limit")
        if path == _TABLE:
            self.found.append(FoundTable())
        elif path == _VALUES:
            self._cells = self.found[-1].cells
        elif path == _AXIS:
            self.found[-1].axes.append({"id": attributes.get("id", "")})

    def data(self, text: str) -> None:
        """Take a piece of text."""
        self._text.append(text)

    def end(self, tag: str) -> None:
        """End an element; its text counts if it has no elements inside."""
        if self._open:
            self._end_value(tag)
        else:
            self._cells = None
            tag = self._path.pop()
            if self._path == _ABOUT and tag in _ABOUT_FILE:
                self.about[tag] = self._words()
            elif self._path == _META and tag in _ABOUT_TABLE:
                self.found[-1].about[tag] = self._words()
            elif self._path == _AXIS and tag in _ABOUT_AXIS:
                self.found[-1].axes[-1][tag] = self._words()
        self._text.clear()

    def close(self) -> None:
        """Refuse a file without tables."""
        if not self.found:
            self._fail("no table in it; an XTbML file needs at least one 'Table' element")

    def _start_value(self, tag: str, attributes: dict[str, str]) -> None:
        if tag != "Y" and tag != "Axis":
            self._fail(f"{self._place()}: '{tag[:80]}' among the values; only 'Axis' and 'Y' belong there")
        here = self._open[-1] if self._open else ()
        # An Axis without a tick only encloses the values of the innermost axis.
        if tag == "Y":
            here = (*here, self._whole(attributes.get("t", "")))
        elif "t" in attributes:
            here = (*here, self._whole(attributes["t"]))
            if here in self.found[-1].outer:
                self._fail(f"{self._place()}: the axis value {here[-1]} is there twice; remove one")
            self.found[-1].outer.add(here)
        self._open.append(here)
        if len(self._open) > MAX_DEPTH:
            self._fail(f"elements lie more than {MAX_DEPTH} deep, the limit")

    def _end_value(self, tag: str) -> None:
        here = self._open.pop()
        cells = self._cells
        if cells is None or not tag.endswith("Y"):
            return
        text = "".join(self._text).strip()
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

    def _words(self) -> str:
        return " ".join("".join(self._text).split())

    def _place(self) -> str:
        return f"table {len(self.found)}"

    def _fail(self, fault: str) -> NoReturn:
        raise TableError(f"{self.file}: {fault}")


def _and(ticks: Ticks) -> str:
    return " and ".join(map(str, ticks))
