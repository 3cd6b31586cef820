"""The working of one policy, found in the extract by its identifier."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from portfolios.extract import Extract
from projection.working import working

from .prepared import prepare


class ExplainError(ValueError):
    """A policy whose working cannot be shown."""


def explain(run: Path, policy_id: str) -> str:
    """Return the working of a policy as text.

    Raises DocumentError and ExtractError for wrong input, ExplainError if the policy is not in the extract,
    is there more than once, or is of a product without a design; and what ``working`` raises where it
    cannot be valued.
    """
    prepared = prepare(run)
    policy = find_policy(prepared.extract, policy_id)
    product = policy.get("product")
    design = next((design for design in prepared.designs if design.code == product), None)
    if design is None:
        raise ExplainError(f"policy '{policy_id}': no design has the code of its product, '{product}'")
    status = policy.get("status")
    if status not in prepared.document.in_force:
        raise ExplainError(
            f"policy '{policy_id}' is not valued: its status is '{status}', and the run values "
            + " and ".join(f"'{name}'" for name in prepared.document.in_force)
        )
    return working(policy, design, prepared.basis, prepared.document.settings)


def find_policy(extract: Extract, policy_id: str) -> dict[str, Any]:
    """Return the row of a policy as Python values. Raises ExplainError unless there is exactly one."""
    found = extract.find(policy_id)
    if not found:
        raise ExplainError(f"policy '{policy_id}' is not in the extract ({extract.rows:,} policies)")
    if len(found) > 1:
        raise ExplainError(f"policy '{policy_id}' is not valued: the extract holds it {len(found)} times")
    return found[0]
