"""The working of a policy as a workbook: the same as its text, with figures as numbers and dates as dates."""

from __future__ import annotations

import io
import re
import zipfile
from datetime import date, datetime
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import openpyxl
import pytest

from assumptions.basis import prepare_basis
from portfolios.demo_faults import fault_rows
from portfolios.designs import Design
from projection.settings import Settings
from projection.working import working
from reports.command import run_command
from reports.working_book import OF_A_LIFE, PAYMENT_COLUMNS, STEP_COLUMNS, working_bytes
from reports.working_facts import work_out

SHEETS = [
    "Reserve", "Policy", "Conventions", "Rules", "Mortality rates", "Lapse rates", "Steps", "Payments", "Symbols",
    "Cautions",
]  # fmt: skip
POLICY = {
    "policy_id": "P1",
    "product": "PIER",
    "status": "in force",
    "birth_date": date(1976, 2, 10),
    "commencement_date": date(2016, 3, 10),
    "sex": "F",
    "sum_assured": 25_000.0,
    "flag": True,
    "remark": "=1+1",
    "unused": None,
}
STREAMS: list[dict[str, Any]] = [
    {"name": "premium", "direction": "in", "amount": 1200.0, "while": "alive", "to": 20, "a_year": 12},
    {"name": "death", "direction": "out", "amount": "sum_assured", "on": "death", "to": 20},
    {"name": "leaving", "direction": "out", "amount": 500.0, "on": "lapse", "to": 20},
    {"name": "maturity", "direction": "out", "amount": 25000.0, "while": "alive", "paid": "once", "from": 20},
    {"name": "commission", "kind": "commission", "direction": "out", "of": "premium", "share": 0.03},
]
BASIS: dict[str, Any] = {
    "title": "Prudent",
    "mortality": {"rule": [{"table": {"law": "Makeham", "A": 0.00022, "B": 2.7e-06, "c": 1.124}, "multiple": 0.9}]},
    "lapse": {"rule": [{"rates": [0.1, 0.05], "until": 15}]},
    "interest": {"rule": [{"forward": [0.03, 0.02]}]},
    "expense": [{"name": "keeping", "per": "policy", "rule": [{"first_year": 90.0, "later_years": 30.0}]}],
}


def pier(*streams: dict[str, Any], title: str = "Pier endowment") -> Design:
    return Design.model_validate({"code": "PIER", "title": title, "stream": list(streams or STREAMS)})


def parts(
    design: Design | None = None, settings: Settings | None = None, basis: Any = None, **columns: Any
) -> tuple[Any, ...]:
    day = settings or Settings(date(2026, 11, 30))
    return POLICY | columns, design or pier(), prepare_basis(basis or BASIS), day


def book_of(content: bytes) -> Any:
    with zipfile.ZipFile(io.BytesIO(content)) as files:
        for name in files.namelist():
            ElementTree.fromstring(files.read(name))
    return openpyxl.load_workbook(io.BytesIO(content))


def made(*asked: Any, **columns: Any) -> Any:
    return book_of(working_bytes(work_out(*parts(*asked, **columns)), "quarrens"))


@pytest.fixture(scope="module")
def book() -> Any:
    return made()


def rows(sheet: Any, head: int = 2) -> list[dict[str, Any]]:
    """The rows under a sheet's head, by name of the column."""
    names, *body = [list(row) for row in sheet.iter_rows(min_row=head, values_only=True)]
    return [dict(zip(names, row, strict=True)) for row in body]


def figures(text: str) -> list[list[str]]:
    """The rows of payments in the text, all streams."""
    blocks = text.split("Stream '")[1:]
    return [line.split() for block in blocks for line in block.split("\n")[2:] if re.match(r" +\d+ +\d{4}-", line)]


def test_sheets_with_frozen_heads_and_widths(book: Any) -> None:
    assert book.sheetnames == SHEETS
    assert {sheet.title: sheet.freeze_panes for sheet in book} == dict.fromkeys(SHEETS, "A3") | {
        "Steps": "C3",
        "Payments": "B3",
    }
    for sheet in book:
        for column in range(1, sheet.max_column + 1):
            assert sheet.column_dimensions[openpyxl.utils.get_column_letter(column)].customWidth or column > 1


