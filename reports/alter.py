"""An alteration of one policy of a run, worked out and said in words."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import Any

import pyarrow as pa

from portfolios.column_types import wanted_kind
from projection.alteration import Altered, alter

from .explain import ExplainError, look_up
from .figures import amount, lines_up, words


def alter_policy(
    run: Path, policy_id: str, changes: list[str], unknown: str, charge: float = 0.0, basis: str = ""
) -> str:
    """Return an alteration at equal value as text.

    changes: each ``column=value``; unknown: the amount to find. Raises DocumentError and ExtractError for wrong input,
    and ExplainError where the policy, a change or the result is no good.
    """
    asked = look_up(run, policy_id, basis)
    document = asked.prepared.document
    policy = pa.Table.from_pylist([asked.policy])
    parsed = dict(_change(text) for text in changes)
    if unknown in parsed:
        raise ExplainError(f"'{unknown}' is what is asked for; it cannot be set as well")
    found = alter(
        policy,
        parsed,
        unknown,
        asked.prepared.designs,
        asked.basis,
        document.settings,
        charge=charge,
        in_force=document.in_force,
    )
    why = found.solved.why[0]
    if why:
        rows = found.solved.exceptions.to_pylist()
        said = f"{rows[0]['reason']}: {rows[0]['field']} {rows[0]['value']}; {rows[0]['rule']}" if rows else why
        raise ExplainError(f"policy '{policy_id}' cannot be altered in this way: {said}")
    return _said(policy_id, asked.policy, parsed, unknown, found, charge, document)


def _said(
    policy_id: str,
    policy: dict[str, Any],
    changes: dict[str, Any],
    unknown: str,
    found: Altered,
    charge: float,
    document: Any,
) -> str:
    digits, currency = document.decimals, document.currency or "currency"
    rows = [["", "before", "after"]]
    for column, value in changes.items():
        rows.append([words(column), _shown(policy.get(column)), _shown(value)])
    rows.append([words(unknown), _shown(policy.get(unknown)), amount(float(found.solved.amount[0]), digits)])
    rows.append([f"reserve, {currency}", amount(float(found.before[0]), digits), amount(float(found.after[0]), digits)])
    if charge:
        rows.append(["charge taken", "", amount(charge, digits)])
    return "\n".join(
        [
            f"Alteration of policy {policy_id} at equal value, {document.valuation_date.isoformat()}",
            "",
            *lines_up(rows, right=(1, 2)),
            "",
            "The reserve after is that before, less the charge, on the same basis, unrounded. The amount asked for is",
            "shown rounded to the minor unit. Unsigned: a qualified person must judge it; local rules on surrender and",
            "paid-up values prevail.",
            "",
        ]
    )


def _shown(value: Any) -> str:
    return f"{value:,.10g}" if isinstance(value, int | float) else "" if value is None else str(value)


def _change(text: str) -> tuple[str, Any]:
    column, equals, value = text.partition("=")
    if not equals or not column.strip():
        raise ExplainError(f"'{text}' is no change; write column=value, such as premium_pa=0")
    column, value = column.strip(), value.strip()
    kind = wanted_kind(column)
    try:
        if kind == "number":
            return column, float(value)
        if kind == "day":
            return column, date.fromisoformat(value)
    except ValueError:
        what = "a number" if kind == "number" else "a date, written like 2026-11-30"
        raise ExplainError(f"'{text}': '{column}' takes {what}") from None
    if kind is None:
        try:
            return column, float(value)
        except ValueError:
            return column, value
    return column, value
