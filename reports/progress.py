"""Progress of a run: a bar with policies a second on a terminal, a plain line now and then in a log."""

from __future__ import annotations

import sys
import time
from contextlib import AbstractContextManager
from datetime import UTC, datetime
from types import TracebackType
from typing import Any, TextIO

from .figures import count, seconds

SECONDS_BETWEEN_LINES = 10.0


class LogLines(AbstractContextManager["LogLines"]):
    """Progress where nobody watches: a line every ten seconds, nothing at all for a short run."""

    def __init__(self, what: str, stream: TextIO, every: float = SECONDS_BETWEEN_LINES) -> None:
        self._what = what
        self._stream = stream
        self._every = every
        self._start = self._last = time.monotonic()

    def __call__(self, done: int, total: int) -> None:
        """Take note of the policies done and the policies in all."""
        now = time.monotonic()
        if now - self._last < self._every:
            return
        self._last = now
        rate = done / (now - self._start)
        left = f", about {seconds((total - done) / rate)} left" if rate > 0 and total > done else ""
        moment = datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
        print(
            f"{moment}  {self._what}: {count(done)} of {count(total)} policies, {count(round(rate))} a second{left}",
            file=self._stream,
            flush=True,
        )

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Say nothing more."""


class Bar(AbstractContextManager["Bar"]):
    """Progress on a terminal, gone when done."""

    def __init__(self, what: str, stream: TextIO) -> None:
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

        columns: tuple[Any, ...] = (
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.fields[figures]}"),
            TimeRemainingColumn(compact=True),
        )
        self._bar = Progress(*columns, console=Console(file=stream), transient=True)
        self._task = self._bar.add_task(what, total=None, figures="")
        self._start = time.monotonic()

    def __enter__(self) -> Bar:
        self._bar.start()
        return self

    def __call__(self, done: int, total: int) -> None:
        """Take note of the policies done and the policies in all."""
        rate = done / max(time.monotonic() - self._start, 1e-9)
        figures = f"{count(done)} of {count(total)} policies, {count(round(rate))} a second"
        self._bar.update(self._task, completed=done, total=total, figures=figures)

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Take the bar away."""
        self._bar.stop()


def progress_on(what: str, stream: TextIO | None = None) -> LogLines | Bar:
    """Return the progress that suits the stream, by default stderr."""
    stream = stream or sys.stderr
    return Bar(what, stream) if stream.isatty() else LogLines(what, stream)
