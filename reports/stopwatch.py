"""Seconds by phase."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager


class Stopwatch:
    """Takes the time of the phases of a run, in the order that they come."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}
        self._start = time.perf_counter()

    @contextmanager
    def phase(self, name: str) -> Iterator[None]:
        """Take the time of the body; phases of one name add up."""
        start = time.perf_counter()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - start

    @property
    def total(self) -> float:
        """Seconds since the stopwatch was started."""
        return time.perf_counter() - self._start
