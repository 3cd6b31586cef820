"""The working of one policy, found in the extract by its identifier."""

from __future__ import annotations

from pathlib import Path

from portfolios.checks import Checks, needed_columns
from portfolios.chunk import Chunk
from portfolios.exception_rows import exception_rows, sentence
from portfolios.extract import Extract
from portfolios.identifiers import Duplicates
from projection.plain_faults import NotValued
from projection.working import working

from .prepared import Prepared, prepare


class ExplainError(ValueError):
    """A policy whose working cannot be shown."""


def explain(run: Path, policy_id: str) -> str:
    """Return the working of a policy as text.

    Raises DocumentError and ExtractError for wrong input, and ExplainError if the policy is not in the
    extract, or the run would list it as an exception: what a run does not value has no working either.
    """
    prepared = prepare(run)
    needed = needed_columns(prepared.designs, prepared.basis.document.rule_columns())
    prepared.extract.need(needed)
    policy = find_policy(prepared.extract, policy_id)
    place = _checked(prepared, policy, needed, policy_id)
    try:
        return working(
            policy.policy(0), prepared.designs[place], prepared.basis, prepared.document.settings
        )
    except NotValued as error:
        raise ExplainError(f"policy '{policy_id}' is not valued: {error}") from error


def find_policy(extract: Extract, policy_id: str) -> Chunk:
    """Return the row of a policy as a chunk of its own. Raises ExplainError unless there is exactly one."""
    found = extract.find(policy_id)
    if not found:
        raise ExplainError(f"policy '{policy_id}' is not in the extract ({extract.rows:,} policies)")
    if len(found) > 1:
        raise ExplainError(f"policy '{policy_id}' is not valued: the extract holds it {len(found)} times")
    return found[0]


def _checked(prepared: Prepared, policy: Chunk, needed: tuple[str, ...], policy_id: str) -> int:
    """Return the position of the policy's design. Raises ExplainError where the checks of a run object."""
    document = prepared.document
    checks = Checks(prepared.designs, document.valuation_date, document.in_force, Duplicates(), needed)
    checked = checks.check(policy)
    if checked.reason[0]:
        (row,) = exception_rows(policy, checked, needed).to_pylist()
        raise ExplainError(f"policy '{policy_id}' is not valued: {row['reason']}: {sentence(row)}")
    return int(checked.product[0])
