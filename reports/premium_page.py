"""The page of a premium run: the rates as heat maps, what the checks found, conventions, inputs, cautions."""

from __future__ import annotations

from typing import Any

import numpy as np

from .figures import amount, visible
from .page_templates import template
from .premium_run import PremiumReport
from .rate_tables import CrossTable, cross_tables, decimals_of, plain

MOST_TABLES = 40
MOST_FINDINGS = 200

_PALE, _DEEP = (243, 244, 242), (199, 154, 75)
"""Colours of the smallest and the largest rate of a page."""


def premium_page(report: PremiumReport) -> str:
    """Return the page. Every text from the inputs is escaped, and its control characters become '?'."""
    found = report.premiums
    tables = cross_tables(found)
    good = found.rates[np.isfinite(found.rates)]
    low, high = (float(good.min()), float(good.max())) if len(good) else (0.0, 1.0)
    digits = decimals_of(found.document.rounding.to)
    text = template("premium.html").render(
        report=report,
        record=report.record,
        document=found.document,
        design=found.design,
        tables=[_laid_out(one, low, high, digits) for one in tables[:MOST_TABLES]],
        tables_hidden=max(0, len(tables) - MOST_TABLES),
        findings=found.findings[:MOST_FINDINGS],
        findings_hidden=max(0, len(found.findings) - MOST_FINDINGS),
        low=amount(low, digits),
        high=amount(high, digits),
        plain=plain,
    )
    return visible(text)


def _laid_out(table: CrossTable, low: float, high: float, digits: int) -> dict[str, Any]:
    return {
        "others": table.others,
        "rows": table.rows,
        "columns": table.columns,
        "heads": [plain(value) for value in table.column_values],
        "lines": [
            (plain(value), [(_said(rate, digits), _shade(rate, low, high)) for rate in rates])
            for value, rates in zip(table.row_values, table.rates.tolist(), strict=True)
        ],
    }


def _said(rate: float, digits: int) -> str:
    return "none" if np.isnan(rate) else amount(rate, digits)


def _shade(rate: float, low: float, high: float) -> str:
    if np.isnan(rate):
        return "#ffffff"
    share = (rate - low) / (high - low) if high > low else 0.0
    return "#" + "".join(f"{round(a + share * (b - a)):02x}" for a, b in zip(_PALE, _DEEP, strict=True))
