"""Every form of assumption through a TOML document, against closed forms written out here.

Rates are constant where that gives a closed form: q a year of death, w of lapse, i of interest. Amounts, rates and
lives are invented.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest

import projection
from assumptions.basis import Basis
from projection.documents import read_basis

TODAY = date(2026, 1, 1)
SUM = 1e7
Q, W, INTEREST = 0.012, 0.06, 0.03

DOCUMENT = """
title = "Invented"
[mortality]
age = "last birthday"
fractions = "{fractions}"
[[mortality.rule]]
table = "flat.csv"
close = true
{rule}
[[interest.rule]]
{interest}
{more}
"""


def read(folder: Path, *, rule: str = "", interest: str = f"flat = {INTEREST}", more: str = "", **words: str) -> Basis:
    """A basis from a document with a table of one rate for all ages."""
    rows = [f"{age},{Q}" for age in range(20, 111)]
    (folder / "flat.csv").write_text("\n".join(["age,rate", *rows]) + "\n")
    path = folder / "basis.toml"
    fractions = words.get("fractions", "constant force")
    path.write_text(DOCUMENT.format(rule=rule, interest=interest, more=more, fractions=fractions))
    return read_basis(path)


def value(basis: Basis, stream: dict[str, Any], step: str = "month", age: int = 40) -> float:
    """Value of 1 of a stream on a policy that begins today, by engine and plain twin."""
    row = {
        "policy_id": "Q1", "product": "P", "status": "in force", "birth_date": date(TODAY.year - age, 1, 1),
        "commencement_date": TODAY,
    }  # fmt: skip
    design = {"code": "P", "stream": [{"name": "s", "direction": "out", "amount": SUM, **stream}]}
    found = projection.value(
        pa.Table.from_pylist([row]),
        [design],
        basis,
        TODAY,
        step=step,
        due="outstanding",
        sample=1,  # type: ignore[arg-type]
    )
    assert found.exceptions.num_rows == 0
    assert found.outcome.sample.policies == 1
    return float(found.policies["reserve"][0].as_py()) / SUM


DEATH = {"on": "death", "to": 10}
ALIVE = {"while": "alive", "from": 10, "paid": "once"}


def by_steps(steps: int, later: float, lapse: float = 0.0, dependent: bool = False, yearly: bool = False) -> float:
    """Value of 1 on death within 10 years, paid ``later`` years after the start of each step; lapses as stated.

    yearly: lapses at anniversaries only.
    """
    die, stay = 1 - (1 - Q) ** (1 / steps), (1 - lapse) ** (1 / steps)
    total, alive, held = 0.0, 1.0, 1.0
    for n in range(10 * steps):
        weight = held * (1 + stay) / 2 if dependent else held
        total += alive * die * weight * (1 + INTEREST) ** -(n / steps + later)
        alive *= 1 - die
        held *= (1.0 if (n + 1) % steps else stay**steps) if yearly else stay
    return total


@pytest.mark.parametrize(("step", "steps"), [("month", 12), ("year", 1)])
@pytest.mark.parametrize(
    ("paid", "later"), [('"end of step"', 1.0), ('"middle of step"', 0.5), ("{ delay_months = 3 }", None)]
)
def test_claims_at_the_end_in_the_middle_or_after_a_delay(
    tmp_path: Path, step: str, steps: int, paid: str, later: float | None
) -> None:
    after = 0.5 / steps + 3 / 12 if later is None else later / steps
    basis = read(tmp_path, more=f"[claims]\npaid = {paid}")
    assert value(basis, DEATH, step) == pytest.approx(by_steps(steps, after), abs=1e-8)


@pytest.mark.parametrize(("step", "steps"), [("month", 12), ("year", 1)])
@pytest.mark.parametrize("timing", ["each step", "anniversaries"])
@pytest.mark.parametrize("competing", ["lapses at the end", "dependent rates"])
def test_lapses_and_how_they_compete_with_deaths(
    tmp_path: Path, step: str, steps: int, timing: str, competing: str
) -> None:
    more = f'[lapse]\ntiming = "{timing}"\ncompeting = "{competing}"\n[[lapse.rule]]\nrates = [{W}]\n'
    dependent = competing == "dependent rates"
    if dependent and timing == "anniversaries" and steps == 12:
        with pytest.raises(projection.DocumentError, match="'dependent rates' spread lapses over the step"):
            value(read(tmp_path, more=more), DEATH, step)
        return
    basis = read(tmp_path, more=more)
    expected = by_steps(steps, 1 / steps, W, dependent, timing == "anniversaries")
    assert value(basis, DEATH, step) == pytest.approx(expected, abs=1e-8)
    # What is paid once comes before the lapses of its point: one lapse less. Spread lapses have all happened by then.
    left = (1 - W) ** (10 if dependent else 9 if timing == "anniversaries" or steps == 1 else 119 / 12)
    assert value(basis, ALIVE, step) == pytest.approx(left * ((1 - Q) / (1 + INTEREST)) ** 10, abs=1e-8)


def _by_age(age: int, year: int) -> float:
    return 0.01 if age < 45 else 0.03


def _by_year(age: int, year: int) -> float:
    return _by_age(age, year) + 0.001 * (min(year, 2030) - 2026)


def _convergent(age: int, year: int) -> float:
    """Improvement by the table to 2028, then in a straight line to 1 % in 2032."""
    share = min(1.0, max(0, year - 2028) / 4)
    return (1 - share) * _by_year(age, min(year, 2028)) + share * 0.01


IMPROVEMENTS: dict[str, tuple[str, Callable[[int, int], float]]] = {
    "one rate": ("rate = 0.02", lambda age, year: 0.02),
    "by age": ('table = "by_age.csv"', _by_age),
    "by age and year": ('table = "by_year.csv"', _by_year),
    "XTbML": ('table = "by_year.xml"', _by_year),
    "long term": ('table = "by_year.csv"\nlong_term = { rate = 0.01, years = 4, from = 2028 }', _convergent),
    "multiple": ('table = "by_age.csv"\nmultiple = 0.5', lambda age, year: _by_age(age, year) / 2),
}


def write_scales(folder: Path) -> None:
    """Scales by age, and by age and calendar year 2026 to 2030 as CSV and as XTbML."""
    ages = {age: 0.01 if age < 45 else 0.03 for age in range(30, 61)}
    (folder / "by_age.csv").write_text("\n".join(["age,rate", *(f"{age},{f}" for age, f in ages.items())]) + "\n")
    grid = {age: [f + 0.001 * n for n in range(5)] for age, f in ages.items()}
    lines = [",".join([str(age), *map(repr, row)]) for age, row in grid.items()]
    (folder / "by_year.csv").write_text("\n".join(["age,2026,2027,2028,2029,2030", *lines]) + "\n")
    rows = {age: "".join(f'<Y t="{2026 + n}">{f!r}</Y>' for n, f in enumerate(row)) for age, row in grid.items()}
    cells = "".join(f'<Axis t="{age}"><Axis>{row}</Axis></Axis>' for age, row in rows.items())
    axes = "".join(f'<AxisDef id="{name}"><AxisName>{name}</AxisName></AxisDef>' for name in ("Age", "Year"))
    (folder / "by_year.xml").write_text(
        '<XTbML><ContentClassification><ContentType tc="22">Projection Scale</ContentType></ContentClassification>'
        f"<Table><MetaData>{axes}</MetaData><Values>{cells}</Values></Table></XTbML>"
    )


@pytest.mark.parametrize("form", IMPROVEMENTS)
def test_improvement_followed_along_the_diagonal(tmp_path: Path, form: str) -> None:
    write_scales(tmp_path)
    keys, yearly = IMPROVEMENTS[form]
    basis = read(tmp_path, rule=f"[mortality.rule.improvement]\nbase_year = 2025\n{keys}")
    living = 1.0
    for n in range(10):
        age, year = 40 + n, 2026 + n
        living *= 1 - Q * math.prod(1 - yearly(age, one) for one in range(2026, year + 1))
    assert value(basis, ALIVE) == pytest.approx(living * (1 + INTEREST) ** -10, abs=1e-8)


NELSON_SIEGEL = "[interest.rule.svensson]\nbeta0 = 0.03\nbeta1 = -0.01\nbeta2 = 0.02\ntau1 = 2.0"
CURVES = {"Nelson-Siegel": NELSON_SIEGEL, "Svensson": f"{NELSON_SIEGEL}\nbeta3 = 0.01\ntau2 = 8.0"}


@pytest.mark.parametrize("form", CURVES)
def test_spot_rates_in_closed_form(tmp_path: Path, form: str) -> None:
    basis = read(tmp_path, interest=CURVES[form])
    last = 0.01 if form == "Svensson" else 0.0
    for t in (1, 7, 30):
        one, two = t / 2.0, t / 8.0
        mean = (1 - math.exp(-one)) / one
        spot = 0.03 - 0.01 * mean + 0.02 * (mean - math.exp(-one))
        spot += last * ((1 - math.exp(-two)) / two - math.exp(-two))
        certain = {"while": "certain", "from": t, "paid": "once"}
        assert value(basis, certain) == pytest.approx((1 + spot) ** -t, abs=1e-8)


SPOTS = {0.5: 0.021, 1: 0.0205, 2: 0.0198, 5: 0.0203, 10: 0.0231, 20: 0.0254}


@pytest.mark.parametrize("where", ["inline", "file"])
def test_smith_wilson_meets_the_spots_and_the_ultimate_rate(tmp_path: Path, where: str) -> None:
    rows = [f"{maturity},{rate}" for maturity, rate in SPOTS.items()]
    (tmp_path / "spots.csv").write_text("\n".join(["maturity,rate", *rows]) + "\n")
    inline = ", ".join(f'"{maturity}" = {rate}' for maturity, rate in SPOTS.items())
    spot = f"{{ {inline} }}" if where == "inline" else '"spots.csv"'
    keys = f"spot = {spot}\nultimate = 0.034\nconvergence = 60.0"
    basis = read(tmp_path, interest=f"[interest.rule.smith_wilson]\n{keys}")
    (curve,) = basis.curves
    for maturity, rate in SPOTS.items():
        price = (1 + rate) ** -maturity
        assert curve.factor(maturity) == pytest.approx(price, abs=1e-12)
        assert float(curve.factors(np.array([float(maturity)]))[0]) == pytest.approx(price, abs=1e-12)
        certain = {"while": "certain", "from": maturity, "paid": "once"}
        assert value(basis, certain) == pytest.approx(price, abs=1e-8)
    # By the time of convergence the forward intensity lies within 1 in 10,000 of the ultimate one, and not much nearer.
    near = (curve.integral(60 + 1e-4) - curve.integral(60 - 1e-4)) / 2e-4
    assert abs(near - math.log(1.034)) == pytest.approx(1e-4, abs=2e-6)


def test_a_rating_for_a_time(tmp_path: Path) -> None:
    read(tmp_path)
    row = {
        "policy_id": "Q1", "product": "P", "status": "in force", "birth_date": date(1986, 1, 1),
        "commencement_date": TODAY, "rating_multiple": 1.5, "rating_extra": 5.0, "rating_extra_years": 4.0,
    }  # fmt: skip
    design = {"code": "P", "stream": [{"name": "s", "direction": "out", "amount": SUM, **ALIVE}]}
    path = tmp_path / "basis.toml"
    path.write_text(path.read_text().replace("[mortality]", "[mortality]\nratings = true"))
    found = projection.value(pa.Table.from_pylist([row]), [design], read_basis(path), TODAY, sample=1)
    living = (1 - 1.5 * Q - 0.005) ** 4 * (1 - 1.5 * Q) ** 6
    expected = living * (1 + INTEREST) ** -10
    assert float(found.policies["reserve"][0].as_py()) / SUM == pytest.approx(expected, abs=1e-8)
