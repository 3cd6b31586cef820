"""The record of a run, ``run.json``: what went in, what was asked, what came out, and the seals of all of it.

The last line of the file is a seal, the SHA-256 of every byte before it, so that the record itself cannot be
changed unnoticed. Amounts are exact decimals in text. Paths are as the user gave them; nothing in the record
names the user or the machine.
"""

from __future__ import annotations

import hashlib
import json
import os
import platform
import sys
from collections import Counter
from collections.abc import Iterable
from dataclasses import asdict
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path, PurePath
from typing import Any

from assumptions.basis import Basis
from portfolios.designs import Design
from projection.basis_names import column_on
from projection.results import JSON, ControlTotal, OnBasis, Outcome

from .cautions import cautions
from .figures import decimal_text
from .prepared import Input, Prepared
from .sealed_files import WrittenFile

FORMAT = 1
_PACKAGES = (
    "duecourse",
    "numpy",
    "numba",
    "llvmlite",
    "pyarrow",
    "pydantic",
    "defusedxml",
    "jinja2",
    "xlsxwriter",
)
_SEAL = b',\n  "seal": "'
_END = b'"\n}\n'


class RecordError(ValueError):
    """A record that is missing, unreadable or was changed."""


def build_record(
    prepared: Prepared, outcome: Outcome, digests: dict[str, str], command: str, out: str, started: datetime
) -> JSON:
    """Return the record without its outputs, which ``complete`` adds."""
    document = prepared.document
    return {
        **opening("reserve", document.title or "Reserve run", command, started),
        "inputs_from": from_folder_to(out, str(prepared.folder)),
        "inputs": [without_none(item) for item in prepared.sources(digests)],
        "settings": document.model_dump(mode="json", by_alias=True),
        "conventions": [{"matter": matter, "rule": rule} for matter, rule in outcome.conventions],
        "basis": basis_entry(prepared.basis),
        "designs": design_entries(prepared.designs, prepared.design_digests),
        "control": [_control(total, outcome.settings.decimals) for total in outcome.control],
        "further_bases": [_further(one, prepared) for one in outcome.further],
        "totals": {name: decimal_text(minor, outcome.settings.decimals) for name, minor in all_totals(outcome).items()},
        "exceptions_by_reason": reasons(outcome),
        "sample": {**asdict(outcome.sample), "passes": outcome.sample.passes},
        "counts": dict(outcome.counts),
        "cautions": list(cautions(outcome)),
        "timings": {name: round(taken, 4) for name, taken in outcome.timings.items()},
        "outputs": [],
    }


def opening(question: str, title: str, command: str, started: datetime) -> JSON:
    """Return what every record begins with, whatever the run was asked."""
    return {
        "record": FORMAT,
        "question": question,
        "title": title,
        "status": "unfinished",
        "approval": "unsigned",
        "command": command,
        "started": stamp(started),
        "finished": "",
        "versions": versions(),
        "python": f"{platform.python_implementation()} {platform.python_version()}",
        "platform": f"{platform.system()} {platform.machine()}",
    }


def basis_entry(basis: Basis) -> JSON:
    """Return what a record says of a basis."""
    return {"title": basis.title, "reference": basis.document.reference, "sha256": basis.digest}


def design_entries(designs: Iterable[Design], digests: Iterable[str]) -> list[JSON]:
    """Return what a record says of designs."""
    return [
        {"code": design.code, "title": design.title, "sha256": digest}
        for design, digest in zip(designs, digests, strict=True)
    ]


def all_totals(outcome: Outcome) -> dict[str, int]:
    """Return the sums over all policies in minor units by column of money, those of the further bases behind."""
    further = {column_on(name, one.name): minor for one in outcome.further for name, minor in one.total.items()}
    return {**outcome.total, **further}


