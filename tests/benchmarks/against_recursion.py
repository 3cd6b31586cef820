"""The valuation of each product against a compiled recursion, one policy and one step at a time.

    python -m tests.benchmarks.against_recursion --policies 5000

For every product: the engine's loops, with the ordering that they need, against a plain recursion that computes the
same parts of the reserve and the same cash flows from equal curves. Both on one thread, from prepared figures, best of
several turns; the whole valuation of the engine (dates, rules, curves, loops) stands beside.
"""

from __future__ import annotations

from functools import partial
from pathlib import Path

import numpy as np

from portfolios.chunk import Chunk
from projection.engine import Engine

from .arrays import value_arrays
from .lives import policies_of
from .measure import Result, Row, Taken, arguments, take
from .offices import as_chunk, by_product, largest_difference, new_engine, office_folder, prepared_office
from .recursion import laid_out, value_recursively


def main() -> None:
    """Measure and print."""
    parser = arguments(__doc__, 20_000)
    parser.add_argument("--office", type=int, default=300_000, help="policies of the office they are taken from")
    parser.add_argument("--turns", type=int, default=5)
    given = parser.parse_args()
    with office_folder(given.folder) as folder:
        measure(folder, given.office, given.policies, given.turns).show(given.json)


def measure(folder: Path, size: int, most: int, turns: int) -> Result:
    """One line for each product, in microseconds a policy."""
    prepared = prepared_office(folder, size)
    products = by_product(prepared, most)
    engine = new_engine(prepared)
    result = Result("Engine against recursion by product, one thread, CPU seconds for a million policies")
    worst = 0.0
    for design in prepared.designs:
        chunk = as_chunk(products[design.code])
        plain = policies_of(chunk, design, prepared.basis, prepared.document.settings)
        lives, streams = laid_out(plain)
        parts, flows = value_recursively(lives, streams)
        # The cash flows of the arrays are compared with the engine's by 'against_arrays'.
        worst = max(worst, float(np.abs(flows - value_arrays(plain, 256)[1]).max() / flows.max()))
        worst = max(worst, largest_difference(engine.value(chunk).results.parts, parts))
        loops, whole, steps = [], [], []
        for _ in range(turns):
            loop, proper = _engine(engine, chunk)
            loops.append(loop)
            whole.append(proper)
            steps.append(take(partial(value_recursively, lives, streams)).cpu)
        scale = 1e6 / chunk.n
        ratio = min(steps) / min(loops)
        note = f"loops {scale * min(loops):.2f}, valuation {scale * min(whole):.2f}, recursion {scale * min(steps):.2f}"
        result.rows.append(Row(design.code, ratio=ratio, target=">= 1", note=f"{note}; {chunk.n:,} policies"))
    result.facts["largest relative difference"] = f"{worst:.1e}"
    if worst > 1e-9:
        raise SystemExit(f"engine and recursion differ by {worst:.1e}")
    return result


def _engine(engine: Engine, chunk: Chunk) -> tuple[float, float]:
    """CPU seconds of the loops, and of the valuation without the checks."""
    found: list[dict[str, float]] = []
    taken: Taken = take(lambda: found.append(engine.value(chunk).seconds))
    share = taken.cpu / sum(found[0].values())
    return share * found[0]["loops"], share * (sum(found[0].values()) - found[0]["check"])


if __name__ == "__main__":
    main()
