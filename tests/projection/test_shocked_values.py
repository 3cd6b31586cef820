"""Values on shocked bases: closed forms, identities, bases edited by hand, and all shocks in one pass."""

from __future__ import annotations

import math
import tomllib
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pytest
from plain_cases import basis, constant, design, stream, value

import projection
from assumptions.basis import Basis, prepare_basis
from assumptions.shock_sets import expanded
from assumptions.shocking import shocked
from assumptions.shocks import Shock
from portfolios.demo_office import write_office
from portfolios.extract import open_extract
from projection.documents import read_basis, read_designs, read_shocks
from projection.sensitivity import Sensitivity, value_shocks
from projection.settings import Settings

pytestmark = pytest.mark.compiled
"""Whole offices: without compilation they take minutes."""

TODAY = date(2026, 11, 30)
ON = date(2026, 3, 10)
CERTAIN = design(stream("annuity", 1.0, certain=True, paid="arrears", start=0, to=20, a_year=1))
LIFE = design(stream("annuity", 1.0, paid="arrears", start=0, to=3, a_year=1))


def after(held: Basis, *changes: dict[str, Any], on: date = ON) -> Basis:
    return shocked(held, Shock.model_validate({"change": list(changes)}), on)


def test_an_annuity_certain_at_a_shifted_rate() -> None:
    """a_n = (1 - v^n) / i at the shifted rate, and da/di = -v (Ia)_n with (Ia)_n = (a-due_n - n v^n) / i."""
    shift = {"what": "interest", "how": "absolute", "amount": 0.01}
    made = value(CERTAIN, after(basis(), shift)).reserve
    assert made == pytest.approx((1 - 1.05**-20) / 0.05, rel=1e-13)
    small = 1e-5
    up, down = (value(CERTAIN, after(basis(), {**shift, "amount": one})).reserve for one in (small, -small))
    v = 1 / 1.04
    increasing = ((1 - v**20) / (1 - v) - 20 * v**20) / 0.04
    assert (up - down) / (2 * small) == pytest.approx(-v * increasing, rel=1e-8)


def test_tents_add_up_to_the_parallel_shift_for_small_shifts() -> None:
    """To first order values add up as the shifts do; the rest is of the second order."""
    base, small = value(CERTAIN, basis()).reserve, 1e-5
    years = [1, 2, 3, 5, 7, 10, 15, 20, 30, 40]
    changes = []
    for place, year in enumerate(years):
        beside = {str(other): small if other == year else 0.0 for other in years[max(0, place - 1) : place + 2]}
        changes.append(value(CERTAIN, after(basis(), {"what": "interest", "how": "absolute", "by_maturity": beside})))
    parallel = value(CERTAIN, after(basis(), {"what": "interest", "how": "absolute", "amount": small})).reserve - base
    assert sum(one.reserve - base for one in changes) == pytest.approx(parallel, rel=1e-4)


def test_an_extra_for_twelve_months_by_hand() -> None:
    """From commencement: years of the rates and of the window are the same, and only the first one is changed."""
    held = basis(constant(0.01), age="last birthday")
    extra = {"what": "mortality", "how": "absolute", "amount": 0.0015, "for_months": 12}
    made = value(LIFE, after(held, extra)).reserve
    first = (1 - 0.0115) / 1.04
    assert made == pytest.approx(first * (1 + 0.99 / 1.04 + (0.99 / 1.04) ** 2), rel=1e-13)


def test_disability_like_two_windows_follow_each_other() -> None:
    """35 % more for 12 months and 25 % more after: every year is in one of the two windows."""
    held = basis(constant(0.01), age="last birthday")
    for_a_year = {"what": "mortality", "how": "relative", "amount": 0.35, "for_months": 12}
    later = {"what": "mortality", "how": "relative", "amount": 0.25, "from_months": 12}
    made = value(LIFE, after(held, for_a_year, later)).reserve
    first, next_ = (1 - 0.0135) / 1.04, (1 - 0.0125) / 1.04
    assert made == pytest.approx(first * (1 + next_ + next_**2), rel=1e-13)


