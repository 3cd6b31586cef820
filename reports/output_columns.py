"""Columns of the tables that a run leaves behind: name, unit, meaning."""

from __future__ import annotations

OUTPUT_TABLES: dict[str, tuple[tuple[str, str, str], ...]] = {
    "policies/*.parquet": (
        ("policy_id", "text", "identifier of the policy, as in the extract"),
        ("product", "text", "code of the product design"),
        ("*the columns of `group_by`*", "text", "as in the extract"),
        (
            "reserve",
            "currency",
            "value of benefits and expenses less value of premiums, rounded to the minor unit",
        ),
        ("value_of_benefits", "currency", "present value of the benefits, rounded"),
        ("value_of_expenses", "currency", "present value of expenses and commission, rounded"),
        ("value_of_premiums", "currency", "present value of the premiums, rounded"),
        (
            "*the same with `_` and the name of each of the `further_bases`*",
            "currency",
            "the same policy on that basis, such as `reserve_best_estimate`",
        ),
    ),
    "totals.parquet": (
        ("*the columns of `group_by`*", "text", "the group"),
        ("policies", "policies", "policies valued in the group"),
        ("reserve", "currency", "exact sum of the rounded reserves"),
        ("value_of_benefits", "currency", "exact sum of the rounded values"),
        ("value_of_expenses", "currency", "exact sum of the rounded values"),
        ("value_of_premiums", "currency", "exact sum of the rounded values"),
        (
            "rounding",
            "currency",
            "reserve less (benefits + expenses - premiums), because each is rounded by policy",
        ),
        ("*the same with `_` and the name of each of the `further_bases`*", "currency", "the same on that basis"),
    ),
    "cash_flows.parquet": (
        ("month", "date", "first day of the calendar month"),
        ("product", "text", "code of the product design"),
        ("stream", "text", "name of the stream, or of the item of expense"),
        ("part", "text", "part of the reserve that the stream belongs to"),
        ("direction", "text", "`in`: the office receives, `out`: it pays"),
        ("amount", "currency", "expected amount, not discounted, not negative"),
        (
            "*a file `cash_flows_` and the name for each of the `further_bases`*",
            "",
            "the same columns, on that basis",
        ),
    ),
    "exceptions.parquet": (
        ("policy_id", "text", "identifier of the policy, as in the extract"),
        ("product", "text", "as in the extract"),
        ("reason", "text", "why the policy is not valued, from a closed list"),
        ("field", "text", "column that was found wrong, if it is one"),
        ("value", "text", "what stands there"),
        ("rule", "text", "the rule that is broken"),
    ),
    "rates.parquet": (
        ("*the axes of the `grid`*", "as in the document", "the cell"),
        ("size_from", "currency", "smallest size of the cell's band, where there are sizes"),
        ("size_at", "currency", "size for which the cell is worked out"),
        ("rate", "currency", "amount of the unknown per unit of size, less the policy fee, rounded"),
        ("rate_unrounded", "currency", "the same before it is rounded"),
        ("amount", "currency", "amount of the unknown at which the value is what was asked for, not rounded"),
        ("charged", "currency", "the same at the rounded rate, with the policy fee"),
        ("value_of_benefits", "currency", "at `amount`, not rounded"),
        ("value_of_expenses", "currency", "at `amount`, not rounded"),
        ("value_of_premiums", "currency", "at `amount`, not rounded"),
        ("why", "text", "why the cell has no rate; empty where it has one"),
    ),
    "findings.parquet": (
        ("check", "text", "the check of the premium document that is broken"),
        ("axis", "text", "the axis along which it is"),
        ("cell", "text", "the cell, axis by axis"),
        ("finding", "text", "what was found, in words"),
    ),
}
"""By file: the name, the unit and the meaning of each column."""
