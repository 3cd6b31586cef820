"""Every compiled function has one signature, whatever the extract looks like, so that nobody waits for a second one.

Counted in a process of its own: other tests may call a function with arrays that no run makes.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from portfolios.demo_office import write_office

COUNT = """
import json, sys
from pathlib import Path
import pyarrow.parquet as pq
from numba import types
from numba.core.registry import CPUDispatcher
import projection
from projection import loops
from portfolios.extract import open_extract
from projection.documents import read_basis, read_designs, read_run
from projection.settings import Settings
from projection.slope_run import slopes_of

folder = Path(sys.argv[1])
for name in ("month-end.toml", "month-end-best-estimate.toml"):
    run = read_run(folder / name)
    files, designs, basis = folder / run.extract, folder / run.designs, folder / run.basis
    table = pq.read_table(files)
    turned = table.take(list(range(len(table)))[::-1])
    for extract in (files, table, table[1:], turned, turned.to_pandas()):
        for step, due in (("month", run.due), ("year", "outstanding")):
            found = projection.value(extract, designs, basis, run.valuation_date, step=step, due=due)
            assert found.policies.num_rows > 0.8 * len(table)
            slopes_of(open_extract(extract), read_designs(designs), read_basis(basis),
                      Settings(run.valuation_date, step, due), group_by=("product",) if step == "month" else ())
functions = {name: value for name, value in vars(loops).items() if isinstance(value, CPUDispatcher)}
called = [name for name, value in functions.items() if not value.targetoptions.get("no_cpython_wrapper")]
signatures = {name: [[str(types.unliteral(one)) for one in each] for each in value.signatures]
              for name, value in functions.items()}
print(json.dumps([called, signatures]))
"""


@pytest.mark.compiled
@pytest.mark.skipif(os.environ.get("NUMBA_DISABLE_JIT") == "1", reason="nothing is compiled")
def test_one_signature(tmp_path: Path) -> None:
    write_office(tmp_path / "office", 400, 3)
    command = [sys.executable, "-c", COUNT, str(tmp_path / "office")]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    called, signatures = json.loads(done.stdout)
    assert {"value_policies", "add_totals", "locate"} <= set(called) < set(signatures)
    # An inner function is not met where its caller comes from disk. Numbers written out in a call have a type of their
    # own each, but only there.
    # Profits are compiled where they are asked for, not by a reserve run.
    assert signatures.pop("profile_policies") == []
    for name, found in signatures.items():
        distinct = {tuple(one) for one in found}
        assert len(distinct) <= 1, f"{name}: {found}"
        assert len(found) == 1 or name not in called, f"{name}: {found}"