def test_items_that_add_up_do_not_interact() -> None:
    one, two = ({"what": "expenses", "how": "relative", "amount": 0.1, "items": [name]} for name in ("a", "b"))
    item = {"per": "policy", "a_year": 1, "rule": [{"first_year": 5.0, "later_years": 3.0}]}
    held = basis(expense=[{"name": name, **item} for name in ("a", "b")])
    base, first, second, both = (
        value(LIFE, made).reserve for made in (held, after(held, one), after(held, two), after(held, one, two))
    )
    assert both - base == pytest.approx((first - base) + (second - base), rel=1e-12)
    assert first > base


def test_mortality_and_interest_of_a_pure_endowment_multiply() -> None:
    """With survival p and discount v, the interaction of two shocks is (p' - p)(v' - v)."""
    held = basis(constant(0.01), age="last birthday")
    contract = design(stream("endowment", 1.0, paid="once", start=10))
    deaths = {"what": "mortality", "how": "relative", "amount": -0.2}
    rates = {"what": "interest", "how": "absolute", "amount": -0.01}
    base, p, v, both = (
        value(contract, made).reserve
        for made in (held, after(held, deaths), after(held, rates), after(held, deaths, rates))
    )
    expected = (0.992**10 - 0.99**10) * (1.03**-10 - 1.04**-10)
    assert both - p - v + base == pytest.approx(expected, rel=1e-9)


# The invented office


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, 600, 5)
    return place


def run(office: Path, held: Basis, shocks: list[Any], **keys: Any) -> Sensitivity:
    extract, designs = open_extract(office / "inforce"), read_designs(office / "designs")
    return value_shocks(extract, designs, held, Settings(TODAY), shocks, **keys)


def reserves(office: Path, held: Basis) -> pa.Table:
    return projection.value(str(office / "inforce"), office / "designs", held, TODAY, sample=4).policies


def best_estimate(office: Path, edit: Any = None) -> Basis:
    path = office / "bases" / "best_estimate.toml"
    content = tomllib.loads(path.read_text("utf-8"))
    if edit is not None:
        edit(content)
    return prepare_basis(content, path.parent)


def scaled(part: str, keys: tuple[str, ...], factor: float) -> Any:
    def edit(content: dict[str, Any]) -> None:
        lists = [item["rule"] for item in content["expense"]] if part == "expense" else [content[part]["rule"]]
        for rule in (rule for rules in lists for rule in rules):
            for key in keys:
                rule[key] = factor * rule.get(key, 1.0 if key == "multiple" else 0.0)

    return edit


@pytest.mark.parametrize(
    ("change", "edit"),
    [
        ({"what": "mortality", "how": "relative", "amount": -0.2}, scaled("mortality", ("multiple", "extra"), 0.8)),
        ({"what": "lapse", "how": "relative", "amount": 0.5}, scaled("lapse", ("multiple",), 1.5)),
        ({"what": "expenses", "how": "relative", "amount": 0.1}, scaled("expense", ("first_year", "later_years"), 1.1)),
    ],
    ids=lambda one: one["what"] if isinstance(one, dict) else "",
)
def test_the_office_on_a_basis_edited_by_hand(office: Path, change: dict[str, Any], edit: Any) -> None:
    held = best_estimate(office)
    made, edited = reserves(office, after(held, change, on=TODAY)), reserves(office, best_estimate(office, edit))
    assert made["policy_id"].equals(edited["policy_id"])
    # Rounded to cents: what differs in the last bit may fall on either side of half a cent.
    difference = np.abs(made["reserve"].to_numpy() - edited["reserve"].to_numpy())
    assert difference.max() <= 0.011
    assert (difference == 0).mean() > 0.99
    assert not made["reserve"].equals(reserves(office, held)["reserve"])


