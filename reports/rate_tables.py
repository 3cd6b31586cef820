"""A rate table as people read it: two axes across a page, one page for each combination of the others."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from typing import Any

import numpy as np
from numpy.typing import NDArray

from projection.premium_rates import Premiums

from .figures import words


@dataclass(frozen=True)
class CrossTable:
    """Rates by two axes: ``rates[row, column]``, NaN where there is none; ``others`` says what is the same in all."""

    others: str
    rows: str
    columns: str
    row_values: list[Any]
    column_values: list[Any]
    rates: NDArray[np.float64]


def cross_tables(premiums: Premiums) -> list[CrossTable]:
    """Return the rates with the longest axis downwards and the next longest across."""
    names, values = list(premiums.document.axes), list(premiums.document.axes.values())
    cube = premiums.rates.reshape(premiums.shape)
    order = sorted(range(len(names)), key=lambda place: (-len(values[place]), place))
    down, across = order[0], order[1] if len(order) > 1 else None
    others = [place for place in range(len(names)) if place not in (down, across)]
    tables = []
    for chosen in product(*(range(len(values[place])) for place in others)):
        place: list[Any] = [slice(None)] * len(names)
        for axis, at in zip(others, chosen, strict=True):
            place[axis] = at
        rates = cube[tuple(place)]
        if across is not None and across < down:
            rates = rates.T
        said = ", ".join(
            f"{words(names[axis])} {plain(values[axis][at])}" for axis, at in zip(others, chosen, strict=True)
        )
        tables.append(
            CrossTable(
                said,
                names[down],
                names[across] if across is not None else "",
                values[down],
                values[across] if across is not None else [""],
                rates.reshape(len(values[down]), -1),
            )
        )
    return tables


def plain(value: Any) -> str:
    """Return an axis value as text, whole numbers without decimals."""
    return f"{value:,.10g}" if isinstance(value, float) else str(value)


def decimals_of(step: float) -> int:
    """Return the decimals that multiples of a rounding step need."""
    return next((digits for digits in range(9) if abs(step * 10**digits - round(step * 10**digits)) < 1e-9), 9)
