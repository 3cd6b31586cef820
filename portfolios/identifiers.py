"""Policy identifiers: a stable hash of each, and those that occur more than once.

The hash is this project's own: eight bytes at a time, little end first, each word mixed in by exclusive or,
multiplication by an odd constant and a shift, and the length at the end. It depends on nothing but the bytes
of the identifier, so that chunks, files and machines do not matter. It is quick, not secret.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from typing import Protocol

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
from pyarrow import types

Hashes = npt.NDArray[np.uint64]

_SEED = np.uint64(0x6A09E667F3BCC909)
_ODD = np.uint64(0x9E3779B97F4A7C15)
_LAST = np.uint64(0xD6E8FEB86659FD93)
_SHIFT = np.uint64(32)
# The first k bytes of a word, for k = 0 ... 8.
_MASKS = np.array([(1 << (8 * k)) - 1 for k in range(9)], dtype=np.uint64)
_BLOCK = 65_536


def identifier_hashes(ids: pa.Array) -> Hashes:
    """Return the 64-bit hash of each identifier, shape (n,).

    ids: an Arrow array of strings; other types are turned into strings first. A missing identifier hashes
    like an empty one.
    """
    if types.is_dictionary(ids.type):
        ids = ids.dictionary_decode()
    if not types.is_string(ids.type):
        ids = ids.cast(pa.string())
    hashes = np.empty(len(ids), dtype=np.uint64)
    for start in range(0, len(ids), _BLOCK):
        part = ids.slice(start, _BLOCK)
        hashes[start : start + len(part)] = _hash_block(part)
    return hashes


def byte_lengths(ids: pa.Array) -> npt.NDArray[np.int32]:
    """Return the length in bytes of each string of an Arrow array of strings, shape (n,)."""
    lengths: npt.NDArray[np.int32] = np.diff(_offsets(ids))
    if ids.null_count:
        # Arrow leaves open what lies behind a null.
        lengths = np.where(ids.is_null().to_numpy(zero_copy_only=False), np.int32(0), lengths)
    return lengths


def _offsets(ids: pa.Array) -> npt.NDArray[np.int32]:
    buffer = ids.buffers()[1]
    if buffer is None or len(ids) == 0:
        return np.zeros(len(ids) + 1, dtype=np.int32)
    return np.frombuffer(buffer, dtype=np.int32, count=ids.offset + len(ids) + 1)[ids.offset :]


def string_bytes(ids: pa.Array) -> npt.NDArray[np.uint8]:
    """Return the bytes of all strings of an Arrow array of strings, one after the other."""
    buffer = ids.buffers()[2]
    offsets = _offsets(ids)
    if buffer is None:
        return np.zeros(0, dtype=np.uint8)
    return np.frombuffer(buffer, dtype=np.uint8)[offsets[0] : offsets[-1]]


def _hash_block(ids: pa.Array) -> Hashes:
    lengths = byte_lengths(ids)
    content = string_bytes(ids)
    # Eight bytes are read from every start, so the last ones need something behind them.
    padded = np.zeros(content.size + 8, dtype=np.uint8)
    padded[: content.size] = content
    hashes = np.full(len(ids), _SEED)
    longest = int(lengths.max(initial=0))
    if longest == int(lengths.min(initial=longest)) and longest and ids.null_count == 0:
        _mix_equal(hashes, padded, longest)
    elif longest:
        _mix_unequal(hashes, padded, _offsets(ids)[:-1].astype(np.int64) - int(_offsets(ids)[0]), lengths)
    hashes ^= lengths.astype(np.uint64) * _ODD
    _mix(hashes, _LAST)
    _mix(hashes, _ODD)
    return hashes


def _mix(hashes: Hashes, factor: np.uint64) -> None:
    hashes *= factor
    hashes ^= hashes >> _SHIFT


def _mix_equal(hashes: Hashes, padded: npt.NDArray[np.uint8], length: int) -> None:
    """Mix in identifiers that all have one length: their words lie at equal distances."""
    for at in range(0, length, 8):
        words: Hashes = np.ndarray(hashes.shape, "<u8", padded.data, at, (length,))
        hashes ^= words & _MASKS[min(length - at, 8)] if length - at < 8 else words
        _mix(hashes, _ODD)


def _mix_unequal(
    hashes: Hashes,
    padded: npt.NDArray[np.uint8],
    starts: npt.NDArray[np.int64],
    lengths: npt.NDArray[np.int32],
) -> None:
    """Mix in identifiers of any lengths; a shorter one takes no part in the later words."""
    every: Hashes = np.ndarray((padded.size - 7,), "<u8", padded.data, 0, (1,))
    for at in range(0, int(lengths.max()), 8):
        rows = np.flatnonzero(lengths > at)
        left = np.minimum(lengths[rows] - at, 8)
        some = hashes[rows] ^ (every[starts[rows] + at] & _MASKS[left])
        _mix(some, _ODD)
        hashes[rows] = some


class _Chunk(Protocol):
    @property
    def ids(self) -> pa.Array: ...
    @property
    def hashes(self) -> Hashes: ...


class _Extract(Protocol):
    @property
    def rows(self) -> int: ...
    def chunks(self, columns: Iterable[str], rows: int = ...) -> Iterator[_Chunk]: ...
    def near(self, columns: Iterable[str], rows: npt.NDArray[np.int64]) -> Iterator[_Chunk]: ...


@dataclass(frozen=True)
class Duplicates:
    """Identifiers that occur more than once.

    hashes: theirs, ascending; spared: other identifiers with the same hash that occur only once; smallest: the
    smallest hashes of all identifiers, ascending, for whoever picks a sample by hash.
    """

    hashes: Hashes = field(default_factory=lambda: np.zeros(0, dtype=np.uint64))
    spared: frozenset[str] = frozenset()
    smallest: Hashes = field(default_factory=lambda: np.zeros(0, dtype=np.uint64))

    def __len__(self) -> int:
        return len(self.hashes)

    def mask(self, ids: pa.Array, hashes: Hashes) -> npt.NDArray[np.bool_]:
        """Say of each row whether its identifier occurs elsewhere too, shape (n,)."""
        found = members(hashes, self.hashes)
        if self.spared:
            for row in np.flatnonzero(found):
                found[row] = ids[int(row)].as_py() not in self.spared
        return found


def members(hashes: Hashes, wanted: Hashes) -> npt.NDArray[np.bool_]:
    """Say of each hash whether it is among the wanted ones, which are ascending."""
    found = np.zeros(len(hashes), dtype=np.bool_)
    if len(wanted) == 0:
        return found
    # A look at the leading 16 bits spares nearly every row the search.
    leading = np.zeros(65_536, dtype=np.bool_)
    leading[(wanted >> np.uint64(48)).astype(np.int64)] = True
    rows = np.flatnonzero(leading.take((hashes >> np.uint64(48)).astype(np.int64)))
    at = np.searchsorted(wanted, hashes[rows])
    at[at == len(wanted)] = 0
    found[rows] = wanted[at] == hashes[rows]
    return found


def find_duplicates(extract: _Extract, keep: int = 0) -> Duplicates:
    """Return the identifiers that occur more than once in an extract, and the ``keep`` smallest hashes.

    Reads the column ``policy_id`` once and, only where two hashes are equal, once more near these to compare
    the strings. Memory: 16 bytes a policy. Missing and empty identifiers are left out, being exceptions anyway.
    """
    hashes = np.empty(extract.rows, dtype=np.uint64)
    missing: list[npt.NDArray[np.int64]] = []
    filled = 0
    for chunk in extract.chunks(["policy_id"]):
        absent = byte_lengths(chunk.ids) == 0
        if absent.any():
            missing.append(filled + np.flatnonzero(absent))
        hashes[filled : filled + len(absent)] = chunk.hashes
        filled += len(absent)
    ascending = np.delete(hashes, np.concatenate(missing)) if missing else hashes.copy()
    ascending.sort()
    equal = ascending[1:] == ascending[:-1]
    twice = np.unique(ascending[1:][equal]) if equal.any() else ascending[:0].copy()
    smallest = ascending[:keep].copy()
    del ascending, equal
    found = _confirm(extract, twice, np.flatnonzero(members(hashes, twice))) if len(twice) else Duplicates()
    return replace(found, smallest=smallest)


def _confirm(extract: _Extract, twice: Hashes, rows: npt.NDArray[np.int64]) -> Duplicates:
    """Compare the strings behind equal hashes, which lie in these rows."""
    found = [pa.array([], pa.string())]
    for chunk in extract.near(["policy_id"], rows):
        there = members(chunk.hashes, twice) & (byte_lengths(chunk.ids) > 0)
        if there.any():
            found.append(chunk.ids.filter(pa.array(there)))
    counts = pc.value_counts(pa.concat_arrays(found))
    strings, times = counts.field(0), counts.field(1).to_numpy()
    hashes = identifier_hashes(strings)
    repeated = np.unique(hashes[times > 1])
    spared = strings.filter(pa.array((times == 1) & members(hashes, repeated)))
    return Duplicates(repeated, frozenset(spared.to_pylist()))
