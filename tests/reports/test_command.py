from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

import reports.command
import reports.reserve_run
import reports.verify
from projection.gate import RunStopped
from reports.command import MOST_FAULTS, main, run_command
from reports.installation import PACKAGES, strangers

ROOT = Path(__file__).resolve().parents[2]
COMMANDS = ("demo", "check", "reserve", "premium", "explain", "alter", "verify")
HEAVY = ("pyarrow", "numba", "pandas", "numpy", "jinja2", "xlsxwriter", "pydantic", "rich")


def test_help_imports_nothing_heavy() -> None:
    code = f"""
import sys
sys.path[:0] = [{str(ROOT)!r}]
from reports.command import run_command
assert run_command(["reserve", "--help"]) == 0
from reports.installation import strangers
assert strangers() == []
print([name for name in {HEAVY!r} if name in sys.modules])
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


@pytest.mark.parametrize("command", COMMANDS)
def test_help_shows_an_example(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command([command, "--help"]) == 0
    text = capsys.readouterr().out
    assert "Example:" in text
    assert f"duecourse {command} " in text


def test_help_lists_every_command(capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["--help"]) == 0
    text = capsys.readouterr().out
    assert all(f"\n  {command} " in text for command in COMMANDS)


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["reserve", "nowhere.toml", "--out", "x"], "nowhere.toml: there is no such file"),
        (["check", "nowhere.toml"], "nowhere.toml: there is no such file"),
        (["verify", "nowhere"], "not a finished run folder"),
        (["reserve", "nowhere.toml"], "Missing option '--out'"),
        (["nonsense"], "No such command"),
        (["reserve", "nowhere.toml", "--out", "x", "--threads", "0"], "--threads"),
    ],
)
def test_wrong_input_is_said_plainly(
    arguments: list[str],
    said: str,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    assert run_command(arguments) == 2
    shown = capsys.readouterr()
    assert said in shown.err
    assert "Traceback" not in shown.err
    assert list(tmp_path.iterdir()) == []


def test_unknown_keys_and_missing_columns(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = (office / "month-end.toml").read_text()
    for part in ("inforce", "designs", "bases/statutory.toml"):
        text = text.replace(f'"{part}"', f'"{(office / part).as_posix()}"')
    (tmp_path / "key.toml").write_text(text.replace("group_by", "group_bye"))
    (tmp_path / "column.toml").write_text(text.replace('"sex"', '"sax"'))
    assert run_command(["reserve", str(tmp_path / "key.toml"), "--out", str(tmp_path / "out")]) == 2
    assert "did you mean 'group_by'?" in capsys.readouterr().err
    assert run_command(["reserve", str(tmp_path / "column.toml"), "--out", str(tmp_path / "out")]) == 2
    assert "did you mean 'sex'?" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize("name", ["policies", "reserve", "value_of_premiums", "rounding"])
def test_a_group_must_not_bear_the_name_of_a_result(
    name: str, office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Its column would take the place of the result's, and the totals would be wrong."""
    text = (office / "month-end.toml").read_text().replace('["product", "sex"]', f'["product", "{name}"]')
    for part in ("inforce", "designs", "bases/statutory.toml"):
        text = text.replace(f'"{part}"', f'"{(office / part).as_posix()}"')
    run = tmp_path / "groups.toml"
    run.write_text(text)
    assert run_command(["reserve", str(run), "--out", str(tmp_path / "out")]) == 2
    said = capsys.readouterr().err
    assert said.startswith(f"{run}: key 'group_by': '{name}' is the name of a column of the results; give ")
    assert run_command(["check", str(run)]) == 2
    assert not (tmp_path / "out").exists()


def test_verify_does_not_list_without_end(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    many = reports.verify.Verified(faults=[f"fault {number}" for number in range(1000)])
    monkeypatch.setattr(reports.verify, "verify", lambda *given: many)
    assert run_command(["verify", "anywhere"]) == 1
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) == MOST_FAULTS + 2
    assert lines[-2:] == ["WRONG  and 960 more of the kind", "anywhere: NOT as recorded."]


