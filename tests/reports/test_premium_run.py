"""The commands 'premium' and 'alter' as people use them."""

from __future__ import annotations

import json
import math
from pathlib import Path

import openpyxl
import pyarrow.parquet as pq
import pytest

from reports.command import run_command
from reports.output_columns import OUTPUT_TABLES
from reports.rate_tables import decimals_of, plain


@pytest.fixture(scope="module")
def finished(office: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    out = tmp_path_factory.mktemp("rates") / "rates"
    assert run_command(["premium", str(office / "premium.toml"), "--out", str(out)]) == 0
    return out


def test_the_run_folder_is_whole(finished: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert {path.name for path in finished.iterdir()} == {
        "rates.parquet", "findings.parquet", "report.html", "report.xlsx", "run.json",
    }  # fmt: skip
    assert run_command(["verify", str(finished)]) == 0
    assert "4 files of 4 match" in capsys.readouterr().out
    for name in ("rates.parquet", "findings.parquet"):
        listed = {column for column, _, _ in OUTPUT_TABLES[name] if not column.startswith("*")}
        assert set(pq.read_schema(finished / name).names) - {"sex", "age", "premium_frequency"} == listed
    record = json.loads((finished / "run.json").read_text())
    assert record["question"] == "premium"
    assert record["status"] == "complete"
    assert [one["code"] for one in record["designs"]] == ["FAIRLEAD"]
    design = next(item for item in record["inputs"] if item["path"] == "designs/fairlead.toml")
    assert record["designs"][0]["sha256"] == design["sha256"]
    assert record["counts"]["cells"] == pq.read_metadata(finished / "rates.parquet").num_rows


def test_page_workbook_and_table_hold_the_same_rates(finished: Path) -> None:
    rates = pq.read_table(finished / "rates.parquet").to_pylist()
    page = (finished / "report.html").read_text()
    sheets = openpyxl.load_workbook(finished / "report.xlsx")
    shown = [cell.value for row in sheets["Rates"].iter_rows() for cell in row]
    for row in (rates[0], rates[len(rates) // 2], rates[-1]):
        assert f"{row['rate']:,.2f}</td>" in page
        assert row["rate"] in shown
    cells = list(sheets["Cells"].iter_rows(min_row=2, values_only=True))
    head, first = cells[0], cells[1]
    assert first[head.index("rate")] == rates[0]["rate"]
    assert first[head.index("amount")] == pytest.approx(rates[0]["amount"], rel=1e-15)


def test_hostile_text_is_escaped(office: Path, tmp_path: Path) -> None:
    text = (office / "premium.toml").read_text().replace("Fairlead deferred annuity", "<script>alert(1)</script>")
    run = office / "hostile-premium.toml"
    run.write_text(text, encoding="utf-8")
    out = tmp_path / "rates"
    assert run_command(["premium", str(run), "--out", str(out), "--no-workbook"]) == 0
    page = (out / "report.html").read_text()
    assert "<script>" not in page
    assert "&lt;script&gt;" in page
    assert not (out / "report.xlsx").exists()


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('design      = "FAIRLEAD"', 'design = "FAIRLEED"', "no design has the code 'FAIRLEED'"),
        ("policy_fee  = 24", "polcy_fee = 24", "did you mean 'policy_fee'?"),
        ("annuity_frequency = 12\n", "", "no column 'annuity_frequency'"),
        ("annuity_frequency = 12\n", "annuity_frequency = 7\n", "no cell of the table has a rate"),
        ('unknown     = "premium_pa"', 'unknown = "sum_assured"', "no amount of the design"),
    ],
)
def test_faults_name_the_file(
    office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], old: str, new: str, said: str
) -> None:
    text = (office / "premium.toml").read_text()
    assert old in text
    run = office / "faulty-premium.toml"
    run.write_text(text.replace(old, new), encoding="utf-8")
    assert run_command(["premium", str(run), "--out", str(tmp_path / "x")]) == 2
    printed = capsys.readouterr().err
    assert "faulty-premium.toml" in printed
    assert said in printed
    assert not (tmp_path / "x").exists()


def test_the_summary_says_what_was_found(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["premium", str(office / "premium.toml"), "--out", str(tmp_path / "rates")]) == 0
    printed = capsys.readouterr().out
    assert "premium pa per 100 of annuity pa, by gross equivalence; 416 cells." in printed
    assert "a policy of 8,000.00 costs less" in printed


@pytest.mark.parametrize(("step", "digits"), [(1, 0), (0.05, 2), (0.5, 1), (0.001, 3), (10, 0)])
def test_decimals_of_a_rounding_step(step: float, digits: int) -> None:
    assert decimals_of(step) == digits


def test_axis_values_are_shown_plainly() -> None:
    assert [plain(value) for value in (40.0, 0.5, 100_000.0, "F")] == ["40", "0.5", "100,000", "F"]


@pytest.fixture(scope="module")
def endowment(office: Path) -> str:
    """A policy with a reserve worth altering."""
    rows = pq.read_table(office / "inforce").to_pylist()
    chosen = [row for row in rows if row["product"] == "QUAYWARD" and row["status"] == "in force"]
    oldest = min(chosen, key=lambda row: row["commencement_date"])
    return str(oldest["policy_id"])


def test_a_paid_up_sum(office: Path, endowment: str, capsys: pytest.CaptureFixture[str]) -> None:
    run = str(office / "month-end.toml")
    assert run_command(["alter", run, endowment, "--set", "premium_pa=0", "--solve", "sum_assured"]) == 0
    lines = capsys.readouterr().out.splitlines()
    before, after = next(line for line in lines if line.startswith("reserve")).split()[-2:]
    assert before == after
    full, paid_up = (
        float(text.replace(",", "")) for text in next(line for line in lines if line.startswith("sum")).split()[-2:]
    )
    assert 0 < paid_up < full
    assert not math.isclose(paid_up, full)


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--set", "premium_pa", "--solve", "sum_assured"], "is no change; write column=value"),
        (["--set", "premium_pa=much", "--solve", "sum_assured"], "takes a number"),
        (["--set", "birth_date=1980", "--solve", "sum_assured"], "takes a date"),
        (["--set", "sum_assured=1", "--solve", "sum_assured"], "cannot be set as well"),
        (["--set", "premium_pa=0", "--solve", "nothing"], "not an amount of any stream"),
        (["--set", "premium_frequency=5", "--solve", "sum_assured"], "frequency not known"),
        (["--set", "premium_pa=0", "--solve", "annuity_pa"], "does not depend on the amount"),
    ],
)
def test_alterations_that_cannot_be(
    office: Path, endowment: str, arguments: list[str], said: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run_command(["alter", str(office / "month-end.toml"), endowment, *arguments]) == 2
    assert said in capsys.readouterr().err
