"""The premium run: reads a premium document and what it names, works out the rates, writes the run folder."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pyarrow as pa

from assumptions.basis import Basis
from portfolios.designs import Design
from projection.documents import DocumentError, read_basis, read_designs, read_document
from projection.premium_document import PremiumDocument
from projection.premium_rates import Premiums, premiums
from projection.results import JSON

from .cautions import GENERAL, ONE_SCENARIO, OUTSIDE_THE_MODEL
from .figures import counted
from .prepared import Input, basis_files, design_names, seal_all
from .record import (
    basis_entry,
    command_line,
    complete,
    design_entries,
    from_folder_to,
    opening,
    sealed_text,
    without_none,
)
from .run_folder import RECORD, RunFolder
from .sealed_files import write_sealed
from .stopwatch import Stopwatch
from .tables import write_table


@dataclass(frozen=True)
class PremiumReport:
    """A finished premium run, ready to be laid out."""

    premiums: Premiums
    record: JSON
    timings: dict[str, float] = field(default_factory=dict)

    @property
    def title(self) -> str:
        """Name of the run."""
        return str(self.record["title"])

    @property
    def currency(self) -> str:
        """Label of the currency, or the word itself."""
        return self.premiums.document.currency or "currency"

    @property
    def without_rate(self) -> int:
        """Cells that have no rate."""
        return sum(1 for why in self.premiums.table.column("why").to_pylist() if why)


def premium_run(
    run: Path, out: Path, *, replace_finished: bool = False, workbook: bool = True, command: str = ""
) -> PremiumReport:
    """Work out the rates that a premium document asks for and leave a run folder behind, or nothing.

    Raises DocumentError for wrong input and RunFolderError where the folder cannot be written.
    """
    started, watch = datetime.now(UTC), Stopwatch()
    with RunFolder(out, replace_finished) as folder:
        with watch.phase("reading documents"):
            document, designs, basis, inputs = _read(run)
        with watch.phase("working out the rates"):
            found = _worked_out(run, document, designs, basis)
        seals = [item.sha256 for item in inputs if item.role == "design"]
        record = _record(
            run, found, basis, inputs, seals[designs.index(found.design)], command or command_line(), str(out), started
        )
        report = PremiumReport(found, record, dict(watch.seconds))
        with watch.phase("writing"):
            files = [write_table(folder.path, "rates.parquet", found.table)]
            files.append(write_table(folder.path, "findings.parquet", findings_table(found)))
            files.append(write_sealed(folder.path, "report.html", _page(report)))
            if workbook:
                files.append(write_sealed(folder.path, "report.xlsx", _workbook(report)))
        timings = {**watch.seconds, "altogether": watch.total}
        record = complete(record, files, timings, datetime.now(UTC))
        write_sealed(folder.path, RECORD, sealed_text(record))
        folder.finish()
    return PremiumReport(found, record, timings)


def _read(run: Path) -> tuple[PremiumDocument, list[Design], Basis, tuple[Input, ...]]:
    document = read_document(run, PremiumDocument)
    folder = run.parent
    designs, basis = read_designs(folder / document.designs), read_basis(folder / document.basis)
    named = [
        ("premium document", run.name),
        *(("design", design) for design in design_names(document.designs, folder / document.designs)),
        *basis_files(document.basis, basis),
    ]
    return document, designs, basis, seal_all(named, folder)


def _worked_out(run: Path, document: PremiumDocument, designs: list[Design], basis: Basis) -> Premiums:
    try:
        found = premiums(document, designs, basis)
    except ValueError as error:
        raise DocumentError(f"{run}: {error}") from error
    why = [text for text in found.table.column("why").to_pylist() if text]
    if len(why) == found.table.num_rows:
        raise DocumentError(f"{run}: no cell of the table has a rate; of the first: {why[0]}")
    return found


def _record(
    run: Path,
    found: Premiums,
    basis: Basis,
    inputs: tuple[Input, ...],
    seal: str,
    command: str,
    out: str,
    started: datetime,
) -> JSON:
    document = found.document
    why = [text for text in found.table.column("why").to_pylist() if text]
    return {
        **opening("premium", document.title or "Premium rates", command, started),
        "inputs_from": from_folder_to(out, str(run.parent)),
        "inputs": [without_none(item) for item in inputs],
        "settings": document.model_dump(mode="json", by_alias=True),
        "conventions": [{"matter": matter, "rule": rule} for matter, rule in found.conventions],
        "basis": basis_entry(basis),
        "designs": design_entries([found.design], [seal]),
        "counts": {
            "cells": found.table.num_rows,
            "cells without a rate": len(why),
            "findings of the checks": len(found.findings),
        },
        "cautions": list(_cautions(found, len(why))),
        "timings": {},
        "outputs": [],
    }


def _cautions(found: Premiums, without: int) -> tuple[str, ...]:
    cells = counted(found.table.num_rows, "cell")
    counts = f"{without:,} of {cells} have no rate, each with the reason in rates.parquet." if without else ""
    checks = f"{counted(len(found.findings), 'breach', 'breaches')} of the checks are listed; judge each."
    where = (
        "Rates that differ by sex, age or health may be unlawful where they are to be used; local law decides.",
        "A rate by equivalence holds no margin beyond that of its basis; profit-test it before it becomes a price.",
    )
    return (*([counts] if counts else []), *([checks] if found.findings else []), *where, *GENERAL, ONE_SCENARIO,
            OUTSIDE_THE_MODEL)  # fmt: skip


def findings_table(found: Premiums) -> pa.Table:
    """Return the findings as a table: check, axis, the cell in words, what was found."""
    rows: dict[str, list[str]] = {name: [] for name in ("check", "axis", "cell", "finding")}
    for one in found.findings:
        cell = ", ".join(f"{axis} {value}" for axis, value in one.cell.items())
        for name, value in zip(rows, (one.check, one.axis, cell, one.said), strict=True):
            rows[name].append(value)
    return pa.table({name: pa.array(values, pa.string()) for name, values in rows.items()})


def _page(report: PremiumReport) -> bytes:
    from .premium_page import premium_page

    return premium_page(report).encode()


def _workbook(report: PremiumReport) -> Any:
    from .premium_workbook import premium_workbook

    return premium_workbook(report)
