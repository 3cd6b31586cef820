"""A run on several bases as people see it: folder, record, page, workbook, console, working."""

from __future__ import annotations

import io
import json
from pathlib import Path

import openpyxl
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from reports.command import run_command
from reports.verify import verify

RUN = """
title            = "Two bases"
valuation_date   = 2026-11-30
extract          = "inforce"
designs          = "designs"
basis            = "bases/statutory.toml"
further_bases    = { best_estimate = "bases/best_estimate.toml" }
exceptions_limit = 0.15
sample           = 2
"""


@pytest.fixture(scope="module")
def finished(office: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    """A run folder, and what was printed."""
    run = office / "two-bases.toml"
    run.write_text(RUN, encoding="utf-8")
    out = tmp_path_factory.mktemp("runs") / "two"
    printed = io.StringIO()
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("sys.stdout", printed)
        assert run_command(["reserve", str(run), "--out", str(out), "--threads", "1"]) == 0
    return out, printed.getvalue()


def test_the_record_holds_every_basis(finished: tuple[Path, str]) -> None:
    record = json.loads((finished[0] / "run.json").read_text())
    (further,) = record["further_bases"]
    assert further["name"] == "best_estimate"
    assert further["sha256"] != record["basis"]["sha256"]
    assert further["sample"]["passes"]
    policies = pq.read_table(finished[0] / "policies")
    for name in ("reserve", "reserve_best_estimate", "value_of_premiums_best_estimate"):
        cents = sum(round(100 * value) for value in policies.column(name).to_pylist())
        assert round(100 * float(record["totals"][name])) == cents
    roles = [item["path"] for item in record["inputs"] if item["role"] == "basis"]
    assert roles == ["bases/statutory.toml", "bases/best_estimate.toml"]
    paths = [item["path"] for item in record["inputs"]]
    assert len(paths) == len(set(paths))


def test_people_see_the_bases_side_by_side(finished: tuple[Path, str]) -> None:
    out, printed = finished
    record = json.loads((out / "run.json").read_text())
    own, other = (float(record["totals"][name]) for name in ("reserve", "reserve_best_estimate"))
    page = (out / "report.html").read_text()
    for text in (page, printed):
        assert f"{other:,.2f}" in text
        assert f"{other - own:,.2f}" in text
    assert "best_estimate" in page
    sheet = openpyxl.load_workbook(out / "report.xlsx")["Bases"]
    values = [cell.value for row in sheet.iter_rows() for cell in row]
    assert own in values
    assert other in values


def test_verify_adds_up_every_basis(finished: tuple[Path, str], tmp_path: Path) -> None:
    assert verify(finished[0]).holds
    totals = pq.read_table(finished[0] / "totals.parquet")
    wrong = [
        value + 0.01 * (place == 0) for place, value in enumerate(totals.column("reserve_best_estimate").to_pylist())
    ]
    place = totals.schema.get_field_index("reserve_best_estimate")
    totals = totals.set_column(place, "reserve_best_estimate", pa.array(wrong))
    record = json.loads((finished[0] / "run.json").read_text())
    from reports.recount import recount

    copy = tmp_path / "copy"
    (copy / "policies").mkdir(parents=True)
    for output in record["outputs"]:
        (copy / output["path"]).write_bytes((finished[0] / output["path"]).read_bytes())
    assert not recount(copy, record).faults
    pq.write_table(totals, copy / "totals.parquet")
    assert any("reserve_best_estimate" in fault for fault in recount(copy, record).faults)


def test_the_working_on_a_further_basis(
    finished: tuple[Path, str], office: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    row = pq.read_table(finished[0] / "policies").slice(5, 1).to_pylist()[0]
    run = str(office / "two-bases.toml")
    assert run_command(["explain", run, row["policy_id"], "--basis", "best_estimate"]) == 0
    assert f"{row['reserve_best_estimate']:,.2f}" in capsys.readouterr().out
    assert run_command(["explain", run, row["policy_id"]]) == 0
    assert f"{row['reserve']:,.2f}" in capsys.readouterr().out
    assert run_command(["explain", run, row["policy_id"], "--basis", "tax"]) != 0
    assert "it has 'best_estimate'" in capsys.readouterr().err


def test_a_fault_of_a_further_basis_names_its_file(office: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = (office / "bases" / "best_estimate.toml").read_text()
    (office / "bases" / "asking.toml").write_text(text.replace('sex = "F"', "sex = 1"), encoding="utf-8")
    run = office / "asking.toml"
    run.write_text(RUN.replace("best_estimate.toml", "asking.toml"), encoding="utf-8")
    assert run_command(["check", str(run)]) != 0
    said = capsys.readouterr().err
    assert "bases/asking.toml" in said
    assert "'sex'" in said
