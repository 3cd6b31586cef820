"""Files whose SHA-256 is taken while they are written."""

from __future__ import annotations

import hashlib
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

_BLOCK = 1 << 20


@dataclass(frozen=True)
class WrittenFile:
    """A file of the run folder: its path in it (with /), SHA-256, size, and rows if it is a table."""

    path: str
    sha256: str
    bytes: int
    rows: int | None = None


class SealedFile:
    """A binary file that is only written to, and hashed on the way. Fit for pyarrow as a sink."""

    def __init__(self, path: Path) -> None:
        self._file = path.open("wb", buffering=0)
        self._hash = hashlib.sha256()
        self._position = 0

    @property
    def closed(self) -> bool:
        """Whether the file is closed."""
        return self._file.closed

    def write(self, data: Any) -> int:
        """Write all of the data; return the number of bytes."""
        view = memoryview(data).cast("B")
        self._hash.update(view)
        written = 0
        while written < len(view):
            written += self._file.write(view[written:])
        self._position += written
        return written

    def tell(self) -> int:
        """Return the number of bytes written."""
        return self._position

    def flush(self) -> None:
        """Do nothing: the file is not buffered."""

    def readable(self) -> bool:
        """Say no."""
        return False

    def writable(self) -> bool:
        """Say yes."""
        return True

    def seekable(self) -> bool:
        """Say no: what is hashed cannot be changed."""
        return False

    def close(self) -> None:
        """Put the file on the disk and close it."""
        if not self._file.closed:
            os.fsync(self._file.fileno())
            self._file.close()

    def abandon(self) -> None:
        """Close the file without waiting for the disk."""
        self._file.close()

    def sealed(self, path: str, rows: int | None = None) -> WrittenFile:
        """Return what the record says of the file."""
        return WrittenFile(path, self._hash.hexdigest(), self._position, rows)


def write_sealed(folder: Path, name: str, content: bytes) -> WrittenFile:
    """Write a whole file of the run folder."""
    file = SealedFile(folder / name)
    try:
        file.write(content)
    finally:
        file.close()
    return file.sealed(name)


def digest_of(path: Path) -> tuple[str, int]:
    """Return SHA-256 and size of a file, read in blocks."""
    sha, size = hashlib.sha256(), 0
    with path.open("rb", buffering=0) as file:
        while block := file.read(_BLOCK):
            sha.update(block)
            size += len(block)
    return sha.hexdigest(), size
