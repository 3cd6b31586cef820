"""Everything that a run reads, read and sealed: the documents, the designs, the basis and the extract."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

from assumptions.basis import Basis
from portfolios.designs import Design
from portfolios.extract import Extract, open_extract
from projection.documents import DocumentError, read_basis, read_designs, read_run
from projection.groups import check_names
from projection.run_document import RunDocument

from .sealed_files import digest_of


@dataclass(frozen=True)
class Input:
    """A file that the run read: its part in the run, its path as the user named it, and its seal."""

    role: str
    path: str
    sha256: str = ""
    bytes: int | None = None
    rows: int | None = None


@dataclass(frozen=True)
class Prepared:
    """A run before it starts. ``design_digests`` holds the SHA-256 of each design's document, in order.

    further: the further bases by name.
    """

    run: Path
    document: RunDocument
    designs: list[Design]
    basis: Basis
    extract: Extract
    documents: tuple[Input, ...]
    design_digests: tuple[str, ...]
    stamps: dict[str, tuple[int, int]]
    further: dict[str, Basis] = field(default_factory=dict)

    @property
    def folder(self) -> Path:
        """The folder that the document's paths are relative to."""
        return self.run.parent

    def sources(self, digests: dict[str, str]) -> tuple[Input, ...]:
        """Return every input, the extract's files with the SHA-256 that ``Extract.digests`` found."""
        files = tuple(
            Input("extract", file.path, digests.get(file.path, ""), file.bytes, file.rows)
            for file in self.extract.files
        )
        return (*self.documents, *files)

    def check_unchanged(self) -> None:
        """Raise DocumentError if a file of the extract was written to since the run began."""
        now = _stamps(self.extract, self.folder)
        for path, stamp in self.stamps.items():
            if now.get(path) != stamp:
                raise DocumentError(f"{path}: changed while the run was reading it; run again when it is at rest")


def prepare(run: Path) -> Prepared:
    """Read a run document and all that it names.

    Raises DocumentError or ExtractError, in that order of reading: run document, designs, basis, extract.
    """
    document = read_run(run)
    check_groups(run, document)
    folder = run.parent
    designs_path = folder / document.designs
    designs = read_designs(designs_path)
    basis = read_basis(folder / document.basis)
    further = {name: read_basis(folder / path) for name, path in document.further_bases.items()}
    bases = [(document.basis, basis), *zip(document.further_bases.values(), further.values(), strict=True)]
    named = [
        ("run document", run.name),
        *(("design", design) for design in design_names(document.designs, designs_path)),
        # A file that two bases share is one input.
        *dict.fromkeys(file for path, one in bases for file in basis_files(path, one)),
    ]
    documents = seal_all(named, folder)
    extract = open_extract(document.extract, folder)
    digests = tuple(item.sha256 for item in documents if item.role == "design")
    stamps = _stamps(extract, folder)
    return Prepared(run, document, designs, basis, extract, documents, digests, stamps, further)


def check_groups(run: Path, document: RunDocument) -> None:
    """Raise DocumentError where a column of the extract would stand beside a result of the same name."""
    try:
        check_names(document.group_by, list(document.further_bases))
    except DocumentError as error:
        raise DocumentError(f"{run}: {error}") from None


def design_names(written: str, path: Path) -> list[str]:
    """Return the designs' files in the order in which they are read, as the run document would write them."""
    if not path.is_dir():
        return [written]
    return [os.path.join(written, file.name) for file in sorted(path.glob("*.toml"))]


def basis_files(path: str, basis: Basis) -> Iterator[tuple[str, str]]:
    """Yield the part in the run and the path of a basis's document and of its tables."""
    yield "basis", path
    for name in basis.files:
        yield "table of the basis", os.path.normpath(os.path.join(os.path.dirname(path), name))


def seal_all(named: Iterable[tuple[str, str]], folder: Path) -> tuple[Input, ...]:
    """Return the seals of files: part in the run and path, relative to the folder. Raises DocumentError."""
    return tuple(_sealed(role, os.path.normpath(path), folder) for role, path in named)


def _sealed(role: str, path: str, folder: Path) -> Input:
    try:
        digest, size = digest_of(folder / path)
    except OSError as error:
        raise DocumentError(f"{path}: cannot be read: {error.strerror}") from error
    return Input(role, Path(path).as_posix(), digest, size)


def _stamps(extract: Extract, folder: Path) -> dict[str, tuple[int, int]]:
    stamps = {}
    for file in extract.files:
        # An extract in a store elsewhere has no file here to look at.
        path = folder / file.path
        if path.is_file():
            stat = path.stat()
            stamps[file.path] = (stat.st_size, stat.st_mtime_ns)
    return stamps