def test_the_reserve_is_that_of_the_text(book: Any) -> None:
    value = work_out(*parts()).value
    found = {row["stream"]: row["value"] for row in rows(book["Reserve"])}
    assert found["= reserve, not rounded"] == pytest.approx(value.reserve, rel=1e-14)
    assert f"reserve  {found['reserve, rounded half to even']:,.2f}\n" == working(*parts()).splitlines(True)[-1]
    streams = {row["stream"]: row for row in rows(book["Reserve"])[:6]}
    assert list(streams) == ["premium", "death", "leaving", "maturity", "commission", "keeping"]
    added = sum(row["value"] * (-1 if row["part"] == "premiums" else 1) for row in streams.values())
    assert added == pytest.approx(value.reserve, rel=1e-12)
    assert book["Reserve"]["F3"].number_format == "#,##0.000000"


def test_payments_are_those_of_the_text(book: Any) -> None:
    given = rows(book["Payments"])
    shown = figures(working(*parts()))
    assert list(given[0]) == [*PAYMENT_COLUMNS, "age", "q"]
    assert len(given) == len(shown) > 400
    for row, text in zip(given, shown, strict=True):
        assert isinstance(row["date"], datetime)
        printed = [
            f"{row['point']}", f"{row['date']:%Y-%m-%d}", f"{row['age']:.3f}", f"{row['q']:.7f}",
            f"{row['survival']:.9f}", f"{row['persistency']:.9f}", f"{row['t']:.6f}", f"{row['discount']:.9f}",
            f"{row['relative']:.6f}", f"{row['payment']:,.4f}", f"{row['expected']:,.6f}", f"{row['value']:,.6f}",
        ]  # fmt: skip
        assert printed == text
        assert row["probability"] == pytest.approx(row["survival"] * row["persistency"])
        assert row["expected"] == pytest.approx(row["payment"] * row["probability"])
        assert row["value"] == pytest.approx(row["expected"] * row["discount"])


def test_payments_add_up_to_the_streams(book: Any) -> None:
    payments = rows(book["Payments"])
    for row in rows(book["Reserve"])[:6]:
        own = [payment for payment in payments if payment["stream"] == row["stream"]]
        assert row["payments"] == len(own)
        assert row["value"] == pytest.approx(sum(payment["value"] for payment in own))
        assert row["expected, not discounted"] == pytest.approx(sum(payment["expected"] for payment in own))


def test_steps_hold_what_the_payments_use(book: Any) -> None:
    steps = {row["point"]: row for row in rows(book["Steps"])}
    assert list(steps[129]) == [*STEP_COLUMNS, *OF_A_LIFE]
    assert list(steps) == list(range(129, 241))
    for payment in rows(book["Payments"]):
        step = steps[payment["point"]]
        assert (payment["date"], payment["age"]) == (step["date"], step["age"])
        assert payment["discount"] == pytest.approx(step["discount"], rel=1e-13)
        used = {"death": step["deaths"], "leaving": step["survival"]}.get(payment["stream"], step["survival"])
        assert payment["survival"] == pytest.approx(used, rel=1e-9)
        if payment["stream"] == "leaving":
            assert payment["persistency"] == pytest.approx(step["lapses"], rel=1e-9, abs=1e-15)
        if payment["stream"] == "premium":
            assert payment["persistency"] == pytest.approx(step["persistency"], rel=1e-13)
    assert 1 - steps[240]["survival"] == pytest.approx(sum(step["deaths"] for step in steps.values()))


