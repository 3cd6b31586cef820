"""Projection: curves, the compiled loops, and the questions that they answer.

For a notebook:

    from projection import value
    result = value(policies, "designs", "bases/statutory.toml", "2026-11-30")
    result.policies.to_pandas()
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .documents import DocumentError, read_basis, read_designs, read_run, read_shock, read_shocks
    from .gate import RunStopped
    from .notebook import Valuation, value
    from .plain import plain_value
    from .sensitivity import Sensitivity, value_shocks
    from .settings import Settings
    from .valuation import value_extract
    from .working import working

_HOMES = {
    "DocumentError": "documents",
    "RunStopped": "gate",
    "Sensitivity": "sensitivity",
    "Settings": "settings",
    "Valuation": "notebook",
    "plain_value": "plain",
    "read_basis": "documents",
    "read_designs": "documents",
    "read_run": "documents",
    "read_shock": "documents",
    "read_shocks": "documents",
    "value": "notebook",
    "value_extract": "valuation",
    "value_shocks": "sensitivity",
    "working": "working",
}

__all__ = [
    "DocumentError",
    "RunStopped",
    "Sensitivity",
    "Settings",
    "Valuation",
    "plain_value",
    "read_basis",
    "read_designs",
    "read_run",
    "read_shock",
    "read_shocks",
    "value",
    "value_extract",
    "value_shocks",
    "working",
]


def __getattr__(name: str) -> Any:
    # Nothing compiled is loaded before it is asked for: commands that do not project stay quick.
    if name not in _HOMES:
        raise AttributeError(f"module 'projection' has no attribute '{name}'")
    from importlib import import_module

    return getattr(import_module(f".{_HOMES[name]}", __name__), name)
