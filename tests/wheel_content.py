"""Checks that a wheel holds the four packages and nothing else, with their data: python wheel_content.py WHEEL."""

from __future__ import annotations

import sys
import zipfile
from pathlib import Path

PACKAGES = ("assumptions", "portfolios", "projection", "reports")
DATA = {".py", ".typed", ".toml", ".csv", ".xml", ".html", ".md"}


def main(wheel: str) -> int:
    """Return 0 if the wheel's content is as it should be, and say what is wrong otherwise."""
    with zipfile.ZipFile(wheel) as file:
        names = [name for name in file.namelist() if not name.endswith("/")]
    inside = {name for name in names if ".dist-info/" not in name}
    root = Path(__file__).resolve().parent.parent
    expected = {
        path.relative_to(root).as_posix()
        for package in PACKAGES
        for path in (root / package).rglob("*")
        if path.is_file() and path.suffix in DATA and "__pycache__" not in path.parts
    }
    for name in sorted(expected - inside):
        print(f"missing from the wheel: {name}")
    for name in sorted(inside - expected):
        print(f"not expected in the wheel: {name}")
    print(f"{wheel}: {len(inside)} files of {', '.join(PACKAGES)}")
    return 0 if inside == expected else 1


if __name__ == "__main__":
    sys.exit(main(sys.argv[1]))
