"""The reserve run for a notebook: policies from an Arrow table, a DataFrame or files; results as Arrow tables."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from types import MappingProxyType
from typing import Any

import pyarrow as pa

from assumptions.basis import Basis, BasisDocument, prepare_basis
from portfolios.designs import Design
from portfolios.extract import open_extract

from .documents import DocumentError, check_document, read_basis, read_designs
from .results import Outcome
from .settings import Due, Settings, Step
from .valuation import value_extract

BasisLike = Basis | str | Path | dict[str, Any]
Designs = str | Path | Design | dict[str, Any] | Sequence[Design | dict[str, Any]]


@dataclass(frozen=True)
class Valuation:
    """What a valuation found.

    policies: one row per valued policy in the order of the extract, with policy_id, product, the groups,
    reserve, value_of_benefits, value_of_expenses and value_of_premiums in currency, and the same with ``_`` and the
    name of each further basis; outcome: everything else, for the record.
    """

    policies: pa.Table
    outcome: Outcome

    @property
    def totals(self) -> pa.Table:
        """One row per group: policies, the money columns, rounding."""
        return self.outcome.totals

    @property
    def cash_flows(self) -> pa.Table:
        """Expected cash flows, not discounted, by calendar month, product and stream."""
        return self.outcome.cash_flows

    @property
    def exceptions(self) -> pa.Table:
        """One row per policy that was not valued: policy_id, product, reason, field, value, rule."""
        return self.outcome.exceptions


def value(
    extract: Any,
    designs: Designs,
    basis: BasisLike,
    valuation_date: date | str,
    *,
    further_bases: Mapping[str, BasisLike] = MappingProxyType({}),
    step: Step = "month",
    due: Due = "settled",
    decimals: int = 2,
    group_by: Sequence[str] = ("product",),
    in_force: Sequence[str] = ("in force",),
    exceptions_limit: float = 1.0,
    sample: int = 24,
    threads: int | None = None,
) -> Valuation:
    """Value policies: the same run as the command ``duecourse reserve``, with the results in memory.

    extract: a Parquet file, folder, pattern or URI, an Arrow table, or a DataFrame, with the columns that
    ``portfolios.columns`` lists; designs: a folder or document, or designs (objects or dictionaries as in
    TOML); basis: a document, a dictionary as in TOML, or what ``read_basis`` returned; further_bases: more of them
    by name; the rest as in a run document. exceptions_limit: at the default of 1 no share of exceptions stops the
    run; look at ``.exceptions``.

    Raises DocumentError, ExtractError (what is given is wrong) and RunStopped (the run must not go on), all
    ValueErrors.
    """
    pieces: list[pa.Table] = []
    outcome = value_extract(
        open_extract(extract),
        _designs(designs),
        _basis(basis),
        Settings(date.fromisoformat(str(valuation_date)), step, due, decimals),
        further={name: _basis(one) for name, one in further_bases.items()},
        group_by=tuple(group_by),
        in_force=tuple(in_force),
        exceptions_limit=exceptions_limit,
        sample=sample,
        sink=pieces.append,
        threads=threads,
    )
    return Valuation(pa.concat_tables(pieces) if pieces else pa.table({}), outcome)


def _designs(designs: Designs) -> list[Design]:
    if isinstance(designs, str | Path):
        return read_designs(designs)
    several = [designs] if isinstance(designs, Design | dict) else list(designs)
    return [
        one if isinstance(one, Design) else check_document(one, Design, f"design {number}")
        for number, one in enumerate(several, 1)
    ]


def _basis(basis: BasisLike) -> Basis:
    if isinstance(basis, Basis):
        return basis
    if isinstance(basis, dict):
        try:
            return prepare_basis(check_document(basis, BasisDocument, "basis"))
        except DocumentError:
            raise
        except (ValueError, OSError) as error:
            raise DocumentError(f"basis: {error}") from error
    return read_basis(basis)
