"""Settings of the whole suite: the same random examples every time where a machine runs it, new ones for people."""

from __future__ import annotations

import os

from hypothesis import Phase, settings

# A machine only says that something fails; making the example small is for people.
settings.register_profile("machine", derandomize=True, deadline=None, phases=[Phase.explicit, Phase.generate])
if os.environ.get("CI"):
    settings.load_profile("machine")
