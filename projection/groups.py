"""Groups: the combinations of extract columns by which totals are shown."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date, timedelta
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from portfolios.chunk import Chunk

from .cells import EPOCH, distinct
from .documents import DocumentError
from .results import MONEY_COLUMNS

RESULT_COLUMNS = ("policies", *MONEY_COLUMNS, "rounding")
"""Names that the tables of a run use themselves; for further bases with the basis's name behind them."""


def check_names(group_by: Sequence[str], further: Sequence[str] = ()) -> None:
    """Raise DocumentError where a column of the extract would stand beside a result of the same name.

    further: names of the further bases.
    """
    results = {*RESULT_COLUMNS, *(f"{column}_{name}" for name in further for column in RESULT_COLUMNS)}
    taken = [name for name in group_by if name in results]
    if taken:
        raise DocumentError(
            f"key 'group_by': '{taken[0]}' is the name of a column of the results; give the extract's "
            "column another name"
        )


def group_order(key: tuple[Any, ...]) -> tuple[Any, ...]:
    """Return what groups are sorted by: their values, one kind after another, a missing one last."""
    return tuple((value is None, str(type(value)), value) for value in key)


class Groups:
    """Numbers the combinations of values of some columns as they are met; safe to use from several threads."""

    def __init__(self, columns: tuple[str, ...]) -> None:
        self.columns = columns
        self.keys: list[tuple[Any, ...]] = []
        self._numbers: dict[tuple[Any, ...], int] = {}
        self._lock = Lock()

    def of(self, chunk: Chunk) -> NDArray[np.int32]:
        """Return the group number of each policy of a chunk."""
        signature = np.zeros(chunk.n, dtype=np.int64)
        values: list[list[Any]] = []
        for column in self.columns:
            codes, known = _coded(chunk, column)
            signature = signature * len(known) + codes
            values.append(known)
        found, inverse = distinct(signature)
        numbers = np.empty(len(found), dtype=np.int32)
        with self._lock:
            for place, code in enumerate(found.tolist()):
                numbers[place] = self._number(code, values)
        return numbers[inverse]

    def _number(self, code: int, values: list[list[Any]]) -> int:
        key: list[Any] = []
        for known in reversed(values):
            code, place = divmod(code, len(known))
            key.append(known[place])
        whole = tuple(reversed(key))
        if whole not in self._numbers:
            self._numbers[whole] = len(self.keys)
            self.keys.append(whole)
        return self._numbers[whole]


def _coded(chunk: Chunk, column: str) -> tuple[NDArray[np.int64], list[Any]]:
    """Codes of a column's values and the values, with None for a missing one."""
    kind = chunk.column_kind(column)
    if kind in ("text", "flag"):
        codes, values = chunk.text(column)
        shown = [value == "true" for value in values] if kind == "flag" else list(values)
        return np.where(codes < 0, len(values), codes).astype(np.int64), [*shown, None]
    numbers: NDArray[Any] = chunk.day(column) if kind == "day" else chunk.number(column)
    found, inverse = np.unique(numbers, return_inverse=True)
    return inverse.astype(np.int64), [_shown(value, kind) for value in found.tolist()]


def _shown(value: Any, kind: str) -> date | float | int | None:
    if kind == "day":
        return None if value == np.iinfo(np.int32).min else EPOCH + timedelta(days=value)
    if np.isnan(value):
        return None
    return int(value) if value == int(value) else float(value)
