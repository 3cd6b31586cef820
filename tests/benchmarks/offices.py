"""Demo offices for the benchmarks, written once into a folder and found there again."""

from __future__ import annotations

import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pyarrow as pa

from portfolios.checks import needed_columns
from portfolios.chunk import Chunk
from portfolios.demo_office import write_office
from projection.engine import Engine
from projection.lives import rule_columns
from reports.prepared import Prepared, prepare
from reports.reserve_run import reserve_run


@contextmanager
def office_folder(folder: Path | None) -> Iterator[Path]:
    """Give the folder that was named, or a temporary one."""
    if folder is not None:
        folder.mkdir(parents=True, exist_ok=True)
        yield folder
        return
    with tempfile.TemporaryDirectory(prefix="duecourse-benchmark-") as name:
        yield Path(name)


def office(folder: Path, policies: int) -> Path:
    """Return the run document of the demo office of so many policies, written if it is not there yet."""
    home = folder / f"office-{policies}"
    if not home.exists():
        write_office(home, policies)
    return home / "month-end.toml"


@contextmanager
def quiet(what: str) -> Iterator[Callable[[int, int], None]]:
    """Progress that says nothing."""
    yield lambda done, total: None


def warm_up(folder: Path, threads: int) -> None:
    """Run a small office once, so that compiled code and modules are loaded."""
    reserve_run(office(folder, 2000), folder / "warm", quiet, replace_finished=True, threads=threads)


def prepared_office(folder: Path, policies: int) -> Prepared:
    """Return a demo office, read."""
    return prepare(office(folder, policies))


def columns_of(prepared: Prepared) -> tuple[str, ...]:
    """Columns of the extract that a valuation looks at."""
    basis = prepared.basis.document
    until = [rule.until for rule in basis.lapse.rule] if basis.lapse else []
    named = [column for column in until if isinstance(column, str)]
    asked = rule_columns(prepared.basis, prepared.designs, prepared.extract.column_names)
    return tuple(needed_columns(prepared.designs, [*named, *asked]))


def new_engine(prepared: Prepared) -> Engine:
    """Return an engine that has not met a policy yet."""
    asked = rule_columns(prepared.basis, prepared.designs, prepared.extract.column_names)
    kinds = {column: str(prepared.extract.column_kind(column)) for column in asked}
    return Engine(
        prepared.designs, prepared.basis, prepared.document.settings, columns_of(prepared), kinds,
        tuple(prepared.document.in_force),
    )  # fmt: skip


def by_product(prepared: Prepared, most: int) -> dict[str, pa.Table]:
    """Return at most so many policies that can be valued of each product, by its code."""
    engine = new_engine(prepared)
    found: dict[str, list[pa.Table]] = {design.code: [] for design in prepared.designs}
    for chunk in prepared.extract.chunks(columns_of(prepared)):
        valued = engine.value(chunk)
        for place, code in enumerate(found):
            mine = (valued.checked.product == place) & valued.valued
            found[code].append(pa.Table.from_batches([chunk.batch]).filter(pa.array(mine)))
    return {code: pa.concat_tables(parts).slice(0, most) for code, parts in found.items() if parts}


def as_chunk(table: pa.Table) -> Chunk:
    """Return a table in memory as one chunk."""
    return Chunk(table.unify_dictionaries().combine_chunks().to_batches(max_chunksize=len(table))[0])


def largest_difference(ours: np.ndarray, theirs: np.ndarray) -> float:
    """Largest difference of the parts (n, 3) of a reserve, relative to the sum of the absolute parts."""
    scale = np.maximum(np.abs(ours).sum(axis=1), 1e-6)
    return float((np.abs(ours - theirs).max(axis=1) / scale).max(initial=0.0))