def test_all_shocks_in_one_pass_are_those_valued_one_by_one(office: Path) -> None:
    held = read_basis(office / "bases" / "best_estimate.toml")
    women = {"what": "mortality", "how": "relative", "amount": 0.5, "for": {"sex": "F"}}
    stresses = expanded(read_shocks("eu-life-2015"))
    shocks = [*stresses, Shock(title="nothing"), Shock.model_validate({"change": [women]})]
    taken: list[tuple[pa.Array, Any, Any, Any]] = []
    groups = ("product", "sex")
    found = run(office, held, shocks, sink=lambda *parts: taken.append(parts), chunk_rows=250, group_by=groups)
    table = found.rows
    assert table.column_names == ["shock", "title", *groups, "policies", "base", "shocked", "change", "per_cent"]
    assert found.not_valued == (0,) * len(shocks)
    ids = pa.concat_arrays([parts[0] for parts in taken]).cast(pa.string())
    base, after_all = np.concatenate([p[2] for p in taken]), np.concatenate([p[3] for p in taken], axis=1)
    alone = reserves(office, held)
    assert ids.equals(alone["policy_id"].combine_chunks().cast(pa.string()))
    np.testing.assert_array_equal(base / 100, alone["reserve"].to_numpy())
    for number, (shock, made) in enumerate(zip(shocks, found.bases, strict=True)):
        np.testing.assert_array_equal(after_all[number] / 100, reserves(office, made)["reserve"].to_numpy())
        mine = table.filter(pc.equal(table["title"], shock.name_in_words))
        assert sum(round(100 * x) for x in mine["shocked"].to_pylist()) == after_all[number].sum()
        assert sum(mine["policies"].to_pylist()) == len(base)
    nothing = [shock.title for shock in shocks].index("nothing")
    assert found.bases[nothing] is held
    np.testing.assert_array_equal(after_all[nothing], base)
    men = table.filter(pc.and_(pc.equal(table["title"], shocks[-1].name_in_words),
                                       pc.equal(table["sex"], "M")))  # fmt: skip
    # On two lives the second life may be a woman.
    assert men.num_rows > 0
    assert math.isclose(men["per_cent"][0].as_py(), 100 * men["change"][0].as_py() / men["base"][0].as_py())


def test_two_items_may_part_from_the_same_inflation(office: Path) -> None:
    """A run stops where the plain twin disagrees with the engine on one of its sample."""
    path = office / "bases" / "best_estimate.toml"
    content = tomllib.loads(path.read_text("utf-8"))
    item = {"per": "policy", "rule": [{"first_year": 0.0, "later_years": 40.0}],
            "inflation": {"rate": 0.02, "from": date(2026, 1, 1)}}  # fmt: skip
    content["expense"] = [{"name": name, **item} for name in ("a", "b")]
    held = prepare_basis(content, path.parent)
    change = {"what": "inflation", "how": "absolute", "amount": 0.01}
    base, first, second = (reserves(office, basis)["reserve"].to_numpy() for basis in (
        held, after(held, {**change, "items": ["b"]}, on=TODAY), after(held, change, on=TODAY)))  # fmt: skip
    np.testing.assert_allclose(second - base, 2 * (first - base), atol=0.021)
    assert (first > base).any()


def test_a_policy_that_a_shock_takes_out_is_counted(office: Path) -> None:
    held = best_estimate(office)
    nobody = Shock.model_validate({"change": [{"what": "mortality", "how": "replaced", "amount": 1.0,
                                               "calendar_years": {"to": 2026}}]})  # fmt: skip
    found = run(office, held, [nobody])
    alone = projection.value(str(office / "inforce"), office / "designs", found.bases[0], TODAY, sample=4)
    assert found.not_valued == (reserves(office, held).num_rows - alone.policies.num_rows,)
    assert found.not_valued[0] > 100
    assert sum(found.rows["policies"].to_pylist()) == alone.policies.num_rows


def test_the_package_takes_the_named_sets_along() -> None:
    root = Path(projection.__file__).parent.parent
    content = tomllib.loads((root / "pyproject.toml").read_text("utf-8"))
    assert "named_sets/*.toml" in content["tool"]["setuptools"]["package-data"]["assumptions"]
