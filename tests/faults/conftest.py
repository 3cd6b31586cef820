from __future__ import annotations

from pathlib import Path

import pytest
from fault_office import Office, copied

from portfolios.demo_office import write_office


@pytest.fixture(scope="session")
def pristine(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The demo office that nobody touches."""
    folder = tmp_path_factory.mktemp("pristine") / "office"
    write_office(folder, 300, 7)
    return folder


@pytest.fixture
def office(pristine: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Office:
    """A copy of the demo office to break."""
    return copied(pristine, tmp_path / "office", capsys)
