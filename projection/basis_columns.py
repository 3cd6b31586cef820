"""Columns of the extract that a basis looks at beside those of its rules."""

from __future__ import annotations

from assumptions.basis import Basis


def until_columns(basis: Basis) -> list[str]:
    """Return the columns that say when lapses stop."""
    rules = basis.document.lapse.rule if basis.document.lapse else []
    return [rule.until for rule in rules if isinstance(rule.until, str)]
