"""Locks on folders, held for as long as a process lives, so that leftovers of killed runs are known."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path


def lock_folder(folder: Path) -> int | None:
    """Lock a folder for as long as this process lives; None if another process holds it."""
    if no_locks():  # pragma: no cover - Windows
        return None
    import fcntl

    try:
        descriptor = os.open(folder, os.O_RDONLY)
    except OSError:
        return None
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        os.close(descriptor)
        return None
    return descriptor


def unlock(lock: int | None) -> None:
    """Give a lock back; None is no lock."""
    if lock is not None:
        with contextlib.suppress(OSError):
            os.close(lock)


def no_locks() -> bool:
    """Say whether the system cannot lock folders."""
    try:
        import fcntl  # noqa: F401
    except ImportError:  # pragma: no cover - Windows
        return True
    return False
