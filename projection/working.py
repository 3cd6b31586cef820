"""The working of one policy: every date, age, rate, probability, factor and payment down to the reserve."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import date
from itertools import groupby
from typing import Any, Literal

from assumptions.basis import Basis
from assumptions.interest import FORMS
from assumptions.laws import Law
from assumptions.mortality import MortalityRule, TableFile
from portfolios.designs import Design

from .plain import Payment, PlainValue, plain_value
from .plain_layout import money, pairs, plain, table
from .plain_life import Survival
from .settings import Settings
from .working_states import states_section

Listing = Literal["yearly", "all"]
Columns = tuple[tuple[str, ...], list[tuple[str, ...]]]

LEGEND = (
    ("point", "months from commencement to the payment; for a death or lapse, to the end of its step"),
    ("date", "date of the point"),
    ("age", "age at commencement, counted as the basis says, plus the time since"),
    ("q", "yearly rate of death in force up to the point, adjusted as listed above"),
    ("survival", "probability from the valuation date to live to the point; for a death, to die in its step"),
    ("persist.", "share of those still in force; for a lapse, the share that lapses"),
    ("t", "years from the valuation date to the payment"),
    ("discount", "discount factor v(t)"),
    (
        "relative",
        "factor on the amount: pattern, increase, decrease, inflation, weight by Woolhouse's formula",
    ),
    ("payment", "amount x relative"),
    ("expected", "payment x survival x persistency, not discounted"),
    ("value", "expected x discount"),
)

CAUTIONS = (
    "A qualified person must judge this working. It is not an actuarial opinion.",
    "Local law, supervisory rules and professional standards prevail.",
)


def working(
    policy: Mapping[str, Any],
    design: Design,
    basis: Basis,
    settings: Settings,
    payments: Listing = "all",
) -> str:
    """Return the working of a policy as plain text, its last line the reserve.

    payments: every one, or one line for each policy year. Money is rounded for display only; the reserve is
    rounded once. Raises plain.NotValued for a policy that belongs to the exceptions.
    """
    value = plain_value(policy, design, basis, settings)
    lines = [f"Working of policy {plain(policy.get('policy_id'))}", ""]
    lines += pairs(_heading(design, basis, settings))
    lines += ["", "Dates", *pairs(_dates(policy, value, settings))]
    if value.chain is not None:
        lines += states_section(value, value.chain)
    if value.life is not None:
        lines += ["", "Mortality", *pairs(_mortality(basis, value)), *_rates(value.life, value)]
    if value.second is not None:
        lines += ["", "Second life", *pairs(_second(policy, basis, value)), *_rates(value.second, value)]
    lines += ["", "Lapse, interest and expenses", *pairs(_other_rules(basis, value)), *_lapses(value)]
    lines += ["", "Symbols", *pairs(LEGEND)]
    for name, group in groupby(value.payments, lambda payment: payment.stream):
        lines += ["", *_stream(name, list(group), value, settings, payments)]
    if not value.payments:
        lines += ["", "No payment is still to come."]
    lines += ["", *(f"  {caution}" for caution in CAUTIONS)]
    lines += ["", "Reserve = benefits + expenses - premiums; expenses include commission"]
    lines += _result(value, settings)
    return "\n".join(lines) + "\n"


def _heading(design: Design, basis: Basis, settings: Settings) -> list[tuple[str, str]]:
    return [
        ("product", f"{plain(design.code)} {plain(design.title)}".rstrip()),
        ("basis", f"{plain(basis.title)}, digest {basis.digest[:12]}"),
        ("valuation date", f"{settings.valuation_date}, end of day; cash flows due on it: {settings.due}"),
        ("step", settings.step),
    ]


def _dates(policy: Mapping[str, Any], value: PlainValue, settings: Settings) -> list[tuple[str, str]]:
    position = value.position
    last, following = position.last, position.following
    elapsed = f"{(settings.valuation_date - last).days} of {(following - last).days} days"
    return [
        ("birth", str(policy["birth_date"])),
        ("commencement", str(policy["commencement_date"])),
        ("last step date", str(last)),
        ("next step date", str(following)),
        ("since last step date", f"{elapsed} = {float(position.step):.9f} of a step"),
        ("months since commencement", f"u = k + f = {position.k} + {position.f} = {float(position.u):.9f}"),
    ]


def _mortality(basis: Basis, value: PlainValue) -> Iterator[tuple[str, str]]:
    part, number = basis.document.mortality, value.rules.mortality
    rule = part.rule[number - 1]
    yield "age at commencement", f"{float(value.age):.6f}, {part.age}"
    yield "rule", f"{number}{_titled(rule.title)}: {_source(rule)}"
    assert value.life is not None
    yield "rate", _rate(value.life)
    yield "fractions of a year", part.fractions
    both = "" if value.second is None else ", of both lives but for a common shock"
    yield "survival to valuation", f"L(T) = {value.survival:.12f} from commencement{both}"


def _second(policy: Mapping[str, Any], basis: Basis, value: PlainValue) -> Iterator[tuple[str, str]]:
    """What the second life is subject to, and how both make the probabilities of the streams."""
    assert value.second is not None
    yield "birth", str(policy["second_birth_date"])
    yield "age at commencement", f"{float(value.second.rates.entry + value.second.rates.offset):.6f}"
    yield "rule", _source(value.second.rates.rule)
    yield "rate", _rate(value.second)
    shock = basis.document.mortality.common_shock
    both = "l1 x l2" if not shock else f"l1 x l2 x exp({shock:g} x t), with the common shock"
    yield "both live", f"{both}; l1 and l2 survival of each life from the valuation date"
    yield "one of them only", "l1, or l2, less the probability that both live; either: the sum of the three"


def _rate(life: Survival) -> str:
    rule = life.rates.rule
    scale = life.rates.scale
    improved = "" if scale is None else f" x improvement from {scale.document.base_year}, listed with it"
    close = "; 1 at the last age" if life.rates.closed else ""
    return f"q = min(1, {rule.multiple:g} x table{improved} + {rule.extra:g}); age {rule.added_years:+d} years{close}"


def _titled(title: str) -> str:
    return f" ({plain(title)})" if title else ""


def _source(rule: MortalityRule) -> str:
    if isinstance(rule.table, Law):
        sources = {"law", "title", "reference", "effective"}
        given = rule.table.model_dump(exclude_defaults=True, exclude=sources)
        return f"{rule.table.law}, {', '.join(f'{name} = {figure}' for name, figure in given.items())}"
    if isinstance(rule.table, TableFile):
        parts = (rule.table.file, rule.table.table, rule.table.column)
        return plain(", ".join(str(part) for part in parts if part is not None))
    return plain(rule.table)


def _rates(life: Survival, value: PlainValue) -> list[str]:
    """List the yearly rates of a life in use from the valuation date on."""
    rates = life.rates
    first = int(rates.offset + value.position.u / 12)
    rows = [
        (str(year), f"{float(rates.entry) + year:g}", f"{life.yearly[year]:.9f}")
        for year in range(first, len(life.yearly))
    ]
    return table(("year", "from age", "q"), rows) if rows else []


def _other_rules(basis: Basis, value: PlainValue) -> Iterator[tuple[str, str]]:
    document, rules = basis.document, value.rules
    if document.lapse:
        rule = document.lapse.rule[rules.lapse - 1]
        until = "" if value.lapses.until is None else f", until month {value.lapses.until:g}"
        timing = f"{document.lapse.timing}, {document.lapse.competing}"
        yield "lapse", f"rule {rules.lapse}{_titled(rule.title)}: {rule.multiple:g} x rate{until}; {timing}"
    else:
        yield "lapse", "none"
    yield "persistency to valuation", f"P(T) = {value.persistency:.12f} from commencement"
    interest = document.interest.rule[rules.interest - 1]
    form = next(form for form in FORMS if getattr(interest, form) is not None).replace("smith_wilson", "Smith-Wilson")
    detail = f" {interest.flat:.6g} a year" if interest.flat is not None else ""
    yield "interest", f"rule {rules.interest}{_titled(interest.title)}: {form}{detail}"
    paid = document.claims.paid
    delayed = "" if isinstance(paid, str) else f"{paid.delay_months:g} months after the middle of the step"
    yield "death claims paid", delayed or str(paid)
    for item in document.expense:
        number = rules.expenses[item.name]
        figures = item.rule[number - 1]
        later = f"{figures.first_year:g} in the first policy year, then {figures.later_years:g}"
        growth = ""
        if item.inflation is not None:
            growth = f", growing {item.inflation.rate:g} a year from {item.inflation.from_}"
        yield f"expense '{plain(item.name)}'", f"rule {number}, per {item.per}: {later}{growth}"


def _lapses(value: PlainValue) -> list[str]:
    """List the yearly lapse rates from the policy year of the valuation date on, the held one once."""
    last = max((payment.point - 1) // 12 for payment in value.payments) if value.payments else 0
    first = value.position.k // 12
    if value.lapses.rule is None or last < first:
        return []
    held = len(value.lapses.rates) - 1
    years = range(first, max(first, min(last, held)) + 1)
    rows = [(f"{year + 1}{'+' * (year >= held)}", f"{value.lapses.yearly(year):.9f}") for year in years]
    return table(("policy year", "w"), rows)


def _stream(name: str, payments: list[Payment], value: PlainValue, settings: Settings, listing: Listing) -> list[str]:
    first = payments[0]
    headings, rows = _every(payments, value) if listing == "all" else _yearly(payments)
    total = money(sum(payment.value for payment in payments), settings.decimals)
    title = f"Stream '{plain(name)}' ({first.part}, {first.direction})"
    return [title, *table(headings, rows), f"  value of '{plain(name)}'  {total}"]


def _every(payments: list[Payment], value: PlainValue) -> Columns:
    headings = ("point", "date", "age", "q", "survival", "persist.", "t", "discount")
    rows = [_row(payment, value) for payment in payments]
    return (*headings, "relative", "payment", "expected", "value"), rows


def _row(payment: Payment, value: PlainValue) -> tuple[str, ...]:
    q = None if value.life is None else value.life.rate_before(payment.point)
    return (
        str(payment.point),
        payment.due.isoformat(),
        f"{float(value.age) + payment.point / 12:.3f}",
        "-" if q is None else f"{q:.7f}",
        f"{payment.survival:.9f}",
        f"{payment.persistency:.9f}",
        f"{payment.t:.6f}",
        f"{payment.discount:.9f}",
        f"{payment.relative:.6f}",
        money(payment.amount * payment.relative, 4),
        money(payment.expected, 6),
        money(payment.value, 6),
    )


def _yearly(payments: list[Payment]) -> Columns:
    years: dict[int, list[Payment]] = {}
    for payment in payments:
        years.setdefault(payment.policy_year, []).append(payment)
    rows: list[tuple[str, ...]] = [
        (
            str(year),
            _span(group[0].due, group[-1].due),
            str(len(group)),
            money(sum(payment.amount * payment.relative for payment in group), 4),
            money(sum(payment.expected for payment in group), 6),
            money(sum(payment.value for payment in group), 6),
        )
        for year, group in years.items()
    ]
    return ("policy year", "dates", "payments", "payment", "expected", "value"), rows


def _span(first: date, last: date) -> str:
    return str(first) if first == last else f"{first} to {last}"


def _result(value: PlainValue, settings: Settings) -> list[str]:
    decimals = settings.decimals
    figures = [
        ("benefits", money(value.benefits, decimals)),
        ("expenses", money(value.expenses, decimals)),
        ("premiums", money(value.premiums, decimals)),
        ("reserve", money(value.reserve, decimals)),
    ]
    width = max(len(figure) for _, figure in figures[:3])
    lines = [f"  {name}  {figure.rjust(width)}" for name, figure in figures[:3]]
    return [*lines, f"reserve  {figures[3][1]}"]
