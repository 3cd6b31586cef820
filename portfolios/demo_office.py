"""The invented demo office: its extract, product designs, bases, tables and run documents in one folder.

Quarrenoy Mutual Life Office, the island of Quarrenoy, its products and every rate and policy are invented.
"""

from __future__ import annotations

import shutil
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

from .demo_extract import MOST_POLICIES, Progress, write_extract
from .unfinished import clean_unfinished, make_parents, new_unfinished, remove_empty, unlock

OFFICE = "Quarrenoy Mutual Life Office"
EXTRACT = "inforce"
_DOCUMENTS = (".toml", ".csv", ".xml")


def write_office(
    folder: Path | str,
    policies: int = 10_000,
    seed: int = 1,
    progress: Progress | None = None,
) -> None:
    """Write the demo office into a folder that is not there yet, or is empty; all of it or nothing.

    policies: how many, 1 to 100,000,000; about a dozen are wrong on purpose (fewer below 130). The same
    ``policies`` and ``seed`` give the same files to the byte. ``progress`` is called with the policies
    written so far and all of them.

    Raises ValueError for a number out of range, FileExistsError where the folder holds something, and any
    other OSError of the disk; whatever was written is taken away again. What a killed call with the same
    folder left behind is removed.
    """
    if not 1 <= policies <= MOST_POLICIES:
        raise ValueError(f"{policies:,} policies; the demo office has 1 to {MOST_POLICIES:,}")
    if seed < 0:
        raise ValueError(f"the seed is {seed}; it must not be below 0")
    folder = Path(folder)
    _refuse_used(folder)
    made = make_parents(folder.parent)
    clean_unfinished(folder)
    unfinished, lock = new_unfinished(folder)
    try:
        _copy(files("portfolios").joinpath("office"), unfinished)
        write_extract(unfinished / EXTRACT, policies, seed, progress)
        if folder.is_dir():
            folder.rmdir()
        unfinished.rename(folder)
    except BaseException:
        shutil.rmtree(unfinished, ignore_errors=True)
        remove_empty(made)
        raise
    finally:
        unlock(lock)


def _refuse_used(folder: Path) -> None:
    if folder.is_dir():
        if any(folder.iterdir()):
            raise FileExistsError(f"{folder}: the folder is not empty; name one that is not there yet")
    elif folder.exists():
        raise FileExistsError(f"{folder}: this is a file; name a folder that is not there yet")


def _copy(source: Traversable, target: Path) -> None:
    target.mkdir(exist_ok=True)
    for entry in source.iterdir():
        if entry.is_dir():
            _copy(entry, target / entry.name)
        elif entry.name.endswith(_DOCUMENTS):
            (target / entry.name).write_bytes(entry.read_bytes())
