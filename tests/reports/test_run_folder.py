from __future__ import annotations

import os
import signal
import stat
import subprocess
import sys
import textwrap
import time
from pathlib import Path

import pytest

from reports.disk import RunFolderError, write_whole
from reports.run_folder import RECORD, RunFolder, clean_leftovers

ROOT = Path(__file__).resolve().parents[2]


def write_run(target: Path, text: str = "new", replace: bool = False) -> None:
    with RunFolder(target, replace) as folder:
        (folder.path / RECORD).write_text(text)
        folder.finish()


def names(folder: Path) -> list[str]:
    return sorted(entry.name for entry in folder.iterdir())


def test_finished_folder_has_its_name_and_nothing_else_stays(tmp_path: Path) -> None:
    write_run(tmp_path / "run")
    assert names(tmp_path) == ["run"]
    assert (tmp_path / "run" / RECORD).read_text() == "new"


def test_a_name_is_not_taken_before_the_end(tmp_path: Path) -> None:
    with RunFolder(tmp_path / "run") as folder:
        (folder.path / RECORD).write_text("half")
        assert not (tmp_path / "run").exists()
        assert folder.path.name.startswith(".run.unfinished-")
    assert names(tmp_path) == []


def test_an_error_leaves_nothing_not_even_the_folders_above(tmp_path: Path) -> None:
    folder = RunFolder(tmp_path / "a" / "b" / "run").__enter__()
    (folder.path / "file").write_text("x")
    folder.__exit__(ZeroDivisionError, ZeroDivisionError(), None)
    assert names(tmp_path) == []


def test_a_finished_run_is_not_overwritten(tmp_path: Path) -> None:
    write_run(tmp_path / "run", "old")
    with pytest.raises(RunFolderError, match=r"holds a finished run.*--replace"):
        write_run(tmp_path / "run")
    assert (tmp_path / "run" / RECORD).read_text() == "old"
    write_run(tmp_path / "run", "new", replace=True)
    assert (tmp_path / "run" / RECORD).read_text() == "new"
    assert names(tmp_path) == ["run"]


def test_a_run_finished_meanwhile_is_not_overwritten(tmp_path: Path) -> None:
    with RunFolder(tmp_path / "run") as slow:
        write_run(tmp_path / "run", "quicker")
        (slow.path / RECORD).write_text("slower")
        with pytest.raises(RunFolderError, match="holds a finished run"):
            slow.finish()
    assert (tmp_path / "run" / RECORD).read_text() == "quicker"
    assert names(tmp_path) == ["run"]


@pytest.mark.parametrize("replace", [False, True])
def test_what_is_not_a_run_is_never_replaced(tmp_path: Path, replace: bool) -> None:
    (tmp_path / "photos").mkdir()
    (tmp_path / "photos" / "cat.txt").write_text("dear")
    (tmp_path / "file").write_text("dear")
    with pytest.raises(RunFolderError, match="not a finished run"):
        write_run(tmp_path / "photos", replace=replace)
    with pytest.raises(RunFolderError, match="not a folder"):
        write_run(tmp_path / "file", replace=replace)
    assert names(tmp_path) == ["file", "photos"]
    assert (tmp_path / "photos" / "cat.txt").read_text() == "dear"


def test_an_empty_folder_may_be_used(tmp_path: Path) -> None:
    (tmp_path / "run").mkdir()
    write_run(tmp_path / "run")
    assert names(tmp_path) == ["run"]


def test_leftovers_go_but_a_living_run_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / ".run.unfinished-00000000").mkdir()
    (tmp_path / ".other.unfinished-00000000").mkdir()
    with RunFolder(tmp_path / "run") as living:
        write_run(tmp_path / "run2")
        assert clean_leftovers(tmp_path / "run") == []
        assert living.path.is_dir()
    assert names(tmp_path) == [".other.unfinished-00000000", "run2"]


def test_a_run_that_was_set_aside_comes_back(tmp_path: Path) -> None:
    write_run(tmp_path / "run", "old")
    (tmp_path / "run").rename(tmp_path / ".run.replaced-00000000")
    assert clean_leftovers(tmp_path / "run") == [".run.replaced-00000000"]
    assert (tmp_path / "run" / RECORD).read_text() == "old"