def _further(one: OnBasis, prepared: Prepared) -> JSON:
    """What the record says of a further basis; of its conventions those that differ are shown to people."""
    return {
        "name": one.name,
        **basis_entry(prepared.further[one.name]),
        "conventions": [{"matter": matter, "rule": rule} for matter, rule in one.conventions],
        "sample": {**asdict(one.sample), "passes": one.sample.passes},
        "counts": dict(one.counts),
    }


def complete(record: JSON, outputs: Iterable[WrittenFile], timings: dict[str, float], finished: datetime) -> JSON:
    """Return the record of a finished run: with its outputs, all timings and the time of its end."""
    return record | {
        "status": "complete",
        "finished": stamp(finished),
        "timings": {name: round(taken, 4) for name, taken in timings.items()},
        "outputs": [without_none(file) for file in outputs],
    }


def sealed_text(record: JSON) -> bytes:
    """Return the bytes of ``run.json``: the record and its seal."""
    body = json.dumps(record, indent=2, ensure_ascii=False).encode().removesuffix(b"\n}")
    return body + _SEAL + hashlib.sha256(body).hexdigest().encode() + _END


def read_record(path: Path) -> tuple[JSON, bool]:
    """Return a record and whether its seal holds. Raises RecordError where there is nothing to read."""
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise RecordError(f"{path}: there is no such record, so this is not a finished run folder") from None
    except OSError as error:
        raise RecordError(f"{path}: cannot be read: {error.strerror}") from error
    body, _, seal = content.rpartition(_SEAL)
    holds = seal == hashlib.sha256(body).hexdigest().encode() + _END
    try:
        record = json.loads(content)
    except ValueError as error:
        raise RecordError(f"{path}: the record was damaged and cannot be read any more ({error})") from None
    if not isinstance(record, dict) or not isinstance(record.get("outputs"), list):
        raise RecordError(f"{path}: not a record of a run")
    return record, holds


def reasons(outcome: Outcome) -> dict[str, int]:
    """Return how many policies each reason keeps out, the most frequent first."""
    found = Counter(outcome.exceptions.column("reason").to_pylist())
    return dict(sorted(found.items(), key=lambda item: (-item[1], item[0])))


def versions() -> dict[str, str]:
    """Return the versions of the program and of what it stands on."""
    return {name: _version(name) for name in _PACKAGES}


def stamp(moment: datetime) -> str:
    """Return a moment in ISO 8601, UTC, to the second."""
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def command_line() -> str:
    """Return the command as it was typed, without the place where the program lies."""
    return " ".join(["duecourse", *(_quoted(word) for word in sys.argv[1:])])


def from_folder_to(out: str, folder: str) -> str:
    """Return the way from the run folder to the run document's folder; '' if it tells more than was typed."""
    try:
        way = os.path.relpath(folder, out)
    except ValueError:  # pragma: no cover - other drive
        return ""
    typed = {part for path in (out, folder) for part in PurePath(path).parts}
    known = all(part in typed for part in PurePath(way).parts if part not in ("..", "."))
    return PurePath(way).as_posix() if known else ""


def _version(name: str) -> str:
    try:
        return metadata.version(name)
    except metadata.PackageNotFoundError:
        return "not installed" if name != "duecourse" else "source tree"


def _quoted(word: str) -> str:
    return f"'{word}'" if " " in word else word


def without_none(item: Input | WrittenFile) -> JSON:
    """Return what a record says of a file."""
    return {name: value for name, value in asdict(item).items() if value is not None}


def _control(total: ControlTotal, decimals: int) -> dict[str, Any]:
    scale = 0 if is_count(total) else decimals
    return {
        "name": total.name,
        "read": decimal_text(total.read, scale),
        "valued": decimal_text(total.valued, scale),
        "exceptions": decimal_text(total.exceptions, scale),
        "closes": total.closes,
    }


def is_count(total: ControlTotal) -> bool:
    """Say whether a control total counts policies rather than currency."""
    return total.name == "policies"
