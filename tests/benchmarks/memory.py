"""Memory and time of the whole command, in processes of its own.

    python -m tests.benchmarks.memory --large

Measured from outside: the largest resident memory and the CPU time that the system charges to the process, and
seconds by the clock with the interpreter's start. ``--large`` adds ten times as many policies.
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import time
from pathlib import Path

from .measure import Result, Taken, arguments
from .offices import office, office_folder, warm_up


def command(run: Path, out: Path, threads: int, environment: dict[str, str] | None = None) -> tuple[Taken, float]:
    """Run ``reserve`` in a process of its own; return what it took, and its largest memory in GB."""
    words = ["reserve", str(run), "--out", str(out), "--replace", "--threads", str(threads)]
    began = time.perf_counter()
    process = subprocess.Popen(
        [sys.executable, "-m", "reports.command", *words], stdout=subprocess.DEVNULL, env=environment
    )
    _, status, used = os.wait4(process.pid, 0)
    wall = time.perf_counter() - began
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode:
        raise SystemExit(f"the command failed with exit code {process.returncode}")
    return Taken(wall, used.ru_utime + used.ru_stime), _gigabytes(used)


def _gigabytes(used: resource.struct_rusage) -> float:
    # Linux counts in KiB, macOS in bytes.
    return used.ru_maxrss * (1 if sys.platform == "darwin" else 1024) / 1e9


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 1_000_000)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--large", action="store_true", help="ten times as many policies as well")
    given = parser.parse_args()
    with office_folder(given.folder) as folder:
        measure(folder, given.policies, given.threads, given.large).show(given.json)


def measure(folder: Path, policies: int, threads: int, large: bool) -> Result:
    """Run the command on one office and perhaps on one ten times as large."""
    warm_up(folder, threads)
    result = Result(f"Memory and time of the command, {threads} threads")
    taken, peak = command(office(folder, policies), folder / "memory", threads)
    result.add(f"{policies:,} policies", taken)
    result.add("  largest resident memory, GB", ratio=peak, target="<= 1.5")
    if large:
        more, larger = command(office(folder, 10 * policies), folder / "memory", threads)
        result.add(f"{10 * policies:,} policies", more, ratio=more.wall / taken.wall, target="<= 11")
        result.add("  the same by CPU time", ratio=more.cpu / taken.cpu)
        result.add("  largest resident memory, GB", ratio=larger)
        result.add("  ... against the smaller office", ratio=larger / peak, target="<= 1.3")
    return result


if __name__ == "__main__":
    main()