def test_names_with_pattern_letters(tmp_path: Path) -> None:
    (tmp_path / ".run[1].unfinished-00000000").mkdir()
    (tmp_path / ".run1.unfinished-00000000").mkdir()
    write_run(tmp_path / "run[1]")
    assert names(tmp_path) == [".run1.unfinished-00000000", "run[1]"]


KILLED = """
import sys, time
sys.path[:0] = [{root!r}]
from pathlib import Path
from reports.run_folder import RECORD, RunFolder
number = 0
while True:
    number += 1
    with RunFolder(Path({target!r}), replace=True) as folder:
        for part in range(5):
            (folder.path / f"part-{{part}}").write_text(str(number) * 2000)
        (folder.path / RECORD).write_text(str(number))
        folder.finish()
    print(number, flush=True)
"""


@pytest.mark.parametrize("after", [0.0, 0.003, 0.011, 0.023, 0.037, 0.058])
def test_killed_at_any_moment_nothing_half_written_looks_finished(tmp_path: Path, after: float) -> None:
    target = tmp_path / "run"
    code = KILLED.format(root=str(ROOT), target=str(target))
    child = subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, text=True)
    assert child.stdout is not None
    child.stdout.readline()
    time.sleep(after)
    child.send_signal(signal.SIGKILL)
    child.wait()
    child.stdout.close()
    clean_leftovers(target)
    assert names(tmp_path) == ["run"]
    number = (target / RECORD).read_text()
    assert names(target) == ["part-0", "part-1", "part-2", "part-3", "part-4", RECORD]
    assert all((target / f"part-{part}").read_text() == number * 2000 for part in range(5))


def run_python(code: str, **options: object) -> subprocess.CompletedProcess[str]:
    code = f"import sys; sys.path[:0] = [{str(ROOT)!r}]\n" + textwrap.dedent(code)
    return subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, **options)  # type: ignore[call-overload, no-any-return]


@pytest.mark.skipif(os.name == "nt", reason="limits of a process are a Unix matter")
def test_a_full_disk_gives_a_plain_error_and_leaves_nothing(tmp_path: Path) -> None:
    # A limit on the size of files stands in for a disk that is full.
    done = run_python(
        f"""
        import resource, signal
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (10_000, 10_000))
        sys.path[:0] = [{str(Path(__file__).parent)!r}]
        from pathlib import Path
        import reports_examples as examples
        from reports.disk import RunFolderError
        from reports.run_folder import RunFolder
        from reports.tables import PolicyWriter
        try:
            with RunFolder(Path({str(tmp_path / "run")!r})) as folder, PolicyWriter(folder.path) as writer:
                writer(examples.policies(50_000))
                writer.finish()
        except RunFolderError as error:
            print(error)
        """
    )
    assert "cannot be written" in done.stdout, done.stderr
    assert names(tmp_path) == []


@pytest.mark.skipif(os.name == "nt", reason="modes of folders are a Unix matter")
def test_a_read_only_place_gives_a_plain_error(tmp_path: Path) -> None:
    place = tmp_path / "place"
    place.mkdir()
    place.chmod(stat.S_IRUSR | stat.S_IXUSR | stat.S_IRGRP | stat.S_IXGRP | stat.S_IROTH | stat.S_IXOTH)
    # The superuser may write anywhere, so the target is tried without such rights.
    for folder in (tmp_path, *tmp_path.parents):
        if folder.stat().st_uid == os.getuid() and folder != Path("/"):
            folder.chmod(folder.stat().st_mode | stat.S_IXOTH)
    done = run_python(
        f"""
        import os
        from pathlib import Path
        from reports.disk import RunFolderError
        from reports.run_folder import RunFolder
        if os.getuid() == 0:
            os.setuid(65534)
        try:
            with RunFolder(Path({str(place / "run")!r})):
                pass
        except RunFolderError as error:
            print(error)
        """
    )
    assert "writing there is not allowed" in done.stdout, done.stderr
    assert names(place) == []


def test_text_files_are_whole_or_not_there(tmp_path: Path) -> None:
    write_whole(tmp_path / "working.txt", b"one")
    write_whole(tmp_path / "working.txt", b"two")
    with pytest.raises(RunFolderError, match="cannot be written"):
        write_whole(tmp_path / "nowhere" / "working.txt", b"three")
    assert names(tmp_path) == ["working.txt"]
    assert (tmp_path / "working.txt").read_text() == "two"
