"""Checks of a rate table: does it rise and fall as it should, is it smooth, do neighbouring cells contradict."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from .premium_document import BAND, PremiumDocument

Numbers = NDArray[np.float64]


class Finding(NamedTuple):
    """A breach: which check, along which axis, in which cell, and in words."""

    check: str
    axis: str
    cell: dict[str, Any]
    said: str


def findings_of(document: PremiumDocument, rates: Numbers, price: bool) -> Iterator[Finding]:
    """Yield every breach of the document's checks.

    rates: in the order of the cells, NaN where there is none; price: whether rates are what the office receives.
    """
    axes = _Axes(document)
    cube = rates.reshape(axes.shape)
    for axis in document.checks.rises_with:
        yield from _falls(axes, cube, axis, "rises", 1.0)
    for axis in document.checks.falls_with:
        yield from _falls(axes, cube, axis, "falls", -1.0)
    for axis in document.smooth_axes:
        yield from _bends(axes, cube, axis, document.checks.smooth)
    if document.size is not None:
        yield from _edges(axes, cube, document, price)


class _Axes:
    """The axes of a table: their names, their values and the shape; the size bands come last."""

    def __init__(self, document: PremiumDocument) -> None:
        self.names, self.values = list(document.axes), list(document.axes.values())
        self.shape = tuple(map(len, self.values))

    def cell(self, place: tuple[int, ...]) -> dict[str, Any]:
        """Return the values of a cell by axis."""
        return {name: values[at] for name, values, at in zip(self.names, self.values, place, strict=True)}


def _falls(axes: _Axes, cube: Numbers, axis: str, word: str, sign: float) -> Iterator[Finding]:
    """Steps along an axis of numbers in the wrong direction."""
    along = axes.names.index(axis)
    steps = sign * np.diff(cube, axis=along)
    for place in zip(*np.nonzero(steps < 0), strict=True):
        after = _next(place, along)
        values = axes.values[along]
        said = (
            f"the rate should be one that {word} with {axis}, but goes from {cube[place]:,.10g} at "
            f"{values[place[along]]:,.10g} to {cube[after]:,.10g} at {values[after[along]]:,.10g}"
        )
        yield Finding(f"{word} with {axis}", axis, axes.cell(after), said)


def _bends(axes: _Axes, cube: Numbers, axis: str, limit: float) -> Iterator[Finding]:
    """The logarithm of a rate against the straight line between its neighbours, twice, as a second difference."""
    along = axes.names.index(axis)
    values = axes.values[along]
    if len(values) < 3:
        return
    at = np.array(values, dtype=np.float64)
    share = (at[1:-1] - at[:-2]) / (at[2:] - at[:-2])
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.moveaxis(np.log(cube), along, -1)
        bend = 2 * (logs[..., 1:-1] - ((1 - share) * logs[..., :-2] + share * logs[..., 2:]))
    for place in zip(*np.nonzero(np.moveaxis(np.abs(bend), -1, along) > limit), strict=True):
        middle = _next(place, along)
        size = float(np.moveaxis(bend, -1, along)[place])
        said = f"the rate {cube[middle]:,.10g} is off the line between its neighbours; second difference {size:.3f}"
        yield Finding("smooth", axis, axes.cell(middle), said)


def _edges(axes: _Axes, cube: Numbers, document: PremiumDocument, price: bool) -> Iterator[Finding]:
    """Sizes below a band's edge for which the edge itself is the better bargain."""
    size = document.size
    if size is None:
        return
    for number, (band, following) in enumerate(zip(size.band[:-1], size.band[1:], strict=True)):
        below, above = cube[..., number], cube[..., number + 1]
        edge = following.from_
        for place in zip(*np.nonzero(above < below), strict=True):
            cell = axes.cell((*place, number))
            if price:
                least = max(band.from_, edge * above[place] / below[place])
                said = f"from {least:,.2f} up to {edge:,.2f} of {size.column}, a policy of {edge:,.2f} costs less"
            else:
                said = (
                    f"at {edge:,.2f} of {size.column} the rate falls to {above[place]:,.10g} from {below[place]:,.10g}"
                )
            yield Finding("neighbouring sizes", BAND, cell, said)


def _next(place: tuple[Any, ...], along: int) -> tuple[int, ...]:
    return tuple(int(at) + (axis == along) for axis, at in enumerate(place))
