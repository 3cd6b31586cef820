"""The command killed at random moments: nothing half-written looks finished, and the next run cleans up."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import time
from pathlib import Path

import pytest
from fault_office import Office, Said, ended, names, spawn

pytestmark = pytest.mark.skipif(os.name == "nt", reason="signals and folder locks are a Unix matter")

SEED = 20261130
POLICIES_OF_DEMO = 200_000


def unfinished(folder: Path) -> list[str]:
    return [name for name in names(folder) if name.startswith(".") and ".unfinished-" in name]


def started(process: subprocess.Popen[str], folder: Path, before: list[str]) -> None:
    """Wait until the command has begun to write."""
    while unfinished(folder) == before:
        assert process.poll() is None, process.communicate()
        time.sleep(0.002)


def hit(process: subprocess.Popen[str], folder: Path, after: float, number: signal.Signals) -> Said:
    """Send a signal so many seconds after the command began to write."""
    started(process, folder, unfinished(folder))
    time.sleep(after)
    process.send_signal(number)
    return ended(process)


def duration(process: subprocess.Popen[str], folder: Path) -> float:
    """Return for how many seconds a command writes if it is left alone."""
    started(process, folder, [])
    began = time.monotonic()
    said = ended(process)
    assert said.code == 0, said
    return time.monotonic() - began


def test_reserve_killed_at_any_moment(office: Office) -> None:
    place = office.out.parent
    asked = ["reserve", str(office.run), "--out", str(office.out), "--threads", "1"]
    whole = duration(spawn(*asked), place)
    moments = random.Random(SEED)
    finished = (office.out / "run.json").read_bytes()
    for round_ in range(4):
        # By turns where a finished run is to be replaced, and where there is none.
        if round_ == 2:
            office.out.rename(office.folder / "kept")
        replacing = ["--replace"] if round_ < 2 else []
        said = hit(spawn(*asked, *replacing), place, moments.uniform(0, whole), signal.SIGKILL)
        assert said.code in (0, -signal.SIGKILL), said
        visible = [name for name in names(place) if not name.startswith(".")]
        assert visible in ([], ["november"])
        if replacing and said.code != 0:
            # Between two renames the finished run may have been set aside; nothing else may happen to it.
            aside = [name for name in names(place) if ".replaced-" in name]
            kept = [place / name / "run.json" for name in (*visible, *aside)]
            assert kept
            assert all(office.command("verify", str(record.parent)).code == 0 for record in kept)
            assert finished in [record.read_bytes() for record in kept] or visible
        if visible:
            assert office.command("verify", str(office.out)).code == 0
            if not replacing:
                office.out.rename(office.folder / f"kept-{round_}")
    said = office.reserve("--replace")
    assert said.code == 0, said
    assert names(place) == ["november"]
    assert office.command("verify", str(office.out)).code == 0


def test_demo_killed_at_any_moment(office: Office, tmp_path: Path) -> None:
    place, target = tmp_path / "place", tmp_path / "place" / "demo"
    asked = ["demo", str(target), "--policies", str(POLICIES_OF_DEMO)]
    whole = duration(spawn(*asked), place)
    target.rename(tmp_path / "whole")
    sizes = {path.relative_to(tmp_path / "whole"): path.stat().st_size for path in (tmp_path / "whole").rglob("*.*")}
    moments = random.Random(SEED + 1)
    for round_ in range(3):
        said = hit(spawn(*asked), place, moments.uniform(0, whole), signal.SIGKILL)
        assert said.code in (0, -signal.SIGKILL), said
        # Leftovers of the round before are gone by now.
        assert len(unfinished(place)) <= 1
        if target.exists():
            assert {path.relative_to(target): path.stat().st_size for path in target.rglob("*.*")} == sizes
            target.rename(tmp_path / f"whole-{round_}")
    said = office.command("demo", str(target), "--policies", "50")
    assert said.code == 0, said
    assert names(place) == ["demo"]


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_an_interrupted_reserve_leaves_nothing(office: Office, number: signal.Signals) -> None:
    after = random.Random(SEED + int(number)).uniform(0, 0.4)
    process = spawn("reserve", str(office.run), "--out", str(office.out), "--threads", "2")
    said = hit(process, office.out.parent, after, number)
    assert (said.code, said.err.strip().splitlines()[-1:]) == (130, ["Interrupted; nothing was left behind."])
    assert "Traceback" not in said.err
    assert not office.out.parent.exists()


def test_an_interrupted_demo_leaves_nothing(tmp_path: Path) -> None:
    place = tmp_path / "a" / "b"
    said = hit(spawn("demo", str(place / "demo"), "--policies", "3000000"), place, 0.1, signal.SIGINT)
    assert (said.code, said.err.strip().splitlines()[-1:]) == (130, ["Interrupted; nothing was left behind."])
    assert names(tmp_path) == []


def test_a_living_demo_is_left_alone(office: Office, tmp_path: Path) -> None:
    place, target = tmp_path / "place", tmp_path / "place" / "demo"
    living = spawn("demo", str(target), "--policies", "3000000")
    started(living, place, [])
    assert office.command("demo", str(target), "--policies", "50").code == 0
    assert len(unfinished(place)) == 1
    living.send_signal(signal.SIGINT)
    assert ended(living).code == 130
    assert names(place) == ["demo"]
