"""Importing the assumptions is quick: what only reading a file needs is fetched when a file is read."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import assumptions.tables

HEAVY = ("pyarrow", "pandas", "numba", "defusedxml", "xml.etree.ElementTree")


def test_no_reader_is_imported_beforehand() -> None:
    code = f"import sys, assumptions.tables; print([name for name in {HEAVY} if name in sys.modules])"
    root = Path(assumptions.tables.__file__).parents[1]
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=root)
    assert done.stdout.strip() == "[]"