def test_a_policy_without_a_value_gives_its_reason_in_words(
    office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    import pyarrow.parquet as pq

    run, out = str(office / "month-end.toml"), tmp_path / "out"
    assert run_command(["reserve", run, "--out", str(out), "--no-workbook"]) == 0
    rows = pq.read_table(out / "exceptions.parquet").to_pylist()
    matured = next(row["policy_id"] for row in rows if row["reason"] == "matured")
    assert run_command(["explain", run, matured]) == 2
    assert capsys.readouterr().err.startswith(
        f"policy '{matured}' is not valued: matured: product LARBOARD; something is to come after"
    )


def test_a_whole_month_end(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    run, out = str(office / "month-end.toml"), str(tmp_path / "november")
    assert run_command(["check", run]) == 0
    assert "The run can go ahead." in capsys.readouterr().out
    assert run_command(["reserve", run, "--out", out, "--threads", "1", "--no-workbook"]) == 0
    assert "closes" in capsys.readouterr().out
    assert sorted(path.name for path in Path(out).iterdir()) == [
        "cash_flows.parquet",
        "exceptions.parquet",
        "policies",
        "report.html",
        "run.json",
        "totals.parquet",
    ]
    assert run_command(["reserve", run, "--out", out]) == 2
    assert "--replace" in capsys.readouterr().err
    assert run_command(["verify", out]) == 0
    assert "as recorded" in capsys.readouterr().out
    first = json.loads((tmp_path / "november" / "run.json").read_text())
    assert run_command(["reserve", run, "--out", out, "--replace", "--threads", "2"]) == 0
    second = json.loads((tmp_path / "november" / "run.json").read_text())
    seals = [{item["path"]: item["sha256"] for item in record["outputs"]} for record in (first, second)]
    parts = [name for name in seals[0] if name.endswith(".parquet")]
    assert [seals[0][name] for name in parts] == [seals[1][name] for name in parts]
    assert first["totals"] == second["totals"]
    (tmp_path / "november" / "report.html").write_text("changed")
    assert run_command(["verify", out]) == 1
    assert "WRONG  report.html" in capsys.readouterr().out


def test_too_many_exceptions_fail_the_run(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = (office / "month-end.toml").read_text()
    for part in ("inforce", "designs", "bases/statutory.toml"):
        text = text.replace(f'"{part}"', f'"{(office / part).as_posix()}"')
    strict = tmp_path / "strict.toml"
    strict.write_text(
        "\n".join("exceptions_limit = 0.0" if "exceptions_limit" in line else line for line in text.splitlines())
    )
    assert run_command(["reserve", str(strict), "--out", str(tmp_path / "out")]) == 1
    assert "exception" in capsys.readouterr().err
    assert [path.name for path in tmp_path.iterdir()] == ["strict.toml"]
    assert run_command(["check", str(strict)]) == 2
    shown = capsys.readouterr().out
    assert "The run would stop." in shown
    assert "identifier not unique" in shown


@pytest.mark.parametrize(
    ("error", "code"), [(RunStopped("stopped"), 1), (KeyboardInterrupt(), 130), (OSError(28, "disk full"), 2)]
)
def test_a_run_that_ends_early_leaves_nothing(
    error: BaseException, code: int, office: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def stop(*given: Any, **asked: Any) -> None:
        raise error

    monkeypatch.setattr(reports.reserve_run, "value_extract", stop)
    assert run_command(["reserve", str(office / "month-end.toml"), "--out", str(tmp_path / "out")]) == code
    assert list(tmp_path.iterdir()) == []


def test_a_fault_of_the_program_is_not_hidden(office: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def stumble(*given: Any, **asked: Any) -> None:
        raise ValueError("operands could not be broadcast together")

    monkeypatch.setattr(reports.reserve_run, "value_extract", stumble)
    with pytest.raises(ValueError, match="broadcast"):
        run_command(["reserve", str(office / "month-end.toml"), "--out", str(tmp_path / "out")])
    assert list(tmp_path.iterdir()) == []


def test_explain(office: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    import pyarrow.parquet as pq

    run = str(office / "month-end.toml")
    ids = pq.read_table(office / "inforce", columns=["policy_id"])["policy_id"].to_pylist()
    twice = next(policy for policy in ids if ids.count(policy) > 1)
    assert run_command(["explain", run, ids[100]]) == 0
    assert ids[100] in capsys.readouterr().out
    assert run_command(["explain", run, ids[100], "--out", str(tmp_path / "working.txt")]) == 0
    assert (tmp_path / "working.txt").read_text().strip().splitlines()[-1].startswith("reserve")
    assert run_command(["explain", run, "=1+1"]) == 2
    assert run_command(["explain", run, twice]) == 2
    shown = capsys.readouterr().err
    assert "'=1+1' is not in the extract" in shown
    assert "holds it 2 times" in shown


def test_demo_writes_an_office_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["demo", str(tmp_path / "office"), "--policies", "50"]) == 0
    assert "month-end.toml" in capsys.readouterr().out
    assert run_command(["demo", str(tmp_path / "office")]) == 2
    assert "not empty" in capsys.readouterr().err


def test_a_users_own_module_in_the_way_is_named(tmp_path: Path) -> None:
    (tmp_path / "portfolios.py").write_text("print('mine')\n")
    places = [str(tmp_path), str(ROOT)]
    code = f"import sys; sys.path[:0] = {places!r}; from reports.command import main; main()"
    done = subprocess.run([sys.executable, "-c", code, "--help"], capture_output=True, text=True, check=False)
    assert done.returncode == 2
    assert f"Python finds '{tmp_path / 'portfolios.py'}'" in done.stderr
    assert "mine" not in done.stdout


def test_the_installation_is_in_order(tmp_path: Path) -> None:
    assert strangers() == []
    assert len(strangers(tmp_path)) == len(PACKAGES)


def test_main_leaves_with_the_exit_code(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("signal.signal", lambda *given: None)
    # The tests go on to use it in this process.
    monkeypatch.setattr(reports.command, "without_pandas", lambda: None)
    monkeypatch.setattr(sys, "argv", ["duecourse", "verify", "nowhere"])
    with pytest.raises(SystemExit) as left:
        main()
    assert left.value.code == 2


def test_a_run_by_the_command_does_not_load_pandas(office: Path, tmp_path: Path) -> None:
    code = f"""
import atexit, sys
atexit.register(lambda: print("pandas:", "pandas" in sys.modules))
sys.path[:0] = [{str(ROOT)!r}]
sys.argv = ["duecourse", "reserve", {str(office / "month-end.toml")!r}, "--out", {str(tmp_path / "out")!r}]
from reports.command import main
main()
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[-1] == "pandas: False"
    assert (tmp_path / "out" / "report.xlsx").is_file()


def test_version(capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["--version"]) == 0
    assert capsys.readouterr().out.startswith("duecourse ")
