"""Getting things onto the disk, and saying plainly why it cannot be done."""

from __future__ import annotations

import contextlib
import errno
import os
import shutil
from collections.abc import Iterator
from pathlib import Path

from portfolios.unfinished import clean_unfinished, new_unfinished, unlock


class RunFolderError(ValueError):
    """What is to be written cannot be, or must not be: says which file or folder, why and what to do."""


def sync(path: Path) -> None:
    """Have the operating system put a file or folder on the disk; folders are skipped where it cannot."""
    if os.name == "nt" and path.is_dir():  # pragma: no cover
        return
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    except OSError as error:
        # Some network file systems know no fsync of folders; the rename is still atomic there.
        if error.errno not in (errno.EINVAL, errno.ENOTSUP) or not path.is_dir():
            raise
    finally:
        os.close(descriptor)


def write_whole(path: Path, content: bytes) -> None:
    """Write a file as a whole or not at all. Raises RunFolderError.

    It is written in a hidden folder beside its place; what a killed command left there goes first.
    """
    with plainly(path):
        clean_unfinished(path)
        folder, lock = new_unfinished(path)
        try:
            beside = folder / path.name
            beside.write_bytes(content)
            sync(beside)
            beside.replace(path)
            sync(path.parent)
        finally:
            shutil.rmtree(folder, ignore_errors=True)
            unlock(lock)


@contextlib.contextmanager
def plainly(target: Path) -> Iterator[None]:
    """Turn errors of the disk in the body into a RunFolderError about the target."""
    try:
        yield
    except OSError as error:
        # Without a number it does not come from the system, and says itself what is the matter.
        if error.errno is None:
            raise
        raise RunFolderError(plain(error, target)) from error


def is_about(error: OSError, path: Path) -> bool:
    """Say whether an error is about writing to a path or below it."""
    # Errors without a file name come from writes to an open file: the disk is full, or a quota is.
    if error.filename is None:
        return error.errno in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS)
    return str(error.filename).startswith(str(path))


def plain(error: OSError, target: Path) -> str:
    """Return a sentence that says why a target cannot be written."""
    said = {
        errno.ENOSPC: "the disk is full",
        errno.EDQUOT: "the disk quota is used up",
        errno.EFBIG: "a file would become larger than is allowed here",
        errno.EROFS: "the disk can only be read",
        errno.EACCES: "writing there is not allowed",
        errno.EPERM: "writing there is not allowed",
    }.get(error.errno or 0, error.strerror or str(error))
    return f"{target}: cannot be written: {said}; nothing was left behind"
