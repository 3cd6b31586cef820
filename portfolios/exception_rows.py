"""The policies that are not valued, as rows for people."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from .checks import Checked
from .chunk import Chunk, as_strings, readable
from .columns import BY_NAME
from .reasons import Reason

COLUMNS = ("policy_id", "product", "reason", "field", "value", "rule")
SCHEMA = pa.schema([(name, pa.string()) for name in COLUMNS])
"""Columns of the exceptions."""

LONGEST_VALUE = 60


def exception_rows(chunk: Chunk, checked: Checked, needed: Sequence[str]) -> pa.Table:
    """Return one row per flagged policy of a chunk, in its order, with the columns of SCHEMA.

    needed: the columns that the positions in ``checked.field`` count. The identifier is given as it is (bytes
    that are not UTF-8 are replaced by a mark); the value is text, at most 60 characters, control characters
    shown as '?'.
    """
    rows = np.flatnonzero(checked.reason)
    reasons, fields = checked.reason[rows], checked.field[rows]
    pairs, pair = np.unique(reasons * np.int32(65_536) + (fields + np.int32(1)), return_inverse=True)
    said = [_said(int(code), needed) for code in pairs]
    values = np.full(len(rows), "", dtype=object)
    for place, name in {int(place): needed[place] for place in np.unique(fields) if place >= 0}.items():
        here = fields == place
        values[here] = _values(chunk, name, rows[here])
    return pa.table(
        [
            pa.array(_texts(chunk, "policy_id", rows), pa.string()),
            pa.array(_texts(chunk, "product", rows), pa.string()),
            _repeat([reason.words for reason, _ in said], pair),
            _repeat([name for _, name in said], pair),
            pa.array(values, pa.string()),
            _repeat([rule_text(reason, name) for reason, name in said], pair),
        ],
        schema=SCHEMA,
    )


def rule_text(reason: Reason, column: str = "") -> str:
    """Return the rule that a policy breaks, with the range of the column where there is one."""
    known = BY_NAME.get(column)
    if reason is Reason.NUMBER_OUT_OF_RANGE and known is not None and known.low is not None:
        unit = f" {known.unit}" if known.unit else ""
        return f"the value must lie between {known.low:,g} and {known.high:,.15g}{unit}"
    return reason.rule


def sentence(row: Mapping[str, str | None]) -> str:
    """Return what is wrong with a policy, given its row of exceptions: field, value and rule."""
    value = f"is '{row['value']}'" if row["value"] else "is missing"
    where = f"{row['field']} {value}" if row["field"] else ""
    return "; ".join(part for part in (where, row["rule"] or "") if part)


def _said(pair: int, needed: Sequence[str]) -> tuple[Reason, str]:
    reason, field = divmod(pair, 65_536)
    return Reason(reason), needed[field - 1] if field else ""


def no_exceptions() -> pa.Table:
    """Return a table of exceptions without rows."""
    return SCHEMA.empty_table()


def _repeat(texts: list[str], places: npt.NDArray[np.int64]) -> pa.Array:
    return pa.array(texts, pa.string()).take(pa.array(places))


def _texts(chunk: Chunk, name: str, rows: npt.NDArray[np.int64]) -> list[str]:
    column = chunk.ids if name == "policy_id" else as_strings(chunk.raw(name).take(pa.array(rows)))
    taken = column.take(pa.array(rows)) if name == "policy_id" else column
    return [text or "" for text in readable(taken)]


def _values(chunk: Chunk, name: str, rows: npt.NDArray[np.int64]) -> list[str]:
    taken = chunk.raw(name).take(pa.array(rows))
    try:
        texts = readable(as_strings(taken))
    except pa.ArrowException:
        texts = ["" if cell is None else str(cell) for cell in taken.to_pylist()]
    return _shortened(["" if text is None else text for text in texts])


def _shortened(texts: list[str]) -> list[str]:
    short = pc.replace_substring_regex(pa.array(texts, pa.string()), r"[\p{Cc}\p{Zl}\p{Zp}]", "?")
    cut = pc.binary_join_element_wise(pc.utf8_slice_codeunits(short, 0, LONGEST_VALUE - 3), "...", "")
    return list(pc.if_else(pc.greater(pc.utf8_length(short), LONGEST_VALUE), cut, short).to_pylist())
