"""Whether the four packages are the ones that were installed together; and pandas, which the command leaves out.

The packages' names are plain words, so a user's own ``reports.py`` or a folder ``portfolios`` may stand before them.
"""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path

PACKAGES = ("assumptions", "portfolios", "projection", "reports")


def strangers(root: Path | None = None) -> list[str]:
    """Return a sentence for each package that does not come from ``root``, by default this installation."""
    root = root or Path(__file__).resolve().parent.parent
    return [said for name in PACKAGES if (said := _stranger(name, root))]


def _stranger(name: str, root: Path) -> str:
    found = _place(name)
    if found is None:
        return f"The package '{name}' of duecourse is missing; install duecourse again."
    if found == root / name:
        return ""
    return (
        f"Python finds '{found}' where duecourse needs its own package '{name}' ({root / name}). "
        "Rename it, run from another folder, or take its folder out of PYTHONPATH."
    )


def _place(name: str) -> Path | None:
    """Return the folder of a package, or the file of a module, that Python would import under this name."""
    try:
        spec = importlib.util.find_spec(name)
    except (ImportError, ValueError):
        return None
    if spec is None:
        return None
    places = list(spec.submodule_search_locations or [])
    place = places[0] if places else spec.origin
    return Path(place).resolve() if place else None


class _Hidden:
    """Finds no pandas, so that an import of it fails as if it were not installed."""

    def find_spec(self, name: str, path: object = None, target: object = None) -> None:
        if name == "pandas":
            raise ModuleNotFoundError("duecourse does not use pandas from the command line", name=name)


def without_pandas() -> None:
    """Have pyarrow go without pandas in this process.

    At its first conversion of a Python value pyarrow imports pandas if it is installed, which takes half a
    second. Nothing that the command does uses it; DataFrames are for notebooks.
    """
    sys.meta_path.insert(0, _Hidden())
