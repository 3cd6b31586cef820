"""Reading XTbML, the open XML standard for actuarial tables.

A file has one classification and any number of tables, each with axis definitions and values. It is read as
a stream into plain numbers. A document type, an entity or an external reference is an error, so that nothing
in a file can grow or reach out; size, depth and number of values are bounded.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import zip_longest
from pathlib import Path

import numpy as np

from .rate_table import Rows, TableError
from .table_files import NUMBER, file_bytes
from .xtbml_stream import MAX_VALUES, FoundTable, TableStream


@dataclass(frozen=True)
class Axis:
    """One axis: its name and scale in the words of the file, and the ticks that values stand at, ascending.

    An axis along which the values do not run (a table "of duration 3") has its one stated tick, or none.
    """

    name: str
    scale: str
    ticks: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class XtbmlTable:
    """One table of a file, in the file's own words.

    number: place in the file, from 1; title: the table's own description; name, kind and reference: what the
    file says of all its tables; values: one dimension for each of ``axes``, NaN where missing; beside:
    further axes, along which the values do not run.
    """

    number: int
    title: str
    name: str
    kind: str
    reference: str
    axes: tuple[Axis, ...]
    beside: tuple[Axis, ...]
    values: Rows


def read_xtbml(path: Path | str) -> list[XtbmlTable]:
    """Read all tables of an XTbML file in its order, scaling factors applied.

    Any figures are allowed here, since scales of improvement have negative ones. Raises TableError for a file
    that is not there, too large, not well-formed, not XTbML, or hostile.
    """
    from defusedxml.common import DefusedXmlException
    from defusedxml.ElementTree import DefusedXMLParser, ParseError

    stream = TableStream(str(path))
    parser = DefusedXMLParser(target=stream, forbid_dtd=True)
    try:
        parser.feed(file_bytes(path))
        parser.close()
    except TableError:
        raise
    except DefusedXmlException as fault:
        what = type(fault).__name__.removesuffix("Forbidden")
        raise TableError(
            f"{path}: document types, entities and external references are not read ({what}); remove them"
        ) from None
    except (ParseError, ValueError, LookupError) as fault:
        raise TableError(f"{path}: not well-formed XML: {fault}; fetch or export the file again") from None
    return [_table(stream, number, found) for number, found in enumerate(stream.found, 1)]


def _table(stream: TableStream, number: int, found: FoundTable) -> XtbmlTable:
    place = f"{stream.file}: table {number}"
    sizes = {len(here) for here in found.cells}
    if len(sizes) != 1 or not sizes <= {1, 2}:
        said = f"values along {' and '.join(map(str, sorted(sizes)))} axes" if sizes else "no values"
        raise TableError(f"{place}: {said}; one or two axes can be read")
    width = sizes.pop()
    if len(found.axes) < width:
        raise TableError(f"{place}: values run along {width} axes, but {len(found.axes)} are defined")
    ticks = [sorted({here[axis] for here in found.cells}) for axis in range(width)]
    axes = [_axis(about, own) for about, own in zip_longest(found.axes, ticks)]
    return XtbmlTable(
        number=number,
        title=found.about.get("TableDescription", ""),
        name=stream.about.get("TableName", ""),
        kind=stream.about.get("ContentType", ""),
        reference=stream.about.get("TableReference", ""),
        axes=tuple(axes[:width]),
        beside=tuple(axes[width:]),
        values=_grid(found, ticks, place) / _factor(found.about.get("ScalingFactor", ""), place),
    )


def _grid(found: FoundTable, ticks: list[list[int]], place: str) -> Rows:
    if math.prod(map(len, ticks)) > MAX_VALUES:
        raise TableError(f"{place}: its axes span more than {MAX_VALUES} values, the limit")
    values = np.full([len(axis) for axis in ticks], np.nan)
    rows = [{tick: row for row, tick in enumerate(axis)} for axis in ticks]
    where = tuple(np.array([row[here[axis]] for here in found.cells]) for axis, row in enumerate(rows))
    values[where] = list(found.cells.values())
    return values


def _axis(about: dict[str, str], ticks: list[int] | None) -> Axis:
    # The identifier and the name mostly agree; where they do not, both are looked at.
    name = " ".join(dict.fromkeys(filter(None, (about["id"].strip(), about.get("AxisName", "")))))
    if ticks is None:
        low, high = about.get("MinScaleValue", ""), about.get("MaxScaleValue", "")
        ticks = [int(low)] if low == high and low.isascii() and low.isdigit() and len(low) < 7 else []
    return Axis(name, about.get("ScaleType", ""), tuple(ticks))


def _factor(text: str, place: str) -> float:
    """Return what the values were multiplied by: none for 0 or no factor, else a power of ten."""
    number = float(text) if NUMBER.fullmatch(text) else math.nan if text else 0.0
    if number == 0:
        return 1.0
    # Powers of ten only: any other figure is more likely a number of places or a slip than a multiplier.
    if not 1 <= number <= 1e9 or 10 ** round(math.log10(number)) != number:
        raise TableError(f"{place}: scaling factor '{text[:40]}'; it must be 0 for none or 10, 100, 1000 ...")
    return number
