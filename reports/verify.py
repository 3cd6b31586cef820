"""Checking a finished run folder against its record, file by file and sum by sum."""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath

import pyarrow as pa

from projection.results import JSON

from .figures import counted
from .record import read_record
from .recount import Recounted, recount
from .run_folder import RECORD
from .sealed_files import digest_of


@dataclass
class Verified:
    """What was found: ``faults`` are wrong, ``notes`` could not be looked at, ``sound`` is in order."""

    faults: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    sound: list[str] = field(default_factory=list)

    @property
    def holds(self) -> bool:
        """Whether nothing is wrong."""
        return not self.faults


def verify(folder: Path, inputs: Path | None = None, look_at_inputs: bool = True) -> Verified:
    """Check a run folder: seals of the outputs, totals recomputed from the policies, the gate, the inputs.

    inputs: where the run document's folder is now, if it has moved. Raises RecordError if the record is
    missing or beyond reading.
    """
    found = Verified()
    record, seal_holds = read_record(folder / RECORD)
    if not seal_holds:
        found.faults.append(f"{RECORD}: the record was changed after the run")
    if record.get("status") != "complete":
        found.faults.append(f"{RECORD}: the run is not recorded as complete")
    damaged = _check_outputs(folder, record, found)
    _check_strays(folder, record, found)
    if record.get("question") != "reserve":
        found.notes.append("Only reserve runs have totals that are added up again; the files were compared.")
    elif damaged:
        found.notes.append("Totals were not recomputed, because files that they come from are damaged or missing.")
    else:
        try:
            _check_sums(recount(folder, record), record, found)
        except (pa.ArrowException, KeyError, TypeError, ValueError) as error:
            found.faults.append(f"The totals cannot be recomputed from the folder's tables: {error}")
    if look_at_inputs:
        _check_inputs(folder, record, inputs, found)
    return found


def _check_outputs(folder: Path, record: JSON, found: Verified) -> bool:
    """Compare every output with its seal; say whether a table among them is damaged."""
    damaged, sound = False, 0
    for output in record["outputs"]:
        fault = _fault(folder / PurePosixPath(output["path"]), output)
        if fault:
            found.faults.append(f"{output['path']}: {fault}")
            damaged = damaged or output["path"].endswith(".parquet")
        else:
            sound += 1
    found.sound.append(f"{counted(sound, 'file')} of {len(record['outputs'])} match the record by size and SHA-256.")
    return damaged


def _fault(path: Path, recorded: JSON) -> str:
    try:
        digest, size = digest_of(path)
    except FileNotFoundError:
        return "is missing"
    except OSError as error:
        return f"cannot be read: {error.strerror}"
    if size != recorded.get("bytes", size):
        return f"was changed: {size:,} bytes, {recorded['bytes']:,} in the record"
    if digest != recorded["sha256"]:
        return f"was changed: SHA-256 {digest[:12]}..., {recorded['sha256'][:12]}... in the record"
    return ""


def _check_strays(folder: Path, record: JSON, found: Verified) -> None:
    known = {output["path"] for output in record["outputs"]} | {RECORD}
    for path in sorted(_files(folder)):
        if path not in known:
            found.faults.append(f"{path}: is not in the record")


def _files(folder: Path) -> Iterator[str]:
    for place, _, names in os.walk(folder):
        for name in names:
            yield (Path(place) / name).relative_to(folder).as_posix()


def _check_sums(counted_again: Recounted, record: JSON, found: Verified) -> None:
    found.faults += counted_again.faults
    if not counted_again.faults:
        reserve = record["totals"].get("reserve", "")
        found.sound.append(
            f"Totals recomputed from {counted(counted_again.policies, 'policy', 'policies')} agree in every "
            f"group; reserve {reserve}."
        )
        found.sound.append("The in-force gate closes: read = valued + exceptions.")


def _check_inputs(folder: Path, record: JSON, inputs: Path | None, found: Verified) -> None:
    start = inputs if inputs is not None else _inputs_folder(folder, record)
    missing = sound = 0
    for item in record.get("inputs", []):
        path = (start or Path()) / item["path"]
        if not item.get("sha256") or (start is None and not path.is_absolute()) or not path.is_file():
            missing += 1
        elif fault := _fault(path, item):
            found.faults.append(f"input {item['path']}: {fault}")
        else:
            sound += 1
    if missing:
        found.notes.append(
            f"{counted(missing, 'input')} could not be found here and so could not be compared; "
            "say --inputs FOLDER if the run document lies elsewhere now."
        )
    if sound:
        found.sound.append(f"{counted(sound, 'input')} unchanged since the run.")


def _inputs_folder(folder: Path, record: JSON) -> Path | None:
    way = record.get("inputs_from")
    return folder / way if way else None
