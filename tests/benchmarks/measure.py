"""Taking times and showing them: CPU seconds beside seconds by the clock, since others may use the machine too."""

from __future__ import annotations

import argparse
import json
import os
import platform
import statistics
import time
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

_LOAD_BEFORE = os.getloadavg()[0]


@dataclass(frozen=True)
class Taken:
    """Seconds by the clock and of the processor, all threads together."""

    wall: float
    cpu: float


def take(action: Callable[[], Any]) -> Taken:
    """Return what an action takes."""
    wall, cpu = time.perf_counter(), time.process_time()
    action()
    return Taken(time.perf_counter() - wall, time.process_time() - cpu)


def median(taken: Sequence[Taken]) -> Taken:
    """Return the median of each figure."""
    return Taken(statistics.median(one.wall for one in taken), statistics.median(one.cpu for one in taken))


@dataclass
class Row:
    """One line of a result: seconds, and where there is one a ratio with its target ('<= 3' or '>= 30')."""

    what: str
    wall: float | None = None
    cpu: float | None = None
    ratio: float | None = None
    target: str = ""
    note: str = ""

    @property
    def verdict(self) -> str:
        """Whether the target is met, or nothing."""
        if self.ratio is None or not self.target:
            return ""
        sign, bound = self.target.split()
        met = self.ratio <= float(bound) if sign == "<=" else self.ratio >= float(bound)
        return "met" if met else "MISSED"


@dataclass
class Result:
    """A benchmark's table, with the load of the machine before and after."""

    title: str
    rows: list[Row] = field(default_factory=list)
    facts: dict[str, Any] = field(default_factory=dict)

    def add(self, what: str, taken: Taken | None = None, **more: Any) -> None:
        """Add a line."""
        wall, cpu = (taken.wall, taken.cpu) if taken else (None, None)
        self.rows.append(Row(what, wall, cpu, **more))

    def show(self, json_file: Path | None) -> None:
        """Print the table, and write the figures to a file if one is named."""
        self.facts |= {
            "load before": round(_LOAD_BEFORE, 2),
            "load after": round(os.getloadavg()[0], 2),
            "cores": os.cpu_count(),
            "python": platform.python_version(),
        }
        print(self.title)
        print("  " + ", ".join(f"{name} {value}" for name, value in self.facts.items()))
        for line in aligned(self.rows):
            print("  " + line)
        if json_file is not None:
            written = {"title": self.title, "facts": self.facts, "rows": [asdict(row) for row in self.rows]}
            json_file.write_text(json.dumps(written, indent=1) + "\n")


def aligned(rows: Sequence[Row]) -> list[str]:
    """Return the lines of a table: text to the left, figures to the right."""
    cells = [["", "wall s", "CPU s", "ratio", "target", "", ""]]
    for row in rows:
        figures = [row.wall, row.cpu, row.ratio]
        cells.append([row.what, *map(_figure, figures), row.target, row.verdict, row.note])
    widths = [max(len(line[at]) for line in cells) for at in range(len(cells[0]))]
    left = (0, 5, 6)
    return [
        "  ".join(
            cell.ljust(width) if at in left else cell.rjust(width)
            for at, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in cells
    ]


def _figure(value: float | None) -> str:
    if value is None:
        return ""
    return f"{value:.1f}" if value >= 100 else f"{value:.3g}" if value >= 1 else f"{value:.3f}"


def arguments(text: str | None, policies: int) -> argparse.ArgumentParser:
    """Return a parser with what every benchmark takes."""
    parser = argparse.ArgumentParser(description=text, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--policies", type=int, default=policies, help=f"by default {policies:,}")
    parser.add_argument("--folder", type=Path, help="where demo offices are kept; by default a temporary one")
    parser.add_argument("--json", type=Path, metavar="FILE", help="write the figures to this file too")
    return parser
