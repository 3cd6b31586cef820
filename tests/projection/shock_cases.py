"""What the tests of shocks share: an invented basis, and shocks made short."""

from __future__ import annotations

from datetime import date
from typing import Any

from assumptions.basis import Basis, prepare_basis
from assumptions.shocking import shocked
from assumptions.shocks import Shock

TODAY = date(2026, 11, 30)


def document(**parts: Any) -> dict[str, Any]:
    """The document of a basis with all parts; ``parts`` replace them."""
    law = {"law": "Makeham", "A": 0.00022, "B": 2.7e-6, "c": 1.124}
    held: dict[str, Any] = {
        "mortality": {"age": "last birthday", "rule": [{"table": law}]},
        "lapse": {"rule": [{"rates": [0.10, 0.05, 0.02]}]},
        "interest": {"rule": [{"flat": 0.04}]},
        "expense": [
            {
                "name": "upkeep",
                "per": "policy",
                "inflation": {"rate": 0.02, "from": date(2026, 1, 1)},
                "rule": [{"first_year": 100.0, "later_years": 30.0}],
            },
            {"name": "collection", "per": "premium", "rule": [{"first_year": 0.02, "later_years": 0.02}]},
        ],
    }
    return {**held, **parts}


def basis(**parts: Any) -> Basis:
    return prepare_basis(document(**parts))


def shock(*changes: dict[str, Any], **keys: Any) -> Shock:
    return Shock.model_validate({"change": list(changes), **keys})


def after(held: Basis, *changes: dict[str, Any]) -> Basis:
    """The basis after changes on the valuation date of the tests."""
    return shocked(held, shock(*changes), TODAY)
