"""Designs, bases and policies at random over the whole vocabulary of the documents, as hypothesis strategies.

The office and everything in it are invented. Most policies can be valued; some break a rule on purpose.
"""

from __future__ import annotations

from calendar import monthrange
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import Any

import pyarrow as pa
from hypothesis import strategies as st

from assumptions.basis import Basis, prepare_basis
from portfolios.designs import Design
from projection.settings import Settings

Draw = Any

DATES = [
    date(2026, 11, 30),
    date(2028, 2, 29),
    date(2027, 2, 28),
    date(2026, 12, 31),
    date(2026, 7, 15),
    date(2027, 1, 1),
]
MONEY = ["premium_pa", "single_premium", "sum_assured", "annuity_pa", "loading"]
COLUMNS = {
    "policy_id": pa.string(),
    "product": pa.string(),
    "status": pa.string(),
    "birth_date": pa.date32(),
    "commencement_date": pa.date32(),
    "sex": pa.string(),
    "lives": pa.string(),
    "second_birth_date": pa.date32(),
    "second_sex": pa.string(),
    "smoker": pa.bool_(),
    "term_years": pa.float64(),
    "premium_years": pa.float64(),
    "deferral_years": pa.float64(),
    "guarantee_years": pa.float64(),
    "premium_frequency": pa.int64(),
    "annuity_frequency": pa.int64(),
    "escalation": pa.float64(),
    **dict.fromkeys(MONEY, pa.float64()),
}


@dataclass(frozen=True)
class Example:
    """Everything that a valuation takes."""

    designs: list[Design]
    basis: Basis
    settings: Settings
    table: pa.Table


def write_tables(folder: Path) -> None:
    """Write the tables that the bases name: closed and open ones, ultimate only and with select rates."""

    def q(age: int, share: float = 1.0) -> float:
        return min(0.9, share * (0.0004 + 0.00003 * 1.105**age))

    for name, last in (("closed", 1.0), ("open", q(95))):
        rows = [f"{age},{q(age) if age < 95 else last!r}" for age in range(15, 96)]
        (folder / f"{name}.csv").write_text("\n".join(["age,rate", *rows]) + "\n")
    for name, last in (("select_closed", 1.0), ("select_open", q(95))):
        rows = [
            f"{age},{q(age, 0.5)},{q(age + 1, 0.7)},{q(age + 2, 0.9)}," + (f"{q(age)}" if age < 95 else f"{last!r}")
            for age in range(15, 90)
        ]
        rows += [f"{age},,,,{q(age) if age < 95 else last!r}" for age in range(90, 96)]
        (folder / f"{name}.csv").write_text("\n".join(["age,select_0,select_1,select_2,ultimate", *rows]) + "\n")
    by_age = [f"{age},{0.02 - 0.0001 * (age - 20)!r}" for age in range(20, 110)]
    (folder / "improving.csv").write_text("\n".join(["age,rate", *by_age]) + "\n")
    for name, figure in (("improving_2d", 0.015), ("reducing", 0.97)):
        rows = [
            ",".join([str(age), *(repr(figure - 0.001 * n + 0.0001 * (age - 60)) for n in range(4))])
            for age in range(40, 80)
        ]
        (folder / f"{name}.csv").write_text("\n".join(["age,2019,2020,2021,2022", *rows]) + "\n")
    (folder / "leaving.csv").write_text("year,rate\n1,0.15\n2,0.08\n3,0\n4,0.03\n")
    (folder / "spot.csv").write_text("maturity,rate\n0.5,0.01\n1,0.015\n2,0.02\n7.25,0.03\n30,0.028\n")


def one_of(draw: Draw, *values: Any) -> Any:
    return draw(st.sampled_from(values))


