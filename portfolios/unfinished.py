"""Folders in the making: hidden beside their target until they are finished, and known when they are left over.

What is being written to ``NAME`` lies in ``.NAME.unfinished-XXXXXXXX`` beside it, locked for as long as the
process lives. A killed process leaves that folder behind without a lock; the next one with the same target
removes it.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
import time
from pathlib import Path

_STALE_SECONDS = 24 * 3600.0


def new_unfinished(target: Path) -> tuple[Path, int | None]:
    """Make and lock the hidden folder in which a target is written; return it and its lock. Raises OSError."""
    while True:
        path = target.with_name(f".{target.name}.unfinished-{secrets.token_hex(4)}")
        path.mkdir()
        lock = lock_folder(path)
        # Between mkdir and lock another process may have taken the folder for a leftover.
        if path.is_dir() and (lock is not None or no_locks()):
            return path, lock
        unlock(lock)


def clean_unfinished(target: Path) -> list[str]:
    """Remove what killed processes left beside a target; return the names. What a living one holds stays."""
    done = []
    for folder in sorted(target.parent.glob(f".{glob_escape(target.name)}.unfinished-*")):
        lock = lock_folder(folder)
        if lock is not None or (no_locks() and _stale(folder)):
            shutil.rmtree(folder, ignore_errors=True)
            unlock(lock)
            done.append(folder.name)
    return done


def make_parents(parent: Path) -> list[Path]:
    """Make the folders above a target; return those that were not there, the innermost first."""
    missing = [folder for folder in (parent, *parent.parents) if not folder.exists()]
    for folder in reversed(missing):
        folder.mkdir()
    return missing


def remove_empty(folders: list[Path]) -> None:
    """Remove folders that ``make_parents`` made, as far as nothing else lies in them."""
    for folder in folders:
        with contextlib.suppress(OSError):
            folder.rmdir()


def glob_escape(name: str) -> str:
    """Return a name that a pattern takes literally."""
    return "".join(f"[{letter}]" if letter in "*?[" else letter for letter in name)


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


def _stale(folder: Path) -> bool:  # pragma: no cover - only where folders cannot be locked
    return time.time() - folder.stat().st_mtime > _STALE_SECONDS
