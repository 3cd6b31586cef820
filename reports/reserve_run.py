"""The month-end run: reads everything, values, writes the run folder."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import AbstractContextManager
from dataclasses import replace
from datetime import UTC, datetime
from importlib import import_module
from pathlib import Path
from typing import Any

from projection.documents import DocumentError
from projection.results import Outcome
from projection.valuation import value_extract

from .prepared import Prepared, prepare
from .record import build_record, command_line, complete, sealed_text
from .report import Report
from .run_folder import RECORD, RunFolder
from .sealed_files import WrittenFile, write_sealed
from .stopwatch import Stopwatch
from .tables import PolicyWriter, check_rows, write_table

ProgressOn = Callable[[str], AbstractContextManager[Callable[[int, int], None]]]


def reserve_run(
    run: Path,
    out: Path,
    progress_on: ProgressOn,
    *,
    replace_finished: bool = False,
    threads: int | None = None,
    workbook: bool = True,
    command: str = "",
) -> Report:
    """Value the extract that a run document names and leave a run folder behind, or nothing.

    Raises DocumentError and ExtractError for wrong input, RunFolderError where the folder cannot be written,
    and RunStopped where the run must not go on.
    """
    started, watch = datetime.now(UTC), Stopwatch()
    with RunFolder(out, replace_finished) as folder, ThreadPoolExecutor(1) as beside:
        with watch.phase("reading documents"):
            prepared = prepare(run)
        digests = beside.submit(prepared.extract.digests)
        beside.submit(_load_writers, workbook)
        with PolicyWriter(folder.path) as writer:
            with watch.phase("valuing"), progress_on("valuing") as progress:
                outcome = value_prepared(prepared, writer, progress, threads)
            writer.no_more()
            with watch.phase("sealing the extract"):
                sealed = digests.result()
                prepared.check_unchanged()
            record = build_record(prepared, outcome, sealed, command or command_line(), str(out), started)
            # The last policies are still being written while the reports are made.
            files = write_reports(folder.path, Report(_timed(outcome, watch), record), watch, workbook)
            with watch.phase("writing tables"):
                tables = [*writer.finish(), *write_tables(folder.path, outcome)]
                check_rows(folder.path, tables, outcome.valued)
        record = complete(record, [*tables, *files], _timed(outcome, watch).timings, datetime.now(UTC))
        write_sealed(folder.path, RECORD, sealed_text(record))
        folder.finish()
    return Report(_timed(outcome, watch), record)


def value_prepared(
    prepared: Prepared, sink: Any, progress: Callable[[int, int], None], threads: int | None, **changes: Any
) -> Outcome:
    """Value what was read, as the run document asks or with some of its questions changed.

    Raises what ``value_extract`` does; where basis and extract do not fit together, the basis's file is named.
    """
    document = prepared.document
    asked: dict[str, Any] = {
        "further": prepared.further,
        "group_by": tuple(document.group_by),
        "in_force": tuple(document.in_force),
        "exceptions_limit": document.exceptions_limit,
        "sample": document.sample,
        "sink": sink,
        "progress": progress,
        "threads": threads,
    }
    try:
        return value_extract(prepared.extract, prepared.designs, prepared.basis, document.settings, **(asked | changes))
    except DocumentError as error:
        path = document.further_bases.get(error.side, document.basis)
        raise DocumentError(f"{prepared.folder / path}: {error}") from error


def write_tables(folder: Path, outcome: Outcome) -> list[WrittenFile]:
    """Write totals, cash flows and exceptions."""
    return [
        write_table(folder, "totals.parquet", outcome.totals),
        write_table(folder, "cash_flows.parquet", outcome.cash_flows),
        write_table(folder, "exceptions.parquet", outcome.exceptions),
        *(write_table(folder, f"cash_flows_{one.name}.parquet", one.cash_flows) for one in outcome.further),
    ]


def write_reports(folder: Path, report: Report, watch: Stopwatch, workbook: bool) -> list[WrittenFile]:
    """Write the page and, if wanted, the workbook."""
    from .page import page

    files = []
    with watch.phase("page"):
        files.append(write_sealed(folder, "report.html", page(report).encode()))
    if workbook:
        from .workbook import workbook_bytes

        with watch.phase("workbook"):
            files.append(write_sealed(folder, "report.xlsx", workbook_bytes(report)))
    return files


def _load_writers(workbook: bool) -> None:
    """Import what page and workbook need, and compile the page's template, while the engine computes."""
    import_module(".page_templates", __package__).template("report.html")
    if workbook:
        import_module(".workbook", __package__)


def _timed(outcome: Outcome, watch: Stopwatch) -> Outcome:
    within = {f"of valuing: {name}": taken for name, taken in outcome.timings.items()}
    return replace(outcome, timings={**watch.seconds, **within, "altogether": watch.total})
