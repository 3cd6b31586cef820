"""The working of one policy, found in the extract by its identifier: as text or as a workbook."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from assumptions.basis import Basis
from portfolios.checks import Checks
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.exception_rows import exception_rows, sentence
from portfolios.extract import Extract
from portfolios.identifiers import Duplicates
from projection.basis_columns import needs_of
from projection.lives import ratings_used
from projection.plain_faults import NotValued
from projection.relative import check_indices
from projection.settings import Settings
from projection.working import working

from .prepared import Prepared, prepare

OTHER_WORKBOOKS = (".xls", ".xlsm", ".xlsb", ".ods")


class ExplainError(ValueError):
    """A policy whose working cannot be shown."""


@dataclass(frozen=True)
class Asked:
    """A policy that a run would value, and what it is to be valued by."""

    policy: dict[str, Any]
    design: Design
    prepared: Prepared
    basis: Basis

    @property
    def parts(self) -> tuple[dict[str, Any], Design, Basis, Settings]:
        """What a valuation by the plain implementation is asked."""
        return self.policy, self.design, self.basis, self.prepared.document.settings


def explain(run: Path, policy_id: str, basis: str = "") -> str:
    """Return the working of a policy as text, on the run's own basis or on one of the further ones.

    Raises DocumentError and ExtractError for wrong input, and ExplainError if the policy is not in the
    extract, or the run would list it as an exception: what a run does not value has no working either.
    """
    asked = look_up(run, policy_id, basis)
    with _said_plainly(policy_id):
        return working(*asked.parts)


def explain_in_workbook(run: Path, policy_id: str, basis: str = "") -> bytes:
    """Return the working of a policy as a workbook. Raises what ``explain`` does."""
    from .working_book import working_bytes
    from .working_facts import work_out

    asked = look_up(run, policy_id, basis)
    with _said_plainly(policy_id):
        return working_bytes(work_out(*asked.parts), asked.prepared.document.currency)


def as_workbook(out: Path) -> bool:
    """Say whether a file is to be a workbook, by its name. Raises ExplainError for other kinds of workbook."""
    if out.suffix.lower() in OTHER_WORKBOOKS:
        raise ExplainError(f"{out}: workbooks are written as .xlsx only; any other name than .xlsx gives text")
    return out.suffix.lower() == ".xlsx"


def look_up(run: Path, policy_id: str, basis: str = "") -> Asked:
    """Return a policy and what it is valued by. Raises what ``explain`` does."""
    prepared = prepare(run)
    known = {"": prepared.basis, **prepared.further}
    if basis not in known:
        choice = ", ".join(f"'{name}'" for name in prepared.further) or "none but its own"
        raise ExplainError(f"{run}: the run has no further basis '{basis}'; it has {choice}")
    check_indices(prepared.designs, known[basis])
    needed = needs_of(prepared.extract, prepared.designs, [known[basis]]).needed
    ratings = ratings_used(known[basis], prepared.designs, prepared.extract.column_names)
    policy = find_policy(prepared.extract, policy_id)
    place = _checked(prepared, policy, needed, ratings, policy_id)
    return Asked(policy.policy(0), prepared.designs[place], prepared, known[basis])


@contextlib.contextmanager
def _said_plainly(policy_id: str) -> Iterator[None]:
    try:
        yield
    except NotValued as error:
        found = error.field if error.value is None else f"{error.field} is '{error.value}'"
        raise ExplainError(f"policy '{policy_id}' is not valued: {error.reason}: {found}; {error.rule}") from error


def find_policy(extract: Extract, policy_id: str) -> Chunk:
    """Return the row of a policy as a chunk of its own. Raises ExplainError unless there is exactly one."""
    found = extract.find(policy_id)
    if not found:
        raise ExplainError(f"policy '{policy_id}' is not in the extract ({extract.rows:,} policies)")
    if len(found) > 1:
        raise ExplainError(f"policy '{policy_id}' is not valued: the extract holds it {len(found)} times")
    return found[0]


def _checked(
    prepared: Prepared, policy: Chunk, needed: tuple[str, ...], ratings: tuple[str, ...], policy_id: str
) -> int:
    """Return the position of the policy's design. Raises ExplainError where the checks of a run object."""
    document = prepared.document
    checks = Checks(prepared.designs, document.valuation_date, document.in_force, Duplicates(), needed, ratings)
    checked = checks.check(policy)
    if checked.reason[0]:
        (row,) = exception_rows(policy, checked, needed).to_pylist()
        raise ExplainError(f"policy '{policy_id}' is not valued: {row['reason']}: {sentence(row)}")
    return int(checked.product[0])
