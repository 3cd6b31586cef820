"""The amount at which a contract's value meets a target: premiums by equivalence, the annuity that a price buys.

A value is linear in each amount. With V(x) the reserve at the amount x, the one at which it meets a target R is
x = (R - V(0)) / (V(1) - V(0)). The difference in the denominator may lose digits where V(0) is large; so the value
is taken once more at the x found in this way, and the slope from V(x) - V(0). The value at the result is then
looked at: an amount on which it does not depend linearly cannot be solved for.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from .documents import DocumentError
from .unrounded import Unrounded, Valuer

Numbers = NDArray[np.float64]

NOT_VALUED: Final = "not valued"
INDEPENDENT: Final = "the value does not depend on the amount"
NEGATIVE: Final = "the amount would be negative"
NOT_LINEAR: Final = "the value is not linear in the amount"

TOLERANCE = 1e-9
"""How far the value at the amount found may lie from the target, relative to the sum of the absolute parts."""


@dataclass(frozen=True)
class Solved:
    """Amounts found, shape (n,), NaN where there is none; ``why`` says why, and is empty elsewhere.

    value: benefits, expenses and premiums at the amounts found, in currency, shape (n, 3).
    """

    amount: Numbers
    why: list[str]
    value: Numbers
    exceptions: pa.Table


def solve(valuer: Valuer, policies: pa.Table, unknown: str, target: float | Numbers = 0.0, net: bool = False) -> Solved:
    """Find for each policy the amount in a column at which its value meets a target.

    unknown: a column of amounts that designs use; what the policies hold there does not matter, and it may be
    absent. target: reserve in currency, one or one for each policy; 0 is the equivalence of premiums and benefits.
    net: leave expenses and commission out. Raises DocumentError where no design uses the column.
    """
    if unknown not in _amounts(valuer):
        raise DocumentError(f"the unknown '{unknown}' is not an amount of any stream; it has {_listed(valuer)}")

    def at(amount: Numbers) -> tuple[Numbers, Unrounded]:
        found = valuer.value(with_column(policies, unknown, amount))
        return (found.net if net else found.reserve), found

    none, ones = np.zeros(policies.num_rows), np.ones(policies.num_rows)
    zero, first = at(none)
    with np.errstate(divide="ignore", invalid="ignore"):
        rough = (target - zero) / (at(ones)[0] - zero)
        usable = np.where(np.isfinite(rough) & (rough > 0), rough, 1.0)
        amount = (target - zero) * usable / (at(usable)[0] - zero)
    amount = np.where(zero == target, 0.0, amount)
    kept = np.where(np.isfinite(amount) & (amount >= 0), amount, 0.0)
    value, last = at(kept)
    size = np.abs(last.parts).sum(axis=1) + np.abs(target)
    checks = (
        (~np.isfinite(zero), NOT_VALUED),
        (~np.isfinite(amount), INDEPENDENT),
        (amount < 0, NEGATIVE),
        (~(np.abs(value - target) <= TOLERANCE * size), NOT_LINEAR),
    )
    why = np.select([bad for bad, _ in checks], [text for _, text in checks], "")
    good = why == ""
    return Solved(
        amount=np.where(good, amount, np.nan),
        why=why.tolist(),
        value=np.where(good[:, None], last.parts, np.nan),
        exceptions=first.exceptions,
    )


def with_column(policies: pa.Table, name: str, values: Numbers) -> pa.Table:
    """Return the policies with a column of numbers put in or replaced."""
    column = pa.array(values, pa.float64())
    if name in policies.column_names:
        return policies.set_column(policies.schema.get_field_index(name), name, column)
    return policies.append_column(name, column)


def _amounts(valuer: Valuer) -> set[str]:
    designs = valuer.engine.cells.designs
    return {one.amount for design in designs for one in design.stream if isinstance(one.amount, str)}


def _listed(valuer: Valuer) -> str:
    return ", ".join(f"'{name}'" for name in sorted(_amounts(valuer))) or "none"
