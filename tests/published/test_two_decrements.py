"""Deaths and withdrawals together: one contract on one life with lapses, valued by engine and plain twin.

An asset share is the amount for those left at the end that makes the value of the contract nothing at the start.
The questions give dependent rates of a year with withdrawals at its end; of those alive then, the share that
withdraws is w / (1 - q), which is what the basis states.
"""

from __future__ import annotations

from datetime import date
from math import exp
from pathlib import Path
from typing import Any

import pyarrow as pa
import pytest
from citations import cited
from contracts import ILLUSTRATIVE, annuity, insurance, nearest_is_key, once, premium, printed

import projection
from assumptions.laws import Law

COMMENCED = date(2020, 1, 1)
SCALE = 1e6
Streams = list[dict[str, Any]]


def reserve(streams: Streams, table: Any, i: float, lapse: dict[str, Any], age: int = 40, step: Any = "year") -> float:
    """Value at commencement, payments due on it still to come."""
    basis = {
        "mortality": {"age": "last birthday", "rule": [{"table": table, "close": True}]},
        "lapse": lapse,
        "interest": {"rule": [{"flat": i}]},
    }
    named = [{"name": f"stream {place}", **stream} for place, stream in enumerate(streams)]
    scaled = [one if "of" in one else {**one, "amount": SCALE * one["amount"]} for one in named]
    columns = {"policy_id": "P1", "product": "TWO", "status": "in force", "commencement_date": COMMENCED}
    policy = {**columns, "birth_date": date(COMMENCED.year - age, 1, 1)}
    design = {"code": "TWO", "stream": scaled}
    found = projection.value(
        pa.Table.from_pylist([policy]), design, basis, COMMENCED, step=step, due="outstanding", decimals=4
    )
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    return float(found.policies["reserve"].to_pylist()[0]) / SCALE


def withdrawals(q: float, *dependent: float) -> dict[str, Any]:
    """Lapses from the dependent rate of the first year, and later rates as they stand."""
    return {"rule": [{"rates": [dependent[0] / (1 - q), *dependent[1:]]}]}


def cash_value(amount: float) -> dict[str, Any]:
    """An amount on withdrawal at the end of the first year."""
    return {"direction": "out", "amount": amount, "on": "lapse", "to": 1}


def loaded(years: int, share: float, amount: float = 1.0) -> Streams:
    """A yearly premium, and the expenses that are a share of it."""
    return [
        {"name": "premium", **premium(years, amount)},
        {"name": "loading", "kind": "expense", "direction": "out", "of": "premium", "share": share},
    ]


def yearly_rates(folder: Path, *rates: float) -> str:
    """A table of rates from 40 on."""
    path = folder / "rates.csv"
    path.write_text("age,rate\n" + "".join(f"{40 + place},{rate!r}\n" for place, rate in enumerate(rates)))
    return str(path)


@cited("B18")
def test_gross_premium_from_an_asset_share(case: str) -> None:
    lapse = withdrawals(Law.model_validate(ILLUSTRATIVE).rate(40, 0), 0.2, 0.0)
    costs = {**annuity(0, 2, 1.5), "kind": "expense"}
    outgo = reserve([insurance(0, 2, 1000), cash_value(2.93), once(2, 24), costs], ILLUSTRATIVE, 0.06, lapse)
    income = -reserve(loaded(2, 0.1), ILLUSTRATIVE, 0.06, lapse)
    assert nearest_is_key(case, outgo / income, "G")


@cited("B19")
def test_interest_of_one_step_of_an_asset_share(case: str, tmp_path: Path) -> None:
    figures, lapse = printed(case), withdrawals(0.09, 0.26)
    table = yearly_rates(tmp_path, 0.09, 0.0)
    begun = {**once(0, 396.63), "direction": "in"}
    start = [begun, *loaded(1, 0.05, 281.77), {**once(0, 7.0), "kind": "expense"}]
    # Those left after the withdrawals at the end of the year: a payment in advance of the next.
    end = [insurance(0, 1, 1000), cash_value(572.12), annuity(1, 2, 694.5)]
    assert -reserve(start, table, 0.0, lapse) == pytest.approx(figures["begin"], abs=0.00005)
    assert reserve(end, table, 0.0, lapse) == pytest.approx(figures["end"], abs=0.00005)
    low, high = (reserve([*start, *end], table, figures["i"] + half, lapse) for half in (-5e-7, 5e-7))
    assert low > 0 > high  # nothing is left over at a rate that rounds to the printed one


@cited("B20")
def test_asset_share_after_a_year(case: str, tmp_path: Path) -> None:
    table, lapse = yearly_rates(tmp_path, 0.02, 0.0), withdrawals(0.02, 0.18)
    held = [{**once(0, 1600), "direction": "in"}, *loaded(1, 0.04, 200), {**once(0, 70), "kind": "expense"}]
    left = -reserve([*held, insurance(0, 1, 10_000), cash_value(1700)], table, 0.05, lapse)
    share = reserve([annuity(1, 2)], table, 0.05, lapse)
    assert left / share == pytest.approx(printed(case)["AS11"], abs=0.0005)


@cited("D03")
def test_death_before_any_disability(case: str) -> None:
    # Nobody recovers, and what follows disability is not asked: it is a second way of leaving, in small steps with
    # each decrement uniform in its single table. A force of 0.02 that does not depend on age.
    law = {"law": "Makeham", "A": 0.02, "B": 1e-300, "c": 1.05}
    lapse = {"competing": "dependent rates", "rule": [{"rates": [1 - exp(-0.06)]}]}
    found = reserve([insurance(0, 5)], law, 0.0, lapse, step="month")
    assert nearest_is_key(case, found, "p")
    # In closed form 0.02 / 0.08 of those who leave; uniform within a month instead of exponential moves the share of
    # the deaths by some (0.06 / 12)^2 / 12 of itself.
    assert found == pytest.approx(0.25 * (1 - exp(-0.4)), abs=2e-7)
