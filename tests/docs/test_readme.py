"""What the README shows works as shown: the notebook example, the commands, and figures that agree with each other."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
import typer
from pages import ROOT, block, blocks, commands, inline_code, table_after, text

from portfolios.demo_office import write_office
from reports.command import app

PAGE = "README.md"
COMMANDS: dict[str, Any] = typer.main.get_command(app).commands  # type: ignore[attr-defined]


def run_example(folder: Path, monkeypatch: pytest.MonkeyPatch) -> dict[str, Any]:
    """Run the notebook example beside a folder ``demo`` and return its names."""
    names: dict[str, Any] = {}
    monkeypatch.chdir(folder)
    exec(compile(block(PAGE, "notebook example").content, "the README's notebook example", "exec"), names)
    return names


def shown_table() -> pd.DataFrame:
    """Return the output of the notebook example as printed in the README."""
    lines = block(PAGE, "notebook output").content.splitlines()
    rows = [line.split()[1:] for line in lines[1:]]
    return pd.DataFrame(rows, columns=lines[0].split())


def test_the_notebook_example_has_five_lines() -> None:
    lines = block(PAGE, "notebook example").content.splitlines()
    assert len([line for line in lines if line.strip()]) == 5


def test_the_notebook_example_runs_and_its_columns_hold(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    write_office(tmp_path / "demo", 200, 3)
    names = run_example(tmp_path, monkeypatch)
    assert capsys.readouterr().out.splitlines()[0].split() == list(shown_table().columns)
    rows = table_after(PAGE, "table")
    assert [name for name, _ in rows] == [
        f"`result.{part}`" for part in ("policies", "totals", "cash_flows", "exceptions")
    ]
    for name, columns in rows:
        table = getattr(names["result"], name.strip("`").removeprefix("result."))
        assert table.num_rows > 0
        assert table.column_names == re.findall(r"`(\w+)`", columns), name


@pytest.mark.slow
def test_the_notebook_output_is_that_of_the_demo(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write_office(tmp_path / "demo")
    totals = run_example(tmp_path, monkeypatch)["result"].totals.to_pandas()
    shown = shown_table()
    assert shown["product"].tolist() == totals["product"].tolist()
    for column in shown.columns[1:]:
        assert shown[column].astype(float).tolist() == totals[column].tolist(), column


def test_the_figures_agree_with_each_other() -> None:
    printed = next(one.content for one in blocks(PAGE) if "exceptions by reason" in one.content)
    total = next(line.split() for line in printed.splitlines() if line.startswith("total "))
    shown = shown_table()
    assert f"{shown['policies'].astype(int).sum():,}" == total[1]
    assert f"{sum(round(100 * float(value)) for value in shown['reserve']) / 100:,.2f}" == total[2]
    verified = next(one.content for one in blocks(PAGE) if "match the record" in one.content)
    assert f"reserve {total[2].replace(',', '')}." in verified
    checked = next(one.content for one in blocks(PAGE) if "would not be valued" in one.content)
    left_out = int(re.search(r"^(\d+) of 10,000 policies would not be valued", checked, re.M)[1])  # type: ignore[index]
    assert f"{10_000 - left_out:,}" == total[1]


def test_the_documents_shown_are_those_of_the_demo() -> None:
    office = ROOT / "portfolios" / "office"
    sources = [path.read_text(encoding="utf-8") for path in office.rglob("*.toml")]
    shown = [one.content for one in blocks(PAGE) if one.language == "toml"]
    assert len(shown) == 4
    for content in shown:
        assert any(all(piece.strip() in source for piece in content.split("\n\n")) for source in sources), content


def test_commands_are_quoted_at_all() -> None:
    assert {call[0] for call in commands(PAGE)} == set(COMMANDS)


@pytest.mark.parametrize("call", commands(PAGE), ids=" ".join)
def test_quoted_command_lines_parse(call: list[str]) -> None:
    name, *arguments = call
    COMMANDS[name].make_context(name, arguments)


def test_commands_named_in_the_text_exist() -> None:
    named = {code.split()[1] for code in inline_code(PAGE) if code.startswith("duecourse ")}
    assert named <= set(COMMANDS)


@pytest.mark.parametrize(("mark", "last"), [("run command", "duecourse reserve"), ("test command", "pytest")])
def test_each_of_the_two_commands_is_one_command(mark: str, last: str) -> None:
    lines = block(PAGE, mark).content.splitlines()
    assert lines[0].startswith("python3 -m venv ")
    assert all(line.endswith(" &&") for line in lines[:-1])
    assert last in lines[-1]
    subprocess.run(["sh", "-n"], input="\n".join(lines), text=True, check=True)


def test_the_second_command_is_found_by_the_checks() -> None:
    # As .ci/run cuts it out.
    after = text(PAGE).split("<!-- test command -->")[1].splitlines()
    start = next(place for place, line in enumerate(after) if line.startswith("python3"))
    end = after.index("```", start)
    assert "\n".join(after[start:end]) + "\n" == block(PAGE, "test command").content


def test_every_command_is_in_the_help() -> None:
    assert all(f"duecourse {name}" in text(PAGE) for name in COMMANDS)