def test_rates_rules_and_the_policy(book: Any) -> None:
    value = work_out(*parts()).value
    rates = rows(book["Mortality rates"])
    assert list(rates[0].values())[1:] == pytest.approx([10, float(value.age) + 10, value.life.yearly[10]])
    assert [row["year"] for row in rates] == list(range(10, len(value.life.yearly)))
    assert rows(book["Lapse rates"]) == [{"policy year": year, "w": 0.05} for year in range(11, 16)]
    rules = {(row["part"], row["rule"], row["key"]): row["value"] for row in rows(book["Rules"])}
    assert rules["mortality", 1, "multiple"] == 0.9
    assert rules["mortality", 1, "table"].startswith("law = Makeham; A = 0.00022; B = 2.7e-06; c = 1.124; ")
    assert rules["lapse", 1, "until, in months"] == 180
    assert rules["interest", 1, "forward"] == "0.03, 0.02"
    assert rules["expense 'keeping'", 1, "first year"] == 90
    policy = {row["what"]: row["value"] for row in rows(book["Policy"])}
    assert policy["birth_date"] == datetime(1976, 2, 10)
    assert policy["sum_assured"] == 25_000
    assert policy["flag"] == "true"
    assert policy["months since commencement"] == pytest.approx(128 + 20 / 30)
    assert "unused" not in policy
    conventions = {row["matter"]: row["rule"] for row in rows(book["Conventions"])}
    assert conventions["valuation date"].startswith("2026-11-30, end of day")
    assert any("not an actuarial opinion" in row["caution"] for row in rows(book["Cautions"]))
    symbols = {row["symbol"] for row in rows(book["Symbols"])}
    assert {*STEP_COLUMNS, *OF_A_LIFE} | {"probability", "relative", "payment", "expected", "value"} <= symbols


WICKED = ("=1+1", "@SUM(A1)", "<r><t>x</t></r>", "<r>&</r>", "https://example.invalid", "\x1b[31mred", "a\ufffeb", "-7")


@pytest.mark.parametrize("wicked", WICKED)
def test_text_stays_text(wicked: str) -> None:
    streams = [{**STREAMS[1], "name": wicked}]
    columns = {"policy_id": wicked, "remark": wicked}
    content = working_bytes(work_out(*parts(pier(*streams, title=wicked), **columns)), wicked[:12])
    book = book_of(content)
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]
    assert {"n", "s", "d"} >= {cell.data_type for cell in cells}
    assert not any(cell.hyperlink for cell in cells)
    with zipfile.ZipFile(io.BytesIO(content)) as files:
        assert not any(b"<f>" in files.read(name) for name in files.namelist())
    if wicked.isprintable():
        policy = {row["what"]: row["value"] for row in rows(book["Policy"])}
        assert policy["policy_id"] == policy["remark"] == wicked
        assert rows(book["Payments"])[0]["stream"] == wicked


def test_dates_that_a_workbook_does_not_know_are_text() -> None:
    design = pier({"name": "annuity", "direction": "out", "amount": 10.0, "while": "alive", "to": 99})
    found = made(design, Settings(date(1935, 1, 1)), birth_date=date(1895, 1, 1), commencement_date=date(1900, 3, 1))
    policy = {row["what"]: row["value"] for row in rows(found["Policy"])}
    assert policy["birth_date"] == "1895-01-01"
    assert policy["commencement_date"] == datetime(1900, 3, 1)


def test_nothing_left_to_pay() -> None:
    design = pier({"name": "maturity", "direction": "out", "amount": 5.0, "while": "alive", "from": 1, "paid": "once"})
    found = made(design, Settings(date(2017, 3, 10)), {**BASIS, "expense": []})
    sums = {row["stream"]: row["value"] for row in rows(found["Reserve"])}
    assert "No payment is still to come." in sums
    assert sums["reserve, rounded half to even"] == 0
    assert rows(found["Payments"]) == rows(found["Steps"]) == []


