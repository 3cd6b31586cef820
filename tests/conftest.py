"""Settings of the whole suite: the same random examples every time where a machine runs it, new ones for people."""

from __future__ import annotations

import os

from hypothesis import settings

settings.register_profile("machine", derandomize=True, deadline=None)
if os.environ.get("CI"):
    settings.load_profile("machine")