def chance(draw: Draw, once_in: int) -> bool:
    """True once in so many draws; shrinks to False. Ends of a range come up too often, so it is not the last."""
    return bool(draw(st.integers(0, once_in - 1)) == max(1, once_in // 2))


# Designs


@st.composite
def own_streams(draw: Draw, name: str, step: str, pair: bool = False) -> dict[str, Any]:
    """A stream with terms of its own; pair: of a contract on two lives."""
    stream: dict[str, Any] = {"name": name, "direction": one_of(draw, "out", "in")}
    if chance(draw, 4):
        stream["kind"] = one_of(draw, "premium", "benefit", "expense", "commission")
    # ENGINE: a stream that its design makes nothing (amount or share 0) is left out, and its dates not checked.
    stream["amount"] = one_of(draw, 100.0, *MONEY, 12.5)
    if chance(draw, 4):
        stream["share"] = one_of(draw, 0.5, 2.25)
    way = one_of(draw, "advance", "death", "arrears", "once", "lapse", "certain")
    if way in ("death", "lapse"):
        stream["on"] = way
    else:
        stream["while"] = "certain" if way == "certain" or chance(draw, 8) else "alive"
        if way == "certain":
            way = one_of(draw, "advance", "arrears", "once")
        stream["paid"] = way
    parts = (0.25, 1.75, 10 + 1 / 12) if way not in ("death", "lapse") or step == "month" or chance(draw, 8) else ()
    if not chance(draw, 2):
        stream["from"] = one_of(draw, 0.0, 3, "deferral_years", "term_years", {"age": one_of(draw, 40, 65, 0)}, *parts)
    if way != "once" and (stream.get("while") == "certain" or not chance(draw, 4)):
        late = stream.get("from") in ("term_years", {"age": 65}) and not chance(draw, 8)
        early = () if late else ("term_years", "premium_years", 12, {"age": 60}, *parts)
        stream["to"] = one_of(draw, 40, {"age": 90}, *early)
    if way in ("advance", "arrears"):
        stream["a_year"] = one_of(draw, 1, 12, 4, 2, "premium_frequency", "annuity_frequency")
        if stream["while"] == "alive" and chance(draw, 3):
            stream["guarantee"] = one_of(draw, 5, "guarantee_years", 0, 10, 2.5)
        elif stream["while"] == "alive" and "to" in stream and chance(draw, 3):
            # For life, the two differ in where the last, incomplete year of the formula ends; nobody is left in it.
            stream["payments"] = one_of(draw, "Woolhouse 2", "Woolhouse 3")
    _shape(draw, stream)
    if pair:
        _on_two(draw, stream)
    return stream


def _on_two(draw: Draw, stream: dict[str, Any]) -> None:
    stream.pop("payments", None)
    if stream.get("while") == "alive":
        stream["while"] = one_of(draw, "both", "either", "first", "second", "first only", "second only")
    if stream.get("on") == "death":
        stream["on"] = one_of(draw, "first death", "second death", "death of first", "death of second")


def _shape(draw: Draw, stream: dict[str, Any]) -> None:
    if chance(draw, 3):
        stream["pattern"] = draw(patterns())
    if chance(draw, 3):
        stream["increase"] = {"rate": one_of(draw, 0.03, "escalation", 0.0, -0.02)}
        if chance(draw, 2):
            stream["increase"]["kind"] = "simple"
        if chance(draw, 2):
            stream["increase"] |= draw(calendars())
            if "index" in stream["increase"]:
                del stream["increase"]["rate"]
    by_calendar = stream.get("increase", {}).keys() & {"index", "month", "amount"}
    if "to" in stream and not by_calendar and chance(draw, 4):
        stream["decrease"] = one_of(draw, "yearly", "monthly")
        if chance(draw, 3):
            stream["decrease"] = {"loan": one_of(draw, 0.05, "escalation", 0.0), "instalments": stream["decrease"]}
    if chance(draw, 3):
        stream["clock"] = "commencement"


@st.composite
def calendars(draw: Draw) -> dict[str, Any]:
    """What makes an increase one by calendar time."""
    made: dict[str, Any] = {}
    if chance(draw, 2):
        made["index"] = one_of(draw, "prices", "wages")
        made |= one_of(draw, {}, {"cap": 0.025}, {"floor": 0.0, "cap": 0.05}, {"share": 0.5, "plus": 0.01})
    elif chance(draw, 2):
        made["amount"] = one_of(draw, "at the valuation date", "at its start")
    if chance(draw, 2):
        made["month"] = one_of(draw, 1, 4, 7, 11, 12)
    return made


@st.composite
def patterns(draw: Draw) -> list[dict[str, Any]]:
    pieces: list[dict[str, Any]] = [
        {"years": one_of(draw, 1, 2, 5, 11), "share": one_of(draw, 0.5, 0.0, 1.0, 1.5)}
        for _ in range(draw(st.integers(0, 3)))
    ]
    return pieces if pieces and chance(draw, 2) else [*pieces, {"share": one_of(draw, 0.8, 0.0, 1.0)}]


@st.composite
def shares_of(draw: Draw, name: str, base: str) -> dict[str, Any]:
    stream: dict[str, Any] = {"name": name, "of": base, "share": one_of(draw, 0.25, 1.0, 0.0)}
    if not chance(draw, 3):
        stream["kind"] = one_of(draw, "commission", "expense", "benefit", "premium")
    if chance(draw, 3):
        stream["direction"] = one_of(draw, "out", "in")
    if chance(draw, 2):
        stream["pattern"] = draw(patterns())
    if chance(draw, 3):
        stream["clock"] = "commencement"
    return stream


def _looking_back(draw: Draw, stream: dict[str, Any], others: list[dict[str, Any]], pair: bool) -> None:
    """A benefit that gives payments back, or is what they leave of an amount, where the design allows that."""
    if stream.get("paid") != "once" and "on" not in stream:
        return
    bases = [one for one in others if "on" not in one and not one.keys() & {"returns", "less", "proportion"}]
    if not bases or not chance(draw, 2):
        return
    kept = {key: stream[key] for key in stream if key not in ("pattern", "increase", "decrease", "clock")}
    name = one_of(draw, *(one["name"] for one in bases))
    if "on" in stream and chance(draw, 4):
        made = {**kept, "proportion": name}
        del made["amount"]
    elif chance(draw, 3):
        made = {**kept, "less": name, "amount": one_of(draw, 1500.0, "single_premium", "sum_assured")}
    else:
        made = {**kept, "returns": {"stream": name, "interest": one_of(draw, 0.0, 0.03, "escalation")}}
        del made["amount"]
    states = "two lives" if pair else "one life"
    try:
        Design.model_validate({"code": "A", "states": states, "stream": [made, *others]})
    except ValueError:
        return
    stream.clear()
    stream.update(made)


def _name_in(stream: dict[str, Any]) -> str | None:
    """Name of the stream that another one gives back or waits for."""
    start = stream.get("from")
    if isinstance(start, dict) and "after" in start:
        return str(start["after"])
    return stream["returns"]["stream"] if "returns" in stream else None


@st.composite
def designs(draw: Draw, code: str, step: str) -> Design:
    pair = chance(draw, 3)
    own = [draw(own_streams(f"own {number}", step, pair)) for number in range(draw(st.integers(1, 4)))]
    guaranteed = [stream["name"] for stream in own if "guarantee" in stream]
    for stream in own:
        if guaranteed and stream["name"] not in guaranteed and chance(draw, 2):
            stream["from"] = {"after": one_of(draw, *guaranteed)}
    for stream in own:
        _looking_back(draw, stream, [other for other in own if other is not stream], pair)
    for stream in own:
        if not chance(draw, 4):
            continue
        kept = {name for other in own for name in (other.get("less"), other.get("proportion"), _name_in(other))}
        if stream["name"] not in kept:
            stream["for"] = one_of(draw, {"status": "paid up"}, {"status": ["in force", "paid up"]}, {"sex": "F"})
    shared = [
        draw(shares_of(f"share {number}", one_of(draw, *(stream["name"] for stream in own))))
        for number in range(draw(st.integers(0, 2)))
    ]
    # A share may stand before what it is a share of.
    streams = [*shared, *own] if chance(draw, 3) else [*own, *shared]
    states = "two lives" if pair else "one life"
    return Design.model_validate({"code": code, "title": "invented", "states": states, "stream": streams})


# Bases


@st.composite
def conditions(draw: Draw) -> dict[str, Any]:
    return one_of(
        draw,
        {"sex": "F"},
        {"sex": ["F", "M"], "smoker": True},
        {"sum_assured": {"from": 1000, "to": 5000.0}},
        {"premium_frequency": [1, 4]},
        {"birth_date": {"from": date(1970, 1, 1)}},
        {"product": "B"},
        {"commencement_date": {"to": date(2020, 2, 29)}, "product": ["A", "B"]},
    )


@st.composite
def ruled(
    draw: Draw,
    rules: st.SearchStrategy[dict[str, Any]],
    more: st.SearchStrategy[dict[str, Any]] = st.nothing(),  # noqa: B008
) -> list[dict[str, Any]]:
    """Some rules; the last is nearly always for everybody. more: conditions that this part knows beside others."""
    made = [{**draw(rules), "for": draw(conditions() | more)} for _ in range(draw(st.integers(0, 2)))]
    last = draw(rules)
    return [*made, {**last, "for": draw(conditions())} if chance(draw, 12) else last]


@st.composite
def laws(draw: Draw) -> dict[str, Any]:
    name = one_of(draw, "Makeham", "Gompertz", "de Moivre")
    if name == "de Moivre":
        return {"law": name, "omega": one_of(draw, 100, 107.5, 90.25)}
    law: dict[str, Any] = {"law": name, "B": one_of(draw, 2.7e-6, 3e-5), "c": one_of(draw, 1.124, 1.1)}
    if name == "Makeham":
        law["A"] = one_of(draw, 0.00022, 0.0007)
    if chance(draw, 2):
        law["select"] = {"factor": one_of(draw, 0.9, 0.5), "years": one_of(draw, 2, 5)}
    if chance(draw, 3):
        law["last_age"] = one_of(draw, 110, 99)
    if chance(draw, 6):
        law["first_age"] = 18
    return law


@st.composite
def mortality_rules(draw: Draw, exact: bool) -> dict[str, Any]:
    table: Any = draw(laws()) if chance(draw, 2) else one_of(draw, "closed.csv", "open.csv")
    if not exact and chance(draw, 3):
        by = one_of(draw, "entry age", "attained age")
        table = {"file": one_of(draw, "select_closed.csv", "select_open.csv"), "select_by": by}
    rule: dict[str, Any] = {"table": table, "close": not chance(draw, 3)}
    if chance(draw, 3):
        rule["multiple"] = 100 if chance(draw, 12) else one_of(draw, 0.8, 0.0, 1.0, 3)
    if chance(draw, 3):
        rule["added_years"] = one_of(draw, 5, -3, 0, 20)
    if chance(draw, 3):
        rule["improvement"] = draw(improvements())
    if chance(draw, 4):
        rule["extra"] = 1.0 if chance(draw, 12) else one_of(draw, 0.002, 0.0, 0.1)
    return rule


@st.composite
def improvements(draw: Draw) -> dict[str, Any]:
    if chance(draw, 4):
        return {"table": "reducing.csv", "base_year": 2018, "holds": "reduction factors"}
    made: dict[str, Any] = {"base_year": one_of(draw, 2018, 2015, 2030)}
    made |= one_of(draw, {"table": "improving.csv"}, {"table": "improving_2d.csv"}, {"rate": 0.012}, {"rate": -0.01})
    if chance(draw, 3):
        made["multiple"] = one_of(draw, 0.5, 2.0, 0.0)
    if chance(draw, 2):
        made["long_term"] = {"rate": 0.0125, "years": one_of(draw, 1, 20)}
        if chance(draw, 2):
            made["long_term"]["from"] = one_of(draw, 2021, 2025)
    return made


@st.composite
def lapse_rules(draw: Draw) -> dict[str, Any]:
    rule: dict[str, Any] = {"rates": one_of(draw, [0.1, 0.05], [0.02], [0.3, 0.0, 0.1])}
    if chance(draw, 12):
        rule = {"rates": [0.05, 0.1, 0.2, 1.0]}
    if chance(draw, 4):
        rule = {"table": "leaving.csv"}
    if chance(draw, 4):
        rule["multiple"] = 6 if chance(draw, 6) else one_of(draw, 0.5, 0.0)
    if chance(draw, 3):
        rule["until"] = one_of(draw, "premium_years", 10, "deferral_years", 4.25, 2.4)
    return rule


@st.composite
def interest_rules(draw: Draw) -> dict[str, Any]:
    return one_of(
        draw,
        {"flat": 0.04},
        {"flat": 0.0},
        {"flat": -0.01},
        {"forward": [0.01, 0.05, 0.02, 0.03]},
        {"forward": [0.03]},
        {"spot": {"1": 0.01, "2.5": 0.03, "10": 0.02}},
        {"svensson": {"beta0": 0.03, "beta1": -0.02, "beta2": 0.01, "beta3": 0.015, "tau1": 1.7, "tau2": 9.5}},
        {"svensson": {"beta0": 0.02, "beta1": 0.01, "tau1": 3.0, "compounding": "continuous"}},
        {"smith_wilson": {"spot": "spot.csv", "ultimate": 0.034, "convergence": 70.0}},
        {"smith_wilson": {"spot": {"1": 0.01, "20": 0.03}, "ultimate": 0.042, "alpha": 0.12}},
        {"spot": {"0.25": 0.05}},
        {"spot": "spot.csv"},
    )


@st.composite
def expenses(draw: Draw, number: int) -> dict[str, Any]:
    per = one_of(draw, "policy", "premium", "benefit", "claim")
    first, later = one_of(draw, (25.0, 30.0), (0.5, 0.02), (0.0, 7.0), (10.0, 0.0))
    item: dict[str, Any] = {"name": f"item {number}", "per": per}
    if per in ("policy", "claim") and not chance(draw, 3):
        item["inflation"] = {
            "rate": one_of(draw, 0.025, -0.01),
            "from": one_of(draw, date(2026, 1, 1), date(2031, 6, 30)),
        }
    if per == "policy":
        item["a_year"] = one_of(draw, 12, 4, 1, 2)
    item["rule"] = draw(ruled(st.just({"first_year": first, "later_years": later})))
    return item


@st.composite
def bases(draw: Draw, folder: Path, step: str) -> Basis:
    age = one_of(draw, "exact", "last birthday", "nearest birthday", "next birthday")
    document: dict[str, Any] = {
        "mortality": {
            "age": age,
            "fractions": one_of(draw, "constant force", "uniform deaths", "Balducci"),
            "rule": draw(ruled(mortality_rules(age == "exact"), st.just({"life": "second"}))),
            "common_shock": one_of(draw, 0.0, 0.001),
        },
        "interest": {"rule": draw(ruled(interest_rules()))},
        "expense": [draw(expenses(number)) for number in range(draw(st.integers(0, 3)))],
        "index": [
            {"name": "wages", "flat": one_of(draw, 0.02, -0.01)},
            {"name": "prices", "years": {"2027": 0.01, "2028": -0.02, "2029": 0.06, "2030": 0.03}},
        ],
        "claims": {
            "paid": one_of(draw, "end of step", "middle of step", {"delay_months": one_of(draw, 2.5, 0, 1, 14)})
        },
    }
    if not chance(draw, 3):
        timing = one_of(draw, "each step", "anniversaries")
        dependent = (timing == "each step" or step == "year") and chance(draw, 2)
        competing = "dependent rates" if dependent else "lapses at the end"
        document["lapse"] = {"timing": timing, "competing": competing, "rule": draw(ruled(lapse_rules()))}
    return prepare_basis(document, folder)


# Policies


def on_day(year: int, month: int, day: int) -> date:
    return date(year, month, min(day, monthrange(year, month)[1]))


@st.composite
def policies(draw: Draw, number: int, codes: list[str], today: date) -> dict[str, Any]:
    months = one_of(draw, 12, 0, 120, 24, 60) if chance(draw, 3) else draw(st.integers(0, 150))
    year, month = divmod(12 * today.year + today.month - 1 - months, 12)
    day = one_of(draw, today.day, 31, 1, 30, 29, 28) if chance(draw, 2) else draw(st.integers(1, 31))
    commenced = min(today, on_day(year, month + 1, day))
    age = draw(st.integers(18, 80))
    born = date.fromordinal(commenced.toordinal() - draw(st.integers(0, 366)))
    if chance(draw, 6):
        # The birthday is the day of commencement, some whole months from it, or on a leap day.
        born = one_of(draw, commenced, date(2020, 2, 29), on_day(commenced.year, 1 + number % 12, commenced.day))
    born = on_day(born.year - age, born.month, born.day)
    policy: dict[str, Any] = {
        "policy_id": f"Q{number}",
        "product": one_of(draw, *codes),
        "status": one_of(draw, "in force", "paid up"),
        "birth_date": min(born, commenced),
        "commencement_date": commenced,
        "sex": one_of(draw, "F", "M"),
        "lives": one_of(draw, "both", "first", "second") if not chance(draw, 12) else "none",
        "second_birth_date": on_day(commenced.year - draw(st.integers(18, 70)), 1 + number % 12, commenced.day),
        "second_sex": one_of(draw, "M", "F", None),
        "smoker": draw(st.booleans()),
        "term_years": one_of(draw, 20.0, 25.0, 35.0, 10.0, 26.5),
        "premium_years": one_of(draw, 20.0, 10.0, 5.0, 30.0),
        "deferral_years": one_of(draw, 0.0, 5.0, 9.0, 1.25),
        "guarantee_years": one_of(draw, 0.0, 5.0, 12.0),
        "premium_frequency": one_of(draw, 1, 12, 4, 2),
        "annuity_frequency": one_of(draw, 12, 1, 2, 4),
        "escalation": one_of(draw, 0.0, 0.03, -0.05),
        "premium_pa": one_of(draw, 120.0, 1234.56, 0.0),
        "single_premium": one_of(draw, 10_000.0, 77.7),
        "sum_assured": one_of(draw, 1_000.0, 5_000.0, 99_999.99),
        "annuity_pa": one_of(draw, 600.0, 12_000.0),
        "loading": one_of(draw, 3.0, 0.0),
    }
    if chance(draw, 12):
        _spoil(draw, policy, today)
    return policy


def _spoil(draw: Draw, policy: dict[str, Any], today: date) -> None:
    column, value = one_of(
        draw,
        *((name, None) for name in ("birth_date", "commencement_date", "term_years", "premium_pa", "deferral_years")),
        *((name, None) for name in ("sex", "smoker", "sum_assured", "escalation", "premium_years")),
        ("premium_frequency", 3),
        ("annuity_frequency", None),
        ("sum_assured", -1.0),
        ("loading", float("nan")),
        ("term_years", 10.3),
        ("premium_years", 7.77),
        ("guarantee_years", 1 / 12),
        ("commencement_date", date.fromordinal(today.toordinal() + 1)),
        ("birth_date", date.fromordinal(today.toordinal() + 1)),
        ("birth_date", date(today.year - 119, 3, 1)),
        ("birth_date", date(today.year - 3, 3, 1)),
        ("guarantee_years", None),
        ("lives", "all"),
        ("lives", None),
        ("second_birth_date", None),
    )
    policy[column] = value


@st.composite
def examples(draw: Draw, folder: Path, most: int = 20) -> Example:
    """One to three designs, a basis, settings, and up to ``most`` policies."""
    step, due = one_of(draw, "month", "year"), one_of(draw, "settled", "outstanding")
    today = one_of(draw, *DATES) if chance(draw, 2) else draw(st.dates(date(2026, 1, 1), date(2029, 12, 31)))
    codes = ["A", "B", "C"][: draw(st.integers(1, 3))]
    made = [draw(designs(code, step)) for code in codes]
    basis = draw(bases(folder, step))
    # A fixed number of policies: their cost is small beside that of the rest, and each is another chance.
    rows = [draw(policies(number, codes, today)) for number in range(most)]
    columns = {name: pa.array([row[name] for row in rows], kind) for name, kind in COLUMNS.items()}
    return Example(made, basis, Settings(today, step, due, 2), pa.table(columns))
