"""Totals recomputed from a run folder's own files, exactly, in minor units."""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath
from typing import Any

import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from projection.results import JSON

from .figures import decimal_text, minor_units

Key = tuple[Any, ...]
Sums = dict[str, int]


@dataclass
class Recounted:
    """Policies counted again, and what does not agree with the record or with the other files."""

    policies: int = 0
    faults: list[str] = field(default_factory=list)


def recount(folder: Path, record: JSON) -> Recounted:
    """Add up the per-policy results again and compare with totals, exceptions and the record."""
    decimals = int(record["settings"]["decimals"])
    groups = list(record["settings"]["group_by"])
    sums = _sums_by_group(folder, record, groups, decimals)
    result = Recounted(sum(group["policies"] for group in sums.values()))
    names = list(record["totals"])
    result.faults += _against_totals(folder / "totals.parquet", sums, groups, names, decimals)
    result.faults += _against_record(record, sums, decimals)
    result.faults += _against_exceptions(folder / "exceptions.parquet", record, result.policies)
    return result


def minor(column: Any, decimals: int) -> Any:
    """Return a column of currency as whole minor units (int64)."""
    return pc.cast(pc.round(pc.multiply(pc.cast(column, pa.float64()), float(10**decimals))), pa.int64())


def _sums_by_group(folder: Path, record: JSON, groups: list[str], decimals: int) -> dict[Key, Sums]:
    names = list(record["totals"])
    sums: dict[Key, Sums] = defaultdict(lambda: dict.fromkeys(("policies", *names), 0))
    for batch in _batches(folder, record, [*groups, *names]):
        table = pa.table(
            {name: batch.column(name) for name in groups}
            | {name: minor(batch.column(name), decimals) for name in names}
        )
        wanted: list[Any] = [(name, "sum") for name in names]
        for row in table.group_by(groups).aggregate([*wanted, ([], "count_all")]).to_pylist():
            group = sums[tuple(row[name] for name in groups)]
            group["policies"] += row["count_all"]
            for name in names:
                group[name] += row[f"{name}_sum"] or 0
    return sums


def _batches(folder: Path, record: JSON, names: list[str]) -> Iterator[pa.RecordBatch]:
    columns = list(dict.fromkeys(names))
    for output in record["outputs"]:
        if output["path"].startswith("policies/"):
            with pq.ParquetFile(folder / PurePosixPath(output["path"])) as file:
                yield from file.iter_batches(1 << 17, columns=columns)


def _against_totals(
    path: Path, sums: dict[Key, Sums], groups: list[str], names: list[str], decimals: int
) -> Iterator[str]:
    totals = pq.read_table(path)
    left = dict(sums)
    for row in totals.to_pylist():
        key = tuple(row[name] for name in groups)
        found = left.pop(key, dict.fromkeys(("policies", *names), 0))
        said = {"policies": row["policies"]} | {name: round(float(row[name]) * 10**decimals) for name in names}
        for name, value in said.items():
            if value != found[name]:
                where = f"totals.parquet: {_place(groups, key)}{name}"
                yield f"{where} is {value}, the policies add up to {found[name]}"
    for key in left:
        yield f"totals.parquet: {_place(groups, key)}is missing, though there are policies of it"


def _against_record(record: JSON, sums: dict[Key, Sums], decimals: int) -> Iterator[str]:
    for name, text in record["totals"].items():
        found = sum(group[name] for group in sums.values())
        if minor_units(text, decimals) != found:
            yield f"run.json: {name} is {text} in all, the policies add up to {decimal_text(found, decimals)}"


def _against_exceptions(path: Path, record: JSON, valued: int) -> Iterator[str]:
    exceptions = pq.read_table(path, columns=["reason"])
    for total in record["control"]:
        read, kept, left_out = (minor_units(total[name], 4) for name in ("read", "valued", "exceptions"))
        if read != kept + left_out:
            yield f"run.json: the gate of {total['name']} does not close"
    policies = record["control"][0]
    extract = [item["rows"] for item in record["inputs"] if item["role"] == "extract" and "rows" in item]
    counts = [
        ("valued", valued, "policies in policies/"),
        ("exceptions", exceptions.num_rows, "rows in exceptions.parquet"),
        ("read", sum(extract) if extract else int(policies["read"]), "rows in the extract"),
    ]
    for name, found, what in counts:
        if int(policies[name]) != found:
            yield f"run.json: {policies[name]} {name}, but {found} {what}"
    if dict(Counter(exceptions.column("reason").to_pylist())) != record["exceptions_by_reason"]:
        yield "run.json: the exceptions by reason are not those in exceptions.parquet"


def _place(groups: list[str], key: Key) -> str:
    return ", ".join(f"{name} {value}" for name, value in zip(groups, key, strict=True)) + (": " if groups else "")
