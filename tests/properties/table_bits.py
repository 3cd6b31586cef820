"""Tables as bits, so that two of them are equal only if every double is the same."""

from __future__ import annotations

import numpy as np
import pyarrow as pa


def bits(table: pa.Table) -> pa.Table:
    """A table with doubles as the whole numbers that have the same bits."""
    kinds = [(name, pa.types.is_floating(table.schema.field(name).type)) for name in table.column_names]
    return pa.table(
        {name: table[name].to_numpy().view(np.int64) if real else as_text(table[name]) for name, real in kinds}
    )


def as_text(column: pa.ChunkedArray) -> pa.ChunkedArray:
    return column.cast(pa.string()) if pa.types.is_dictionary(column.type) else column
