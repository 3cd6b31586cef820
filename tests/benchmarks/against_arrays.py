"""The valuation proper against NumPy arrays of policies x months.

    python -m tests.benchmarks.against_arrays --policies 50000

Valuation proper is everything between a checked chunk and its results: dates, rules, curves, loops, cash flows, with
the curves made anew. The yardstick computes the same reserves and cash flows, and is given its dates, rules and curves.
One thread each, CPU time per policy; the yardstick's best block size counts.
"""

from __future__ import annotations

import os
import sys
import time
from pathlib import Path

import numpy as np
import pyarrow as pa

from portfolios.extract import open_extract
from projection import value_extract
from reports.prepared import Prepared

from .arrays import value_arrays
from .lives import Policies, policies_of
from .measure import Result, Taken, arguments, take
from .offices import as_chunk, by_product, columns_of, largest_difference, new_engine, office_folder, prepared_office
from .payments import WAYS, Reals

BLOCKS = (128, 256, 512)


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 50_000)
    parser.add_argument("--engine-policies", type=int, default=1_000_000, help="policies that the engine is timed on")
    given = parser.parse_args()
    if os.environ.get("OPENBLAS_NUM_THREADS") != "1":
        # Read when NumPy is loaded, so begin again: idle threads of NumPy's would count as its time.
        os.environ["OPENBLAS_NUM_THREADS"] = "1"
        os.execv(sys.executable, [sys.executable, "-m", "tests.benchmarks.against_arrays", *sys.argv[1:]])
    with office_folder(given.folder) as folder:
        measure(folder, given.policies, given.engine_policies).show(given.json)


def measure(folder: Path, policies: int, engine_policies: int) -> Result:
    """Engine on the large office, NumPy on the small one, agreement on the small one."""
    prepared = prepared_office(folder, policies)
    products = by_product(prepared, policies)
    checking = new_engine(prepared)
    taken: list[Taken] = []
    worst, apart, count = 0.0, 0.0, 0
    for design in prepared.designs:
        chunk = as_chunk(products[design.code])
        plain = policies_of(chunk, design, prepared.basis, prepared.document.settings)
        parts, flows = value_arrays(plain, BLOCKS[0])
        worst = max(worst, largest_difference(checking.value(chunk).results.parts, parts))
        apart = max(apart, _flows_apart(prepared, products[design.code], plain, flows))
        turns = [take(lambda b=b, plain=plain: value_arrays(plain, b)) for b in BLOCKS]
        taken.append(min(turns, key=lambda one: one.cpu))
        count += chunk.n
    if worst > 1e-9 or apart > 1:
        flows = f"cash flows {apart:.2g} times what rounding explains"
        raise SystemExit(f"engine and yardstick differ: reserves by {worst:.1e}, {flows}")
    engine, loops, valued = _engine(folder, engine_policies)
    result = Result("Valuation proper against NumPy, one thread, seconds for a million policies")
    result.facts = {"policies": count, "engine's policies": valued, "largest relative difference": f"{worst:.1e}"}
    arrays = Taken(1e6 / count * sum(one.wall for one in taken), 1e6 / count * sum(one.cpu for one in taken))
    result.add("engine: dates, rules, curves, loops", engine)
    ratio = arrays.cpu / engine.cpu
    result.add("NumPy, policies x months", arrays, ratio=ratio, target=">= 30", note="by CPU time; aim 100")
    result.add("engine: of this the loops", loops)
    result.add("NumPy against the loops alone", arrays, ratio=arrays.cpu / loops.cpu)
    return result


def _flows_apart(prepared: Prepared, table: pa.Table, plain: Policies, flows: Reals) -> float:
    """Largest difference of the cash flows by stream and month, as a multiple of what rounding can explain.

    What is paid on death is compared over all months together: the yardsticks put the claims of the broken first step
    into the calendar month by the same rule as all others, which is good enough for their cost.
    """
    settings = prepared.document.settings
    outcome = value_extract(open_extract(table), prepared.designs, prepared.basis, settings, threads=1)
    today = np.datetime64(settings.valuation_date, "M")
    ours = {line.name: np.zeros(flows.shape[1]) for line in plain.lines}
    for row in outcome.cash_flows.select(["stream", "month", "amount"]).to_pylist():
        ours[row["stream"]][int((np.datetime64(row["month"], "M") - today).astype(int))] += row["amount"]
    for line, amounts in zip(plain.lines, flows, strict=True):
        ours[line.name] -= amounts
    # Half a cent for a line and month; a payment of a policy is rounded to a thousandth of a cent.
    allowed = 0.005 + 0.5e-5 * len(plain) * len(plain.lines)
    deaths = {line.name for line in plain.lines if plain.schedules[line.schedule].way == WAYS["death"]}
    sums = [abs(one.sum()) / np.count_nonzero(one) for name, one in ours.items() if name in deaths]
    months = [np.abs(one).max() for name, one in ours.items() if name not in deaths]
    return float(max([*sums, *months]) / allowed)


def _engine(folder: Path, policies: int) -> tuple[Taken, Taken, int]:
    """Seconds for a million policies of a new engine, and of its loops; policies valued."""
    prepared = prepared_office(folder, policies)
    new_engine(prepared).value(next(prepared.extract.chunks(columns_of(prepared), 1000)))
    engine = new_engine(prepared)
    phases: dict[str, float] = {}
    wall, cpu, valued = 0.0, 0.0, 0
    for chunk in prepared.extract.chunks(columns_of(prepared)):
        engine.checks.check(chunk)  # converts the columns, which is not part of what is measured
        began, used = time.perf_counter(), time.thread_time()
        one = engine.value(chunk)
        wall, cpu = wall + time.perf_counter() - began, cpu + time.thread_time() - used
        valued += int(np.count_nonzero(one.valued))
        for phase, seconds in one.seconds.items():
            phases[phase] = phases.get(phase, 0.0) + seconds
    # Phases are known by the clock; CPU time is shared out in proportion.
    whole = sum(phases.values())
    proper, loops = 1 - phases["check"] / whole, phases["loops"] / whole
    scale = 1e6 / valued
    return Taken(wall * proper * scale, cpu * proper * scale), Taken(wall * loops * scale, cpu * loops * scale), valued


if __name__ == "__main__":
    main()
