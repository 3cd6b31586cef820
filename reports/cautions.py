"""The cautions that every result carries."""

from __future__ import annotations

from projection.results import Outcome

from .figures import count, counted

GENERAL = (
    "A qualified person must judge these results before anybody relies on them; they are unsigned until "
    "such a person has approved them.",
    "Local law, supervisory rules and professional standards prevail over anything that is said here.",
    "This is the output of a calculation. It is not an actuarial opinion.",
)

ONE_SCENARIO = (
    "The figures rest on one deterministic scenario. It says nothing of the time value of options and guarantees."
)

OUTSIDE_THE_MODEL = (
    "Outside the model, and not in the figures: options that policyholders have beyond the stated lapses, "
    "benefits at the office's discretion, reinsurance, tax, the default of assets and counterparties, "
    "liquidity, currency, epidemics and other catastrophes, trends other than those in the basis, "
    "operational and legal risk, policies that are not in the extract, and wrong but plausible data."
)

SENSITIVITIES = "The sensitivities are neither equally likely nor additive."


def cautions(outcome: Outcome, sensitivities: bool = False) -> tuple[str, ...]:
    """Return the cautions of a result, those that count something first."""
    return (
        *counted_cautions(outcome),
        *GENERAL,
        ONE_SCENARIO,
        *([SENSITIVITIES] if sensitivities else []),
        OUTSIDE_THE_MODEL,
    )


def counted_cautions(outcome: Outcome) -> tuple[str, ...]:
    """Return what is counted on the first page: exclusions, then defaults and the like."""
    return (_exclusions(outcome), *outcome.notes)


def _exclusions(outcome: Outcome) -> str:
    left_out, read = outcome.read - outcome.valued, counted(outcome.read, "policy", "policies")
    if not left_out:
        return f"Every one of the {read} read is valued; none is left out."
    is_, has = ("is", "has") if left_out == 1 else ("are", "have")
    return (
        f"{count(left_out)} of {read} read {is_} not valued and {has} no "
        "reserve in any total; each is listed as an exception with its reason."
    )
