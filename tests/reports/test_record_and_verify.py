from __future__ import annotations

import json
import re
import shutil
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from reports.record import RecordError, from_folder_to, read_record, sealed_text
from reports.run_folder import RECORD
from reports.sealed_files import digest_of
from reports.verify import verify

FILES = (
    "policies/part-00000.parquet",
    "totals.parquet",
    "cash_flows.parquet",
    "exceptions.parquet",
    "report.html",
    "report.xlsx",
    RECORD,
)


def reseal(folder: Path) -> None:
    """Let the record agree with the files again, as somebody would who wants to hide a change."""
    record, _ = read_record(folder / RECORD)
    for output in record["outputs"]:
        output["sha256"], output["bytes"] = digest_of(folder / output["path"])
    (folder / RECORD).write_bytes(sealed_text(record))


def test_a_finished_folder_holds(finished: Path) -> None:
    found = verify(finished)
    assert found.faults == []
    assert found.notes == []
    assert len(found.sound) == 4


def test_the_record_says_what_went_in_and_out(finished: Path, office: Path) -> None:
    record, seal_holds = read_record(finished / RECORD)
    assert seal_holds
    assert record["status"] == "complete"
    assert record["started"] <= record["finished"]
    inputs = {item["path"]: item for item in record["inputs"]}
    assert inputs["month-end.toml"]["sha256"] == digest_of(office / "month-end.toml")[0]
    assert inputs["bases/statutory.toml"]["role"] == "basis"
    parts = [item for item in record["inputs"] if item["role"] == "extract"]
    assert sum(item["rows"] for item in parts) == int(record["control"][0]["read"]) == 300
    assert all(item["sha256"] == digest_of(office / item["path"])[0] for item in parts)
    assert {item["path"] for item in record["outputs"]} == {*(name for name in FILES if name != RECORD)}
    assert re.fullmatch(r"-?\d+\.\d\d", record["totals"]["reserve"])
    assert record["control"][1] == {
        "name": "sum_assured",
        "read": "1234567890.12",
        "valued": "1234560000.12",
        "exceptions": "7890.00",
        "closes": True,
    }
    assert any("actuarial opinion" in caution for caution in record["cautions"])
    assert {design["code"] for design in record["designs"]} >= {"LARBOARD"}


def test_a_record_tells_no_place_that_was_not_typed() -> None:
    assert from_folder_to("results", "office") == "../office"
    assert from_folder_to("office/results", "office") == ".."
    assert from_folder_to("/data/results", "/data/office") == "../office"
    # From here to there leads through folders that nobody typed.
    assert from_folder_to("/data/results", "office") == ""


@pytest.mark.parametrize("place", [0.0, 0.3, 0.5, 0.8, 0.999])
@pytest.mark.parametrize(
    "name",
    FILES,
)
def test_a_flipped_bit_is_found_in_every_file(finished: Path, name: str, place: float) -> None:
    path = finished / name
    content = bytearray(path.read_bytes())
    content[int(place * len(content))] ^= 1
    path.write_bytes(content)
    try:
        faults = verify(finished).faults
    except RecordError as error:
        faults = [str(error)]
    assert any(name in fault for fault in faults)


def test_missing_and_strange_files_are_named(finished: Path) -> None:
    (finished / "report.xlsx").unlink()
    (finished / "policies" / "part-00001.parquet").write_bytes(b"")
    faults = verify(finished).faults
    assert faults == ["report.xlsx: is missing", "policies/part-00001.parquet: is not in the record"]


def test_sums_are_found_wrong_even_if_every_seal_agrees(finished: Path) -> None:
    path = finished / "totals.parquet"
    totals = pq.read_table(path)
    reserve = totals["reserve"].to_pylist()
    reserve[2] += 0.01
    pq.write_table(totals.set_column(totals.column_names.index("reserve"), "reserve", pa.array(reserve)), path)
    reseal(finished)
    faults = verify(finished).faults
    assert len(faults) == 1
    assert "totals.parquet" in faults[0]
    assert "reserve" in faults[0]


def test_a_lost_policy_opens_the_gate(finished: Path) -> None:
    path = finished / "policies" / "part-00000.parquet"
    pq.write_table(pq.read_table(path).slice(1), path)
    reseal(finished)
    faults = verify(finished).faults
    assert any("295 valued, but 294 policies" in fault for fault in faults)
    assert any("policies add up to" in fault for fault in faults)


def test_a_lost_exception_opens_the_gate(finished: Path) -> None:
    path = finished / "exceptions.parquet"
    pq.write_table(pq.read_table(path).slice(1), path)
    reseal(finished)
    assert any("5 exceptions, but 4 rows" in fault for fault in verify(finished).faults)


def test_a_table_that_was_never_readable_is_a_fault_and_no_traceback(finished: Path) -> None:
    (finished / "policies" / "part-00000.parquet").write_bytes(b"PAR1 but no more")
    reseal(finished)
    assert any("cannot be recomputed" in fault for fault in verify(finished).faults)


def test_changed_and_missing_inputs(finished: Path, office: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy"
    shutil.copytree(office, copy)
    assert verify(finished, inputs=copy).faults == []
    (copy / "bases" / "statutory.toml").write_text("# changed\n")
    (copy / "month-end.toml").unlink()
    found = verify(finished, inputs=copy)
    assert len(found.faults) == 1
    assert "input bases/statutory.toml: was changed" in found.faults[0]
    assert any("1 input could not be found" in note for note in found.notes)
    assert verify(finished, inputs=copy, look_at_inputs=False).faults == []


def test_what_is_no_run_folder_is_said(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="not a finished run folder"):
        verify(tmp_path)
    (tmp_path / RECORD).write_text("[]")
    with pytest.raises(RecordError, match="not a record"):
        verify(tmp_path)


def test_the_record_is_json_that_anybody_can_read(finished: Path) -> None:
    record = json.loads((finished / RECORD).read_text(encoding="utf-8"))
    assert list(record)[-1] == "seal"
