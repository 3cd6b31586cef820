"""Disks that are full or can only be read: a plain error, an exit code, and no leftovers."""

from __future__ import annotations

import contextlib
import os
import resource
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest
from fault_office import Office, ended, names, spawn


@contextlib.contextmanager
def small_disk(place: Path, options: str) -> Iterator[Path]:
    """Mount a disk in memory, or skip the test where that is not allowed."""
    place.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", options, "tmpfs", str(place)], capture_output=True, text=True, check=False
    ) if os.path.exists("/bin/mount") else None  # fmt: skip
    if mounted is None or mounted.returncode != 0:
        pytest.skip("a disk can be mounted by the superuser only")
    try:
        yield place
    finally:
        subprocess.run(["umount", str(place)], check=True)


def small_files() -> None:
    """Let this process write no file above 10,000 bytes."""
    resource.setrlimit(resource.RLIMIT_FSIZE, (10_000, 10_000))


def test_reserve_on_a_full_disk(office: Office, tmp_path: Path) -> None:
    with small_disk(tmp_path / "disk", "size=40k") as disk:
        said = office.command("reserve", str(office.run), "--out", str(disk / "november"))
        assert said.code == 2
        assert said.err.strip() == f"{disk / 'november'}: cannot be written: the disk is full; nothing was left behind"
        assert names(disk) == []


def test_demo_on_a_full_disk(office: Office, tmp_path: Path) -> None:
    with small_disk(tmp_path / "disk", "size=200k") as disk:
        said = office.command("demo", str(disk / "demo"), "--policies", "20000")
        assert said.code == 2
        assert said.err.strip() == f"{disk / 'demo'}: cannot be written: the disk is full; nothing was left behind"
        assert names(disk) == []


@pytest.mark.parametrize("command", ["reserve", "demo"])
def test_a_disk_that_can_only_be_read(office: Office, tmp_path: Path, command: str) -> None:
    with small_disk(tmp_path / "disk", "ro") as disk:
        target = disk / "november"
        given = [str(office.run), "--out", str(target)] if command == "reserve" else [str(target)]
        said = office.command(command, *given)
        assert said.code == 2
        assert said.err.strip() == f"{target}: cannot be written: the disk can only be read; nothing was left behind"


@pytest.mark.skipif(os.name == "nt", reason="limits of a process are a Unix matter")
@pytest.mark.parametrize("command", ["reserve", "demo"])
def test_a_limit_on_the_size_of_files(office: Office, tmp_path: Path, command: str) -> None:
    target = tmp_path / "new" / "november"
    given = [str(office.run), "--out", str(target)] if command == "reserve" else [str(target)]
    said = ended(spawn(command, *given, limits=small_files))
    assert said.code == 2, said
    assert said.err.strip().splitlines()[-1] == (
        f"{target}: cannot be written: a file would become larger than is allowed here; nothing was left behind"
    )
    assert "Traceback" not in said.err
    assert not target.parent.exists()


def test_a_working_that_cannot_be_written(office: Office) -> None:
    policy = str(office.extract().column("policy_id")[20])
    said = office.command("explain", str(office.run), policy, "--out", str(office.folder / "nowhere" / "w.txt"))
    assert said.code == 2
    assert "w.txt: cannot be written: No such file or directory" in said.err


@pytest.mark.parametrize("name", ["working.txt", "working.xlsx"])
def test_a_working_on_a_full_disk(office: Office, tmp_path: Path, name: str) -> None:
    policy = str(office.extract().column("policy_id")[20])
    with small_disk(tmp_path / "disk", "size=8k") as disk:
        said = office.command("explain", str(office.run), policy, "--out", str(disk / name))
        assert said.code == 2
        assert said.err.strip() == f"{disk / name}: cannot be written: the disk is full; nothing was left behind"
        assert names(disk) == []


def test_what_a_killed_working_left_goes_with_the_next(office: Office, tmp_path: Path) -> None:
    policy = str(office.extract().column("policy_id")[20])
    left = tmp_path / ".working.xlsx.unfinished-0123abcd"
    left.mkdir()
    (left / "working.xlsx").write_bytes(b"half")
    assert office.command("explain", str(office.run), policy, "--out", str(tmp_path / "working.xlsx")).code == 0
    assert [name for name in names(tmp_path) if "working" in name] == ["working.xlsx"]
