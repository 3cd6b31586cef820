"""The run folder: there complete, or not there at all.

A run writes into a hidden folder beside its target, ``.NAME.unfinished-XXXXXXXX``, and renames it when all is
written and on the disk. Killed at any moment it leaves at most that hidden folder, which the next run with the
same target removes. A folder that is to be replaced is set aside as ``.NAME.replaced-XXXXXXXX`` for the moment
between two renames; the next run puts it back if the new one never arrived.
"""

from __future__ import annotations

import contextlib
import errno
import os
import secrets
import shutil
import time
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType

RECORD = "run.json"
"""Name of the record; a folder that holds one is a finished run."""

_STALE_SECONDS = 24 * 3600.0


class RunFolderError(ValueError):
    """The run folder cannot be written, or must not be: says which folder, why and what to do."""


class RunFolder:
    """A run folder in the making, a context manager.

    ``path`` is where to write. ``finish()`` gives it its final name; left without, nothing stays.
    Raises RunFolderError when the target is taken, or its surroundings cannot be written.
    """

    def __init__(self, target: Path | str, replace: bool = False) -> None:
        self.target = Path(target)
        self.replace = replace
        self.path = self.target
        self._lock: int | None = None
        self._made: list[Path] = []
        self._finished = False

    def __enter__(self) -> RunFolder:
        parent = self.target.parent
        if self.target.name in ("", ".", ".."):
            raise RunFolderError(f"{self.target}: give the run folder a name of its own")
        with _plainly(self.target):
            self._made = _make_parents(parent)
            clean_leftovers(self.target)
            check_target(self.target, self.replace)
            self.path, self._lock = _new_folder(self.target)
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if not self._finished:
            shutil.rmtree(self.path, ignore_errors=True)
            _remove_empty(self._made)
        _unlock(self._lock)
        if isinstance(error, OSError) and not isinstance(error, RunFolderError) and _about(error, self.path):
            raise RunFolderError(_plain(error, self.target)) from error

    def finish(self) -> None:
        """Make sure that everything is on the disk, then give the folder its name."""
        with _plainly(self.target):
            for folder in {self.path, *(entry.parent for entry in self.path.rglob("*"))}:
                sync(folder)
            check_target(self.target, self.replace)
            self._move_in()
        self._finished = True

    def _move_in(self) -> None:
        aside: Path | None = None
        if self.target.exists() and any(self.target.iterdir()):
            aside = self.target.with_name(f".{self.target.name}.replaced-{secrets.token_hex(4)}")
            self.target.rename(aside)
        try:
            self._rename()
        except BaseException:
            if aside is not None and not self.target.exists():
                aside.rename(self.target)
            raise
        sync(self.target.parent)
        if aside is not None:
            shutil.rmtree(aside, ignore_errors=True)

    def _rename(self) -> None:
        if os.name == "nt":  # pragma: no cover - Windows renames neither locked folders nor onto empty ones
            _unlock(self._lock)
            self._lock = None
            if self.target.is_dir():
                self.target.rmdir()
        self.path.rename(self.target)


def check_target(target: Path, replace: bool) -> None:
    """Raise RunFolderError if a run may not take this name."""
    if not target.exists() and not target.is_symlink():
        return
    if target.is_symlink() or not target.is_dir():
        raise RunFolderError(f"{target}: there is already something of this name that is not a folder")
    if not any(target.iterdir()):
        return
    if not (target / RECORD).is_file():
        raise RunFolderError(
            f"{target}: the folder is not empty and is not a finished run (it holds no {RECORD}); choose another name"
        )
    if not replace:
        raise RunFolderError(f"{target}: holds a finished run; choose another name, or say --replace to replace it")


def clean_leftovers(target: Path) -> list[str]:
    """Remove what killed runs with this target left behind, and put back what they had set aside.

    Returns the names of the folders dealt with. A folder that a living run holds is left alone.
    """
    done = []
    for aside in sorted(target.parent.glob(f".{glob_escape(target.name)}.replaced-*")):
        if target.exists():
            shutil.rmtree(aside, ignore_errors=True)
        else:
            aside.rename(target)
        done.append(aside.name)
    for folder in sorted(target.parent.glob(f".{glob_escape(target.name)}.unfinished-*")):
        lock = _lock(folder)
        if lock is not None or (_no_locks() and _stale(folder)):
            shutil.rmtree(folder, ignore_errors=True)
            _unlock(lock)
            done.append(folder.name)
    return done


def glob_escape(name: str) -> str:
    """Return a name that a pattern takes literally."""
    return "".join(f"[{letter}]" if letter in "*?[" else letter for letter in name)


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


def _new_folder(target: Path) -> tuple[Path, int | None]:
    while True:
        path = target.with_name(f".{target.name}.unfinished-{secrets.token_hex(4)}")
        path.mkdir()
        lock = _lock(path)
        # Between mkdir and lock another run may have taken the folder for a leftover.
        if path.is_dir() and (lock is not None or _no_locks()):
            return path, lock
        _unlock(lock)


def _make_parents(parent: Path) -> list[Path]:
    """Make the folders above the target; return those that were not there, the innermost first."""
    missing = [folder for folder in (parent, *parent.parents) if not folder.exists()]
    for folder in reversed(missing):
        folder.mkdir()
    return missing


def _remove_empty(folders: list[Path]) -> None:
    for folder in folders:
        with contextlib.suppress(OSError):
            folder.rmdir()


def _no_locks() -> bool:
    try:
        import fcntl  # noqa: F401
    except ImportError:  # pragma: no cover - Windows
        return True
    return False


def _lock(folder: Path) -> int | None:
    """Lock a folder for as long as this process lives; None if another process holds it."""
    if _no_locks():  # pragma: no cover - Windows
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


def _unlock(lock: int | None) -> None:
    if lock is not None:
        with contextlib.suppress(OSError):
            os.close(lock)


def _stale(folder: Path) -> bool:  # pragma: no cover - only where folders cannot be locked
    return time.time() - folder.stat().st_mtime > _STALE_SECONDS


def _about(error: OSError, path: Path) -> bool:
    # Errors without a file name come from writes to an open file: the disk is full, or a quota is.
    return error.filename is None or str(error.filename).startswith(str(path))


def _plain(error: OSError, target: Path) -> str:
    said = {
        errno.ENOSPC: "the disk is full",
        errno.EDQUOT: "the disk quota is used up",
        errno.EFBIG: "a file would become larger than is allowed here",
        errno.EROFS: "the disk can only be read",
        errno.EACCES: "writing there is not allowed",
        errno.EPERM: "writing there is not allowed",
    }.get(error.errno or 0, error.strerror or str(error))
    return f"{target}: cannot be written: {said}; nothing was left behind"


@contextlib.contextmanager
def _plainly(target: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        raise RunFolderError(_plain(error, target)) from error


def write_text(path: Path, text: str) -> None:
    """Write a text file as a whole or not at all. Raises RunFolderError."""
    beside = path.with_name(f".{path.name}.unfinished-{secrets.token_hex(4)}")
    with _plainly(path):
        try:
            beside.write_text(text, encoding="utf-8")
            sync(beside)
            beside.replace(path)
        except BaseException:
            beside.unlink(missing_ok=True)
            raise
