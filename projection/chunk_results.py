"""What a chunk leaves behind once it is valued: its sums, its exceptions, its rows of results."""

from __future__ import annotations

from time import perf_counter
from typing import Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from portfolios.chunk import Chunk
from portfolios.exception_rows import exception_rows, no_exceptions
from portfolios.reasons import Reason

from . import loops
from .basis_names import column_on
from .engine import Valued
from .groups import Groups
from .results import MONEY_COLUMNS
from .sides import Side
from .tally import ChunkTally


class ChunkResults:
    """Makes tallies of chunks. needed: the columns that chunks hold; amounts: those of them under the gate."""

    def __init__(self, sides: list[Side], groups: Groups, needed: tuple[str, ...], amounts: list[str]) -> None:
        self.sides, self.groups, self.needed, self.amounts = sides, groups, needed, amounts

    def of(self, chunk: Chunk, found: list[Valued], refused: NDArray[np.int8]) -> list[ChunkTally]:
        """Return what a chunk adds, for each basis; the first one brings along what is the same for all.

        found, refused: what ``value_on_all`` returned. May be called from several threads.
        """
        began = perf_counter()
        groups = self.groups.of(chunk)
        parts = [self._part(side, chunk, valued, groups) for side, valued in zip(self.sides, found, strict=True)]
        first = parts[0]
        first.exceptions = self._exceptions(chunk, found[-1], refused)
        first.control = self._control(chunk, found[-1])
        first.policies = self._policies(chunk, found)
        first.totals_read = chunk.n
        first.seconds["results"] = perf_counter() - began
        return parts

    def _part(self, side: Side, chunk: Chunk, valued: Valued, groups: NDArray[np.int32]) -> ChunkTally:
        totals = np.zeros((len(self.groups.keys), 1 + len(MONEY_COLUMNS)), dtype=np.int64)
        loops.add_totals(groups, valued.checked.reason, valued.results.minor, totals)
        return ChunkTally(
            totals=totals,
            flows=valued.results.flows.reshape(-1, loops.BINS),
            months=valued.months,
            seconds=valued.seconds,
            sample=side.sample.candidates(chunk, valued),
        )

    def _exceptions(self, chunk: Chunk, valued: Valued, refused: NDArray[np.int8]) -> pa.Table:
        """Rows of the policies that some basis refuses, with the reason of the first that does."""
        reason = valued.checked.reason
        if not reason.any():
            return no_exceptions()
        rows = exception_rows(chunk, valued.checked, self.needed)
        found = np.flatnonzero(reason)
        if not ((reason[found] == Reason.NO_RULE_FITS) | (refused[found] > 0)).any():
            return rows
        # The rules are a basis's; say which part of which one has none for the policy.
        texts = rows.column("rule").to_pylist()
        for place, side in enumerate(self.sides):
            mine = np.flatnonzero(refused[found] == place)
            unfitted = mine[reason[found[mine]] == Reason.NO_RULE_FITS]
            if len(unfitted):
                cells = side.engine.cells.of(chunk, valued.checked.product)
                for row in unfitted.tolist():
                    texts[row] = f"a rule of {side.engine.cells.cells[cells[found[row]]].missing} must fit"
            for row in mine.tolist():
                texts[row] = side.said + texts[row]
        return rows.set_column(rows.schema.get_field_index("rule"), "rule", pa.array(texts, pa.string()))

    def _control(self, chunk: Chunk, valued: Valued) -> dict[str, tuple[int, int, int]]:
        """Read, valued and exceptions: policies, and each amount of the extract in minor units."""
        good = valued.valued
        control = {"policies": (chunk.n, int(good.sum()), int((~good).sum()))}
        for name in self.amounts:
            sums = np.zeros(3, dtype=np.int64)
            loops.control_sums(chunk.number(name), valued.checked.reason, self.sides[0].engine.rules.minor, sums)
            control[name] = (int(sums[0]), int(sums[1]), int(sums[2]))
        return control

    def _policies(self, chunk: Chunk, found: list[Valued]) -> pa.Table:
        names = dict.fromkeys(["product", *self.groups.columns])
        columns: dict[str, Any] = {"policy_id": chunk.ids}
        columns.update({name: _plain(chunk.raw(name)) for name in names if name != "policy_id"})
        for side, valued in zip(self.sides, found, strict=True):
            minor = valued.results.minor / side.engine.rules.minor
            for place, name in enumerate(MONEY_COLUMNS):
                columns[column_on(name, side.name)] = pa.array(np.ascontiguousarray(minor[:, place]))
        table = pa.table(columns)
        return table if not found[-1].checked.reason.any() else table.filter(pa.array(found[-1].valued))


def _plain(column: pa.Array) -> pa.Array:
    return column.combine_chunks() if isinstance(column, pa.ChunkedArray) else column
