"""The month-end run against nothing but reading the extract and writing the results.

    python -m tests.benchmarks.month_end --policies 1000000

The yardstick reads the extract with ``pyarrow.parquet.read_table`` and writes the run's own results with
``write_table``, both with default settings, in the same process. Run and yardstick take turns; the medians count.
Start of the interpreter and loading of compiled code are left out; see ``first_run``.
"""

from __future__ import annotations

import statistics
from pathlib import Path

import pyarrow.parquet as pq

from reports.reserve_run import reserve_run

from .measure import Result, Row, Taken, arguments, median, take
from .offices import office, office_folder, quiet, warm_up

SHARED = ("check", "dates", "rules", "curves", "loops", "results")
"""Phases that the threads go through at the same time."""


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 1_000_000)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--pairs", type=int, default=5)
    given = parser.parse_args()
    with office_folder(given.folder) as folder:
        measure(folder, given.policies, given.threads, given.pairs).show(given.json)


def measure(folder: Path, policies: int, threads: int, pairs: int) -> Result:
    """Run and yardstick in turn."""
    warm_up(folder, threads)
    run, out = office(folder, policies), folder / "month-end"
    timings: list[dict[str, float]] = []

    def valuation() -> None:
        timings.append(reserve_run(run, out, quiet, replace_finished=True, threads=threads).outcome.timings)

    valuation()
    timings.clear()
    extract, results = run.parent / "inforce", pq.read_table(out / "policies")
    reads, writes, runs = [], [], []
    for _ in range(pairs):
        reads.append(take(lambda: pq.read_table(extract)))
        writes.append(take(lambda: pq.write_table(results, folder / "yardstick.parquet")))
        runs.append(take(valuation))
    return _result(policies, threads, reads, writes, runs, timings)


def _result(
    policies: int,
    threads: int,
    reads: list[Taken],
    writes: list[Taken],
    runs: list[Taken],
    timings: list[dict[str, float]],
) -> Result:
    yardsticks = [Taken(r.wall + w.wall, r.cpu + w.cpu) for r, w in zip(reads, writes, strict=True)]
    pairs = list(zip(runs, yardsticks, strict=True))
    by_clock = statistics.median(run.wall / yard.wall for run, yard in pairs)
    by_cpu = statistics.median(run.cpu / yard.cpu for run, yard in pairs)
    result = Result(f"Month-end run of {policies:,} policies, {threads} threads, median of {len(runs)} pairs")
    result.add("yardstick: read the extract", median(reads))
    result.add("yardstick: write the results", median(writes))
    yard = median(yardsticks)
    result.add("yardstick", yard)
    result.add("the run", median(runs), ratio=by_clock, target="<= 3", note=f"{by_cpu:.2f} by CPU time; aim 1.5")
    for phase in timings[0]:
        seconds = statistics.median(one[phase] for one in timings)
        note = "seconds of every thread added up" if phase.removeprefix("of valuing: ") in SHARED else ""
        result.rows.append(Row(f"  {phase}", wall=seconds, ratio=seconds / yard.wall, note=note))
    return result


if __name__ == "__main__":
    main()
