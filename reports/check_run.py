"""The check before a run: everything is read and looked at as the run would, and nothing is kept."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa

from portfolios.exception_rows import sentence
from projection.results import Outcome

from .figures import count, counted, lines_up, short
from .prepared import Prepared, prepare
from .record import reasons
from .reserve_run import value_prepared

EXAMPLES = 3


@dataclass(frozen=True)
class Checked:
    """What a check found. ``lines`` say it; ``ready`` is whether the run could go ahead."""

    lines: tuple[str, ...]
    ready: bool


def check_run(run: Path, progress: Callable[[int, int], None], threads: int | None = None) -> Checked:
    """Read and check everything that a run would.

    Raises DocumentError and ExtractError for documents and extracts that stop a run before it starts,
    RunStopped where the engine finds fault with itself.
    """
    prepared = prepare(run)
    # The engine finds the exceptions of a run; asking it, with no limit, gives the same ones.
    outcome = value_prepared(prepared, _nowhere, progress, threads, exceptions_limit=1.0, sample=1)
    limit = prepared.document.exceptions_limit
    left_out = outcome.read - outcome.valued
    ready = left_out <= limit * outcome.read and outcome.valued > 0
    verdict = [
        f"{count(left_out)} of {counted(outcome.read, 'policy', 'policies')} would not be valued"
        f" ({_share(left_out, outcome.read)}; the run stops above {limit:.2%}).",
        "The run can go ahead." if ready else "The run would stop. Correct the extract or the documents first.",
    ]
    return Checked((*_read(prepared), "", *_exceptions(outcome), "", *verdict), ready)


def _nowhere(chunk: pa.Table) -> None:
    """Keep nothing."""


def _share(part: int, whole: int) -> str:
    return f"{part / whole:.2%}" if whole else "nothing was read"


def _read(prepared: Prepared) -> list[str]:
    document, extract = prepared.document, prepared.extract
    designs = ", ".join(design.code for design in prepared.designs)
    return lines_up(
        [
            ["run", f"{document.title or prepared.run.name}, valuation date {document.valuation_date}"],
            ["designs", f"{len(prepared.designs)}: {designs}"],
            ["basis", f"{prepared.basis.title}, SHA-256 {prepared.basis.digest[:12]}..."],
            [
                "extract",
                f"{counted(extract.rows, 'policy', 'policies')} in {counted(len(extract.files), 'file')}",
            ],
        ]
    )


def _exceptions(outcome: Outcome) -> list[str]:
    if not outcome.exceptions.num_rows:
        return ["Every policy can be valued."]
    examples: dict[str, list[str]] = defaultdict(list)
    for row in outcome.exceptions.to_pylist():
        found = examples[row["reason"]]
        if len(found) < EXAMPLES:
            line = f"{short(row['policy_id'])}: {sentence(row)}"
            found += [line] if line not in found else []
    lines = []
    for reason, number in reasons(outcome).items():
        lines.append(f"{reason}: {counted(number, 'policy', 'policies')}")
        lines += [f"    {example}" for example in examples[reason]]
    return lines
