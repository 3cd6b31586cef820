"""Rates: the amount that each cell of a table asks for, per unit of size, less the policy fee, rounded."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.designs import Design
from portfolios.extract import ExtractError

from .documents import DocumentError
from .equivalence import Solved, solve
from .premium_cells import cells_of, policies_of
from .premium_checks import Finding, findings_of
from .premium_document import PremiumDocument, Rounding
from .sheet import convention_sheet
from .unrounded import Valuer

Numbers = NDArray[np.float64]

WHOLE = 1e-9
"""A rate that lies within this, relative, of a multiple of the rounding's step is that multiple."""


@dataclass(frozen=True)
class Premiums:
    """A rate table.

    table: one row for each cell: the axes, ``size_from`` and ``size_at`` where there are sizes, ``rate`` (rounded),
    ``rate_unrounded``, ``amount`` (of the unknown, in currency, that meets the target at ``size_at``),
    ``charged`` (the same at the rounded rate, with the fee), the values of benefits, expenses and premiums at
    ``amount``, and ``why`` where there is no rate. findings: what the checks of the document found.
    """

    document: PremiumDocument
    design: Design
    table: pa.Table
    findings: tuple[Finding, ...]
    conventions: tuple[tuple[str, str], ...]

    @property
    def rates(self) -> Numbers:
        """Rates in the order of the cells, NaN where there is none."""
        rates: Numbers = self.table.column("rate").to_numpy()
        return rates

    @property
    def shape(self) -> tuple[int, ...]:
        """Lengths of the axes, with the size bands last where there are sizes."""
        return tuple(map(len, self.document.axes.values()))


def premiums(document: PremiumDocument, designs: list[Design], basis: Basis) -> Premiums:
    """Work out a rate table. Raises DocumentError where document, design and basis do not fit together."""
    design = next((one for one in designs if one.code == document.design), None)
    if design is None:
        codes = ", ".join(one.code for one in designs)
        raise DocumentError(f"key 'design': no design has the code '{document.design}'; there are {codes}")
    known = sorted({one.amount for one in design.stream if isinstance(one.amount, str)})
    for key, column in (("unknown", document.unknown), ("size", document.size and document.size.column)):
        if column and column not in known:
            listed = ", ".join(f"'{name}'" for name in known)
            raise DocumentError(f"key '{key}': '{column}' is no amount of the design {design.code}; it has {listed}")
    if document.policy_fee and not is_price(document, design):
        raise DocumentError(f"key 'policy_fee': the unknown '{document.unknown}' is not what the office receives")
    cells = cells_of(document)
    policies = policies_of(document, cells)
    try:
        valuer = Valuer(_with_unknown(policies, document.unknown), [design], basis, document.settings)
    except ExtractError as error:
        faults = str(error).replace("in memory: ", "").splitlines()
        raise DocumentError("\n".join(f"{fault}; give it in grid or policy" for fault in faults)) from None
    found = solve(valuer, policies, document.unknown, net=document.equivalence == "net")
    table = _table(document, cells, policies, found)
    rates = table.column("rate").to_numpy()
    return Premiums(
        document=document,
        design=design,
        table=table,
        findings=tuple(findings_of(document, rates, is_price(document, design))),
        conventions=convention_sheet(basis, document.settings),
    )


def is_price(document: PremiumDocument, design: Design) -> bool:
    """Say whether the unknown is what the office receives."""
    return any(one.amount == document.unknown and one.direction == "in" for one in design.stream)


def rounded(rates: Numbers, rounding: Rounding) -> Numbers:
    """Return rates as whole multiples of the rounding's step."""
    multiples = rates / rounding.to
    nearest = np.rint(multiples)
    there = np.abs(multiples - nearest) <= WHOLE * np.maximum(1.0, np.abs(multiples))
    away = {"nearest": nearest, "up": np.ceil(multiples), "down": np.floor(multiples)}[rounding.way]
    # Dividing by the inverse keeps decimals such as 0.01 as near to what is printed as a double can be.
    inverse = 1 / rounding.to
    exact = np.rint(inverse) if abs(inverse - np.rint(inverse)) < WHOLE * inverse else inverse
    return np.asarray(np.where(there, nearest, away) / exact)


def _table(document: PremiumDocument, cells: pa.Table, policies: pa.Table, found: Solved) -> pa.Table:
    amount, unrounded, charged = found.amount, found.amount, found.amount
    columns = {name: cells.column(name) for name in cells.column_names}
    if document.size is not None:
        size = policies.column(document.size.column).to_numpy() / document.size.per
        unrounded = (amount - document.policy_fee) / size
        rates = rounded(unrounded, document.rounding)
        charged = rates * size + document.policy_fee
        columns["size_at"] = policies.column(document.size.column)
    else:
        rates = rounded(unrounded, document.rounding)
        charged = rates
    why = np.where((found.amount < document.policy_fee) & np.isfinite(amount), "the fee alone is too much", found.why)
    bad = why != ""
    figures = {
        "rate": rates,
        "rate_unrounded": unrounded,
        "amount": amount,
        "charged": charged,
        "value_of_benefits": found.value[:, 0],
        "value_of_expenses": found.value[:, 1],
        "value_of_premiums": found.value[:, 2],
    }
    columns |= {name: pa.array(np.where(bad, np.nan, figure), pa.float64()) for name, figure in figures.items()}
    reasons = dict(zip(found.exceptions["policy_id"].to_pylist(), found.exceptions.to_pylist(), strict=True))
    columns["why"] = pa.array(
        [_why(text, reasons.get(name)) for text, name in zip(why, policies["policy_id"].to_pylist(), strict=True)]
    )
    return pa.table(columns)


def _why(text: str, row: dict[str, str] | None) -> str:
    if not text or row is None:
        return str(text)
    return f"{row['reason']}: {row['field']} {row['value']}; {row['rule']}".replace(":  ;", ":")


def _with_unknown(policies: pa.Table, unknown: str) -> pa.Table:
    """The columns that cells are valued with: the unknown is one of them."""
    return policies.append_column(unknown, pa.array(np.zeros(policies.num_rows)))
