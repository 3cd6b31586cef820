"""Names of the bases of a run, and of the columns of results that belong to each."""

from __future__ import annotations

import re

OWN = ""
"""Name of the run's own basis."""

_NAME = re.compile(r"[a-z][a-z0-9_]{0,30}")


def check_name(name: str) -> None:
    """Raise ValueError unless a name can stand in the name of a column."""
    if not _NAME.fullmatch(name):
        raise ValueError(
            f"the name '{name}' of a basis stands in names of columns, such as 'reserve_best_estimate'; it takes up "
            "to 31 small letters, digits and '_', and begins with a letter"
        )


def column_on(column: str, side: str) -> str:
    """Return the name that a column of results has for a basis; on the run's own one it stays as it is."""
    return f"{column}_{side}" if side else column
