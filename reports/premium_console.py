"""What the command 'premium' prints."""

from __future__ import annotations

import numpy as np

from .figures import amount, count, counted, lines_up, seconds, short, words
from .premium_run import PremiumReport
from .rate_tables import cross_tables, decimals_of, plain

MOST_ROWS = 20
MOST_COLUMNS = 8
MOST_FINDINGS = 10


def premium_summary(report: PremiumReport, out: str) -> str:
    """Return the summary of a finished premium run."""
    document = report.premiums.document
    per = f" per {document.size.per:,.10g} of {words(document.size.column)}" if document.size else ""
    blocks = [
        [f"{report.title}  (sold on {document.sale_date.isoformat()}, {report.currency})"],
        [f"{words(document.unknown)}{per}, by {document.equivalence} equivalence; {_cells(report)}."],
        _first_table(report),
        _findings(report),
        [f"Time taken: {seconds(report.timings.get('altogether', 0.0))}."],
        [f"Results in {out}: report.html for people, run.json is the record."],
        ["Unsigned: a qualified person must judge these rates; this is not an actuarial opinion."],
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _cells(report: PremiumReport) -> str:
    cells = counted(report.premiums.table.num_rows, "cell")
    return f"{cells}, {count(report.without_rate)} without a rate" if report.without_rate else cells


def _first_table(report: PremiumReport) -> list[str]:
    tables = cross_tables(report.premiums)
    first = tables[0]
    digits = decimals_of(report.premiums.document.rounding.to)
    heads = [plain(value) for value in first.column_values[:MOST_COLUMNS]]
    corner = " \\ ".join(words(name) for name in (first.rows, first.columns) if name)
    rows = [[corner, *heads]]
    # Where there are too many, lines are left out evenly.
    every = -(-len(first.row_values) // MOST_ROWS)
    for value, rates in list(zip(first.row_values, first.rates.tolist(), strict=True))[::every]:
        rows.append(
            [plain(value), *("none" if np.isnan(rate) else amount(rate, digits) for rate in rates[: len(heads)])]
        )
    shown = [first.others] if first.others else []
    more = []
    if every > 1 or len(first.column_values) > MOST_COLUMNS or len(tables) > 1:
        more = [f"A part of {counted(report.premiums.table.num_rows, 'rate')}; all of them are in the results."]
    return [*shown, *lines_up(rows, right=range(1, len(heads) + 1)), *more]


def _findings(report: PremiumReport) -> list[str]:
    found = report.premiums.findings
    if not found:
        return ["The rates keep to every check."]
    lines = [f"{one.check}: {short(one.said, 110)}" for one in found[:MOST_FINDINGS]]
    more = len(found) - MOST_FINDINGS
    return [f"The checks found {counted(len(found), 'breach', 'breaches')}:", *lines] + (
        [f"... and {more:,} more in findings.parquet"] if more > 0 else []
    )
