"""The run folder: there complete, or not there at all.

A run writes into a hidden folder beside its target, ``.NAME.unfinished-XXXXXXXX``, and renames it when all
is written and on the disk. Killed at any moment it leaves at most that hidden folder, which the next run with
the same target removes. A folder that is to be replaced is set aside as ``.NAME.replaced-XXXXXXXX`` for the
moment between two renames; the next run puts it back if the new one never arrived.
"""

from __future__ import annotations

import os
import secrets
import shutil
from pathlib import Path
from types import TracebackType

from portfolios.unfinished import (
    clean_unfinished,
    glob_escape,
    make_parents,
    new_unfinished,
    remove_empty,
    unlock,
)

from .disk import RunFolderError, is_about, plain, plainly, sync

RECORD = "run.json"
"""Name of the record; a folder that holds one is a finished run."""


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
            self._made = make_parents(parent)
            clean_leftovers(self.target)
            check_target(self.target, self.replace)
            self.path, self._lock = new_unfinished(self.target)
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if not self._finished:
            shutil.rmtree(self.path, ignore_errors=True)
            remove_empty(self._made)
        unlock(self._lock)
        if isinstance(error, OSError) and not isinstance(error, RunFolderError) and is_about(error, self.path):
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
    return done + clean_unfinished(target)
