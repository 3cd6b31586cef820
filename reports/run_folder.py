"""The run folder: there complete, or not there at all.

A run writes into a hidden folder beside its target, ``.NAME.unfinished-XXXXXXXX``, and renames it when all
is written and on the disk. Killed at any moment it leaves at most that hidden folder, which the next run with
the same target removes. A folder that is to be replaced is set aside as ``.NAME.replaced-XXXXXXXX`` for the
moment between two renames; the next run puts it back if the new one never arrived.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
import time
from pathlib import Path
from types import TracebackType

from .disk import RunFolderError, is_about, plain, plainly, sync
from .locks import lock_folder, no_locks, unlock

RECORD = "run.json"
"""Name of the record; a folder that holds one is a finished run."""

_STALE_SECONDS = 24 * 3600.0


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
        with plainly(self.target):
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
        unlock(self._lock)
        if (
            isinstance(error, OSError)
            and not isinstance(error, RunFolderError)
            and is_about(error, self.path)
        ):
            raise RunFolderError(plain(error, self.target)) from error

    def finish(self) -> None:
        """Make sure that everything is on the disk, then give the folder its name."""
        with plainly(self.target):
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
            unlock(self._lock)
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
            f"{target}: is not empty and not a finished run (it holds no {RECORD}); choose another name"
        )
    if not replace:
        raise RunFolderError(
            f"{target}: holds a finished run; choose another name, or say --replace to replace it"
        )


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
        lock = lock_folder(folder)
        if lock is not None or (no_locks() and _stale(folder)):
            shutil.rmtree(folder, ignore_errors=True)
            unlock(lock)
            done.append(folder.name)
    return done


def glob_escape(name: str) -> str:
    """Return a name that a pattern takes literally."""
    return "".join(f"[{letter}]" if letter in "*?[" else letter for letter in name)


def _new_folder(target: Path) -> tuple[Path, int | None]:
    while True:
        path = target.with_name(f".{target.name}.unfinished-{secrets.token_hex(4)}")
        path.mkdir()
        lock = lock_folder(path)
        # Between mkdir and lock another run may have taken the folder for a leftover.
        if path.is_dir() and (lock is not None or no_locks()):
            return path, lock
        unlock(lock)


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


def _stale(folder: Path) -> bool:  # pragma: no cover - only where folders cannot be locked
    return time.time() - folder.stat().st_mtime > _STALE_SECONDS
