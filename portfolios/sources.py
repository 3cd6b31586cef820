"""Finding the files of an extract: a file, a folder, a pattern or a URI."""

from __future__ import annotations

import glob
import os
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
from pyarrow import fs

SUFFIXES = (".parquet", ".parq", ".pq")


class ExtractError(ValueError):
    """An extract that stops the run: names the file or column, what is wrong, and the remedy."""


@dataclass(frozen=True)
class InputFile:
    """One file of the extract. path: as the user wrote it; rows: policies in it; bytes: its size."""

    path: str
    rows: int
    bytes: int


@dataclass(frozen=True)
class Place:
    """Where a file lies: the name shown to people, and what Arrow opens."""

    shown: str
    filesystem: fs.FileSystem
    path: str
    bytes: int


def find_files(source: str | os.PathLike[str], folder: str | os.PathLike[str] = ".") -> list[Place]:
    """Return the Parquet files that a source names, in order of name.

    source: a file, a folder (all Parquet files in it and below; names that start with ``.`` or ``_`` are left
    out), a pattern with ``*``, ``?`` or ``[...]``, or a URI; relative ones lie in the folder. Raises
    ExtractError where nothing is found.
    """
    text = os.fspath(source)
    places = _remote(text) if "://" in text else _local(text, Path(folder))
    return sorted(places, key=lambda place: place.shown.split("/"))


def _local(text: str, folder: Path) -> list[Place]:
    path = folder / text
    if not text.strip():
        raise ExtractError("the extract has no path; name a Parquet file, a folder, a pattern or a URI")
    if path.is_file():
        return [_place(text, path)]
    if path.is_dir():
        found = _below(text, path)
        if not found:
            raise ExtractError(f"{text}: the folder holds no Parquet file (*.parquet)")
        return found
    if not glob.has_magic(text):
        raise ExtractError(f"{text}: there is no such file or folder (looked in {folder})")
    matches = [match for match in glob.glob(text, root_dir=folder, recursive=True) if not _hidden(match)]
    found = [place for match in matches for place in _matched(match, folder / match)]
    if not found:
        raise ExtractError(f"{text}: no file fits the pattern (looked in {folder})")
    return list({place.shown: place for place in found}.values())


def _matched(shown: str, path: Path) -> list[Place]:
    return _below(shown, path) if path.is_dir() else [_place(shown, path)]


def _below(shown: str, path: Path) -> list[Place]:
    found = []
    for parent, folders, names in os.walk(path, onerror=_refuse):
        folders[:] = sorted(name for name in folders if not _hidden(name))
        for name in names:
            if name.lower().endswith(SUFFIXES) and not _hidden(name):
                file = Path(parent, name)
                found.append(_place((Path(shown) / file.relative_to(path)).as_posix(), file))
    return found


def _hidden(name: str) -> bool:
    return os.path.basename(name).startswith((".", "_"))


def _refuse(error: OSError) -> None:
    # A folder that cannot be listed must not silently take its policies out of the run.
    raise ExtractError(f"{error.filename}: the folder cannot be read: {error.strerror}") from error


def _place(shown: str, path: Path) -> Place:
    try:
        return Place(Path(shown).as_posix(), fs.LocalFileSystem(), str(path), path.stat().st_size)
    except OSError as error:
        raise ExtractError(f"{shown}: cannot be read: {error.strerror}") from error


def _remote(uri: str) -> list[Place]:
    try:
        filesystem, path = fs.FileSystem.from_uri(uri)
        info = filesystem.get_file_info(path)
        if info.type == fs.FileType.Directory:
            inside = filesystem.get_file_info(fs.FileSelector(path, recursive=True))
            base = uri.rstrip("/")
            return _some(uri, [
                Place(base + file.path.removeprefix(path.rstrip("/")), filesystem, file.path, file.size)
                for file in inside
                if file.type == fs.FileType.File and file.path.lower().endswith(SUFFIXES)
                and not any(map(_hidden, file.path.removeprefix(path).strip("/").split("/")))
            ])  # fmt: skip
    except (pa.ArrowException, OSError, ValueError) as error:
        if isinstance(error, ExtractError):
            raise
        raise ExtractError(f"{uri}: the URI cannot be opened: {first_line(error)}") from error
    if info.type != fs.FileType.File:
        raise ExtractError(f"{uri}: there is no such file or folder")
    return [Place(uri, filesystem, path, info.size)]


def _some(uri: str, places: list[Place]) -> list[Place]:
    if not places:
        raise ExtractError(f"{uri}: the folder holds no Parquet file (*.parquet)")
    return places


def first_line(error: BaseException) -> str:
    """Return what an error says, short, for the end of a sentence."""
    if isinstance(error, OSError) and error.strerror:
        return error.strerror
    text = str(error).strip().split("\n")[0]
    return text if len(text) <= 200 else text[:197] + "..."
