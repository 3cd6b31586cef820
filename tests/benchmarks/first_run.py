"""The first run after installation, when nothing is compiled yet, and the one after it.

    python -m tests.benchmarks.first_run

The command on a small office in processes of its own, interpreter included: once with an empty folder for compiled
code, then again with what the first run left there.
"""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from .measure import Result, arguments, median
from .memory import command
from .offices import office, office_folder


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 1000)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--again", type=int, default=5, help="runs after the first")
    given = parser.parse_args()
    with office_folder(given.folder) as folder:
        measure(folder, given.policies, given.threads, given.again).show(given.json)


def measure(folder: Path, policies: int, threads: int, again: int) -> Result:
    """One cold run and some warm ones."""
    run = office(folder, policies)
    result = Result(f"The command on {policies:,} policies, interpreter included")
    with tempfile.TemporaryDirectory(prefix="duecourse-compiled-") as cache:
        environment = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
        environment["NUMBA_CACHE_DIR"] = cache
        cold, _ = command(run, folder / "first", threads, environment)
        warm = median([command(run, folder / "first", threads, environment)[0] for _ in range(again)])
    result.add("first run, nothing compiled", cold, ratio=cold.wall, target="<= 20", note="seconds")
    result.add(f"later runs, median of {again}", warm, ratio=warm.wall, target="<= 2.5", note="seconds")
    return result


if __name__ == "__main__":
    main()
