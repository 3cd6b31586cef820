"""The convention sheet: every convention that a number rests on, in words, for this run."""

from __future__ import annotations

from assumptions.basis import Basis, ClaimDelay

from .settings import Settings

Sheet = tuple[tuple[str, str], ...]


def convention_sheet(basis: Basis, settings: Settings) -> Sheet:
    """Return (matter, rule) rows for a run; the page of conventions gives the formulas."""
    document = basis.document
    return (
        ("valuation date", f"{settings.valuation_date.isoformat()}, end of day; {_due(settings)}"),
        ("step", _step(settings)),
        ("between two steps", "the first, broken step runs from the valuation date to the next step date, as the exact "
         "fraction of that step in days; reserves are not interpolated"),
        ("payments more often than the step", "valued at their own dates under the rule for fractions of a year; "
         "Woolhouse's formula only where a design asks for it"),
        ("age", f"{document.mortality.age}{' age' if document.mortality.age == 'exact' else ''} at commencement; "
         "then it runs with duration"),
        ("fractions of a year of age", document.mortality.fractions),
        ("select", "duration since commencement; select rates, then ultimate"),
        ("improvement", _improvement(basis)),
        ("two lives", _two_lives(basis)),
        ("decrements in one step", _decrements(basis)),
        ("claims paid", _claims(basis)),
        ("interest", _interest(basis)),
        *_indices(basis),
        ("sign", "reserve = value of benefits, expenses and commission - value of premiums; cash flows are positive "
         "amounts with a direction"),
        ("money", f"double precision inside; each policy's results are rounded half-even to {settings.decimals} "
         "decimals once, and totals are the exact sums of the rounded policies"),
        ("expected cash flows", "not discounted; each expected payment is rounded half-even to a thousandth of the "
         "minor unit before adding, so that sums do not depend on the order"),
        ("personal data", "policy identifiers only"),
    )  # fmt: skip


def _interest(basis: Basis) -> str:
    rules = basis.document.interest.rule
    words = ["annual effective; discount factors from the valuation date"]
    if any(rule.forward is not None or rule.spot is not None for rule in rules):
        words.append("constant forward rates between maturities, the last one held")
    if any(rule.svensson is not None for rule in rules):
        words.append("spot rates by Svensson's formula")
    for rule, curve in zip(rules, basis.curves, strict=True):
        if rule.smith_wilson is not None:
            alpha = getattr(curve, "alpha", 0.0)
            words.append(f"Smith-Wilson, ultimate forward rate {rule.smith_wilson.ultimate:.4%}, alpha {alpha:.6f}")
    return "; ".join(words)


def _indices(basis: Basis) -> Sheet:
    """Indices that increases follow; nothing where a basis has none."""
    words = []
    for index in basis.document.index:
        first, rates = index.listed
        span = "" if index.years is None else f" of {first} to {first + len(rates) - 1}, the first and the last held"
        words.append(f"'{index.name}' {', '.join(f'{rate:.4%}' for rate in rates)}{span}")
    return (("indices", "yearly rates by calendar year of the increase: " + "; ".join(words)),) if words else ()


def _improvement(basis: Basis) -> str:
    scales = [scale.document for scale in basis.scales if scale is not None]
    if not scales:
        return "none"
    years = sorted({str(one.base_year) for one in scales})
    some = "" if len(scales) == len(basis.scales) else f"for {len(scales)} of {len(basis.scales)} mortality rules; "
    return f"{some}by age and calendar year from base year {' or '.join(years)}, each cohort followed exactly"


def _two_lives(basis: Basis) -> str:
    shock = basis.document.mortality.common_shock
    if not shock:
        return "independent"
    return f"independent but for a common shock with a force of {shock:g} a year, which is part of the rates of each"


def _due(settings: Settings) -> str:
    if settings.due == "settled":
        return "cash flows due on it are settled"
    return "cash flows due on it are outstanding"


def _step(settings: Settings) -> str:
    return (
        f"one {settings.step}, counted from each policy's commencement; a due date that its month lacks "
        "falls on the month's last day"
    )


def _decrements(basis: Basis) -> str:
    lapse = basis.document.lapse
    if lapse is None:
        return "deaths only"
    when = "at the end of every step" if lapse.timing == "each step" else "at policy anniversaries"
    if lapse.competing == "dependent rates":
        return f"dependent rates from independent ones, uniform in their single tables; lapses {when}"
    return f"independent rates: deaths through the step, lapses {when} from the survivors"


def _claims(basis: Basis) -> str:
    paid = basis.document.claims.paid
    if isinstance(paid, ClaimDelay):
        months = "1 month" if paid.delay_months == 1 else f"{paid.delay_months:g} months"
        return f"{months} after the middle of the step of death"
    return f"at the {paid} of death"
