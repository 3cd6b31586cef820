"""Why the plain twin does not value a policy."""

from __future__ import annotations

from typing import Any


class NotValued(ValueError):  # noqa: N818  (a verdict on a policy, not a fault of the program)
    """A policy that cannot be valued: the reason, the field, its value and the rule that it breaks."""

    def __init__(self, reason: str, field: str, value: Any, rule: str) -> None:
        super().__init__(f"{reason}: {field} = {value}; {rule}")
        self.reason = reason
        self.field = field
        self.value = value
        self.rule = rule