def test_payments_for_certain_outlast_a_table(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("age,rate\n" + "\n".join(f"{age},0.01" for age in range(30, 60)))
    basis = prepare_basis({**BASIS, "mortality": {"age": "last birthday", "rule": [{"table": "t.csv"}]}}, tmp_path)
    certain = {"name": "instalment", "direction": "out", "amount": 12.0, "while": "certain", "to": 30, "a_year": 12}
    policy, design, _, settings = parts(pier(certain))
    found = book_of(working_bytes(work_out(policy, design, prepare_basis({**BASIS, "expense": []}), settings)))
    assert rows(found["Steps"])[-1]["survival"] > 0
    found = book_of(working_bytes(work_out(policy, design, basis.__class__(**{
        **vars(basis), "expense_prices": (),
        "document": basis.document.model_copy(update={"expense": []})}), settings)))  # fmt: skip
    last = rows(found["Steps"])[-1]
    assert (last["point"], last["survival"], last["deaths"]) == (359, None, None)
    assert last["discount"] == pytest.approx(rows(found["Payments"])[-1]["discount"])


def test_decimals_of_the_currency() -> None:
    found = made(None, Settings(date(2026, 11, 30), decimals=0))
    last = [row for row in rows(found["Reserve"]) if row["stream"] == "reserve, rounded half to even"]
    assert last[0]["value"] == int(last[0]["value"])


def test_the_command_writes_it(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    import pyarrow.parquet as pq

    run = str(office / "month-end.toml")
    ids = pq.read_table(office / "inforce", columns=["policy_id"])["policy_id"].to_pylist()
    wrong = {near for row in fault_rows(len(ids)) for near in (row - 1, row)}
    policy = next(name for row, name in enumerate(ids) if row not in wrong)
    for name in ("working.xlsx", "WORKING.XLSX"):
        assert run_command(["explain", run, policy, "--out", str(tmp_path / name)]) == 0
        assert f"The working of {policy} is in" in capsys.readouterr().out
        assert book_of((tmp_path / name).read_bytes()).sheetnames == SHEETS
    assert run_command(["explain", run, policy]) == 0
    reserve = float(capsys.readouterr().out.split()[-1].replace(",", ""))
    found = {row["stream"]: row["value"] for row in rows(book_of((tmp_path / "working.xlsx").read_bytes())["Reserve"])}
    assert found["reserve, rounded half to even"] == reserve
    # Text under any other name, and no file of a kind that only looks like the right one.
    assert run_command(["explain", run, policy, "--out", str(tmp_path / "working.md")]) == 0
    assert (tmp_path / "working.md").read_text().startswith(f"Working of policy {policy}")
    assert run_command(["explain", run, policy, "--out", str(tmp_path / "working.ods")]) == 2
    assert "workbooks are written as .xlsx only" in capsys.readouterr().err
    assert run_command(["explain", run, ids[fault_rows(len(ids))[0]], "--out", str(tmp_path / "none.xlsx")]) == 2
    assert "is not valued" in capsys.readouterr().err
    assert sorted(path.name for path in tmp_path.iterdir()) == ["WORKING.XLSX", "working.md", "working.xlsx"]


def test_a_contract_on_two_lives() -> None:
    """Each life has columns of its own; from both, the probabilities of the payments follow."""
    streams = [
        {"name": "joint", "direction": "out", "amount": 10.0, "while": "both", "to": 20},
        {"name": "last", "direction": "out", "amount": 5.0, "while": "either", "to": 20},
    ]
    design = Design.model_validate({"code": "PIER", "states": "two lives", "stream": streams})
    second = {"second_birth_date": date(1980, 7, 1), "second_sex": "M"}
    found = made(design, None, None, lives="both", **second)
    steps = {row["point"]: row for row in rows(found["Steps"])}
    assert list(steps[132])[-8:] == [f"{name} of {life}" for life in ("first", "second") for name in OF_A_LIFE]
    payments = rows(found["Payments"])
    for payment in payments:
        step = steps[payment["point"]]
        first, second_ = step["survival of first"], step["survival of second"]
        wanted = first * second_ if payment["stream"] == "joint" else first + second_ - first * second_
        if payment["stream"] in ("joint", "last"):
            assert payment["survival"] == pytest.approx(wanted)
        assert payment["q of second"] == pytest.approx(step["q of second"])
    parts_of = {row["part"] for row in rows(found["Rules"])}
    assert {"mortality of the first life", "mortality of the second life"} <= parts_of
    assert {row["life"] for row in rows(found["Mortality rates"])} == {"first", "second"}
    alone = made(design, None, None, lives="second", **second)
    assert list(rows(alone["Steps"])[0])[-4:] == [f"{name} of second" for name in OF_A_LIFE]
    assert rows(alone["Steps"])[0]["age of second"] < rows(found["Steps"])[0]["age of first"]
