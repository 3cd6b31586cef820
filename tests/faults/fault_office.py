"""An office to break: a copy of the demo with the means to spoil its documents, tables and extract."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from reports.command import run_command

ROOT = Path(__file__).resolve().parents[2]
EXTRACT = Path("inforce", "part-00000.parquet")


@dataclass(frozen=True)
class Said:
    """How a command ended and what it said."""

    code: int
    out: str
    err: str


class Office:
    """A copy of the demo office in a folder of its own."""

    def __init__(self, folder: Path, capsys: Any) -> None:
        self.folder = folder
        self.run = folder / "month-end.toml"
        self.out = folder.parent / "results" / "november"
        self._capsys = capsys

    def replace(self, name: str, old: str, new: str) -> None:
        """Change the first place in a document or table; it must be there."""
        path = self.folder / name
        text = path.read_text()
        assert old in text, f"{name} does not hold {old!r}"
        path.write_text(text.replace(old, new, 1))

    def append(self, name: str, text: str) -> None:
        """Add lines to a document."""
        path = self.folder / name
        path.write_text(path.read_text() + "\n" + text + "\n")

    def extract(self) -> pa.Table:
        """Return the extract's policies."""
        return pq.read_table(self.folder / EXTRACT)

    def write(self, table: pa.Table) -> None:
        """Put other policies in the place of the extract's."""
        pq.write_table(table, self.folder / EXTRACT)

    def change(self, name: str, row: int, value: Any) -> None:
        """Change one cell of the extract."""
        table = self.extract()
        cells = table.column(name).to_pylist()
        cells[row] = value
        place = table.schema.get_field_index(name)
        self.write(table.set_column(place, name, pa.array(cells, table.schema.field(name).type)))

    def command(self, *arguments: str) -> Said:
        """Run a command in this process."""
        self._capsys.readouterr()
        code = run_command(list(arguments))
        said = self._capsys.readouterr()
        return Said(code, said.out, said.err)

    def check(self) -> Said:
        """Run ``duecourse check``."""
        return self.command("check", str(self.run))

    def reserve(self, *more: str) -> Said:
        """Run ``duecourse reserve``."""
        return self.command("reserve", str(self.run), "--out", str(self.out), *more)

    def refused(self) -> str:
        """Run ``reserve`` on an office that must be refused: exit code 2, nothing written. Return the message."""
        said = self.reserve("--no-workbook")
        assert said.code == 2, said
        assert said.out == ""
        assert "Traceback" not in said.err
        assert not self.out.parent.exists()
        return said.err


def copied(office: Path, folder: Path, capsys: Any) -> Office:
    """Return a copy of an office."""
    return Office(Path(shutil.copytree(office, folder)), capsys)


def spawn(*arguments: str, limits: Callable[[], None] | None = None) -> subprocess.Popen[str]:
    """Start the command in a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "reports.command", *arguments],
        cwd=ROOT,
        env={**os.environ, "COLUMNS": "100"},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        preexec_fn=limits,
    )


def ended(process: subprocess.Popen[str], seconds: float = 120.0) -> Said:
    """Wait for a command; return how it ended."""
    out, err = process.communicate(timeout=seconds)
    return Said(process.returncode, out, err)


def names(folder: Path) -> list[str]:
    """Return what lies in a folder, hidden or not."""
    return sorted(entry.name for entry in folder.iterdir()) if folder.is_dir() else []
