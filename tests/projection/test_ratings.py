"""Ratings of the policies against products of (1 - q) written out here, and against rules that say the same.

Rates and policies are invented; the expected values are the definition of survival.
"""

from __future__ import annotations

from datetime import date
from math import prod
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

import projection
from assumptions.basis import prepare_basis
from portfolios.designs import Design
from portfolios.extract import open_extract
from projection import ratings
from projection.documents import DocumentError
from projection.settings import Settings
from projection.sheet import convention_sheet
from projection.valuation import value_extract
from projection.working import working

SUM = 1e8
COMMENCED = date(2020, 1, 1)


def q(age: int) -> float:
    """Rates of an invented table from age 20, closed after age 100."""
    return min(0.5, 0.0005 + 0.00004 * 1.1**age)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A folder with the table, closed and open."""
    for name, last in (("closed", 1.0), ("open", q(100))):
        rows = [f"{age},{(q(age) if age < 100 else last)!r}" for age in range(20, 101)]
        (tmp_path / f"{name}.csv").write_text("\n".join(["age,rate", *rows]) + "\n")
    return tmp_path


def basis(folder: Path, age: str = "last birthday", fractions: str = "constant force", **rule: Any) -> Any:
    """A basis without interest that asks for ratings."""
    asked = rule.pop("ratings", True)
    rules = [{"table": "closed.csv", **rule}]
    return prepare_basis(
        {
            "title": "Invented basis",
            "mortality": {"age": age, "fractions": fractions, "ratings": asked, "rule": rules},
            "interest": {"rule": [{"flat": 0.0}]},
        },
        folder,
    )


def policy(age: int = 40, **more: Any) -> dict[str, Any]:
    """A policy on a life aged so many years at commencement."""
    return {
        "policy_id": "Q1", "product": "PURE", "status": "in force", "commencement_date": COMMENCED,
        "birth_date": date(COMMENCED.year - age, 1, 1), **more,
    }  # fmt: skip


def endowment(years: float) -> dict[str, Any]:
    """So much if the life lives then."""
    stream = {"name": "sum", "direction": "out", "amount": SUM, "while": "alive", "from": years, "paid": "once"}
    return {"code": "PURE", "title": "invented", "stream": [stream]}


def survival(years: float, assumed: Any, row: dict[str, Any], on: date = COMMENCED) -> float:
    """Probability to live to ``years`` after commencement, from a valuation by the engine and the plain twin."""
    found = projection.value(pa.Table.from_pylist([row]), [endowment(years)], assumed, on, sample=1)
    assert found.exceptions.num_rows == 0, found.exceptions.to_pylist()
    assert found.outcome.sample.policies == 1
    return float(found.policies["reserve"][0].as_py()) / SUM


def test_each_part_of_a_rating_holds_for_its_own_time(folder: Path) -> None:
    row = policy(
        rating_multiple=2.0, rating_multiple_years=3.0, rating_age=5, rating_age_years=6.0, rating_extra=4.0,
        rating_extra_years=1.0,
    )  # fmt: skip
    first = [2 * q(45) + 0.004, *(2 * q(45 + n) for n in (1, 2)), *(q(45 + n) for n in (3, 4, 5))]
    rates = [*first, *(q(40 + n) for n in range(6, 10))]
    assert survival(10, basis(folder), row) == pytest.approx(prod(1 - rate for rate in rates), abs=1e-10)
    # Half a year into the fourth year, at a constant force within it.
    on = date(2023, 7, 1)
    here = prod(1 - rate for rate in rates[:3]) * (1 - rates[3]) ** (6 / 12)
    there = prod(1 - rate for rate in rates)
    assert survival(10, basis(folder), row, on) == pytest.approx(there / here, abs=1e-10)


def test_order_of_multiple_improvement_and_extras(folder: Path) -> None:
    improving = {"rate": 0.02, "base_year": 2019}
    assumed = basis(folder, multiple=0.8, extra=0.001, improvement=improving)
    row = policy(rating_multiple=1.5, rating_age=2, rating_extra=3.0)
    rates = [1.5 * 0.8 * q(42 + n) * 0.98 ** (1 + n) + 0.001 + 0.003 for n in range(5)]
    assert survival(5, assumed, row) == pytest.approx(prod(1 - rate for rate in rates), abs=1e-10)


def test_a_rate_is_at_most_1_and_the_last_closed_age_is_certain(folder: Path) -> None:
    row = policy(90, rating_multiple=2.5, rating_age=5)
    rates = [min(1.0, 2.5 * q(95 + n)) for n in range(4)]
    assert survival(4, basis(folder), row) == pytest.approx(prod(1 - rate for rate in rates), abs=1e-10)
    # Aged 90 and treated as 95, nobody outlives the year of age 100, even with half of the rates.
    half = policy(90, rating_multiple=0.5, rating_age=5)
    assert survival(5, basis(folder), half) > 0
    assert survival(6, basis(folder), half) == 0


def test_exact_age_cuts_within_a_year_of_age(folder: Path) -> None:
    # Born half a year before a birthday at commencement: 184 of 366 days of the year of age have passed.
    row = {**policy(), "birth_date": date(1979, 7, 1), "rating_multiple": 3.0, "rating_multiple_years": 2.0}
    r = 184 / 366
    for fractions in ("constant force", "uniform deaths", "Balducci"):
        rated = [3 * q(40 + n) for n in range(5)]
        plain = [q(40 + n) for n in range(5)]

        def through(rates: list[float], years: float, fractions: str = fractions) -> float:
            """Survival from the start of the first year of age."""
            whole, part = int(years), years - int(years)
            last = rates[whole]
            share = {
                "constant force": (1 - last) ** part,
                "uniform deaths": 1 - part * last,
                "Balducci": (1 - last) / (1 - (1 - part) * last),
            }[fractions]
            return prod(1 - rate for rate in rates[:whole]) * share

        expected = through(rated, r + 2) / through(rated, r) * through(plain, r + 4) / through(plain, r + 2)
        assert survival(4, basis(folder, "exact", fractions), row) == pytest.approx(expected, abs=1e-10)
        # On a day before and a day after the rating ends.
        on = date(2021, 7, 1)
        here = through(rated, r + (18 / 12)) / through(rated, r)
        assert survival(4, basis(folder, "exact", fractions), row, on) == pytest.approx(expected / here, abs=1e-10)
        on, late = date(2023, 1, 1), through(plain, r + 4) / through(plain, r + 3)
        assert survival(4, basis(folder, "exact", fractions), row, on) == pytest.approx(late, abs=1e-10)


def test_a_rating_for_ever_is_a_rule_that_says_the_same(folder: Path) -> None:
    row = policy(rating_multiple=1.25, rating_age=-3, rating_extra=2.0)
    same = basis(folder, multiple=1.25, added_years=-3, extra=0.002)
    for years in (1, 7.5, 30):
        assert survival(years, basis(folder), row) == survival(years, same, policy(rating_age=None, rating_extra=0.0))


def test_ratings_that_change_nothing_leave_the_bits(folder: Path) -> None:
    rows = [policy(age, policy_id=f"Q{age}") for age in range(25, 60)]
    neutral = [
        {**row, "rating_multiple": [None, 1.0][n % 2], "rating_age": [0.0, None, 4.0][n % 3], "rating_age_years": 0.0,
         "rating_extra": [None, 0.0][n % 2]}
        for n, row in enumerate(rows)
    ]  # fmt: skip
    found = [
        projection.value(pa.Table.from_pylist(some), [endowment(20)], basis(folder, ratings=asked), COMMENCED)
        for some, asked in ((rows, False), (neutral, True), (neutral, False))
    ]
    assert found[0].policies.equals(found[1].policies)
    assert found[0].policies.equals(found[2].policies)
    assert found[1].outcome.counts == found[0].outcome.counts


def test_rows_are_shared_by_policies_with_the_same_rating(folder: Path) -> None:
    rows = [
        policy(40, policy_id=f"Q{n}", rating_multiple=[1.5, None, 2.0][n % 3], rating_extra=[None, 5.0][n % 2])
        for n in range(60)
    ]
    found = projection.value(pa.Table.from_pylist(rows), [endowment(20)], basis(folder), COMMENCED)
    assert found.outcome.counts["survival curves"] == 6


def test_the_second_life_has_a_rating_of_its_own(folder: Path) -> None:
    design = endowment(5)
    design["states"] = "two lives"
    row = policy(second_birth_date=date(1970, 1, 1), lives="both", rating_age=2, second_rating_multiple=3.0)

    def found(word: str, **more: Any) -> float:
        design["stream"][0]["while"] = word
        table = pa.Table.from_pylist([{**row, **more}])
        result = projection.value(table, [design], basis(folder), COMMENCED, due="outstanding", sample=1)
        assert result.exceptions.num_rows == 0, result.exceptions.to_pylist()
        return float(result.policies["reserve"][0].as_py()) / SUM

    first, second = prod(1 - q(42 + n) for n in range(5)), prod(1 - 3 * q(50 + n) for n in range(5))
    assert found("both") == pytest.approx(first * second, abs=1e-10)
    assert found("either") == pytest.approx(first + second - first * second, abs=1e-10)
    # After a death, the rating of the life that is left.
    assert found("either", lives="second") == pytest.approx(second, abs=1e-10)
    assert found("either", lives="first") == pytest.approx(first, abs=1e-10)


@pytest.mark.parametrize(
    ("column", "value", "reason", "rule"),
    [
        ("rating_multiple", -0.5, "amount negative", "must not be negative"),
        ("rating_multiple", 150.0, "amount out of range", "between 0 and 20 times the rate"),
        ("rating_age", 2.5, "number not whole", "whole number"),
        ("rating_age", -41.0, "amount out of range", "between -40 and 40 years"),
        ("rating_extra", float("inf"), "amount not a number", "finite"),
        ("rating_extra_years", 1.5, "number not whole", "whole number"),
        ("rating_age", 40.0, "age outside the table", "age at commencement"),
    ],
)
def test_bad_ratings_are_exceptions(folder: Path, column: str, value: float, reason: str, rule: str) -> None:
    years = {"rating_extra": 5.0} if column == "rating_extra_years" else {}
    rows = [policy(65, rating_multiple=1.0), policy(65, **{**years, column: value, "policy_id": "Q2"})]
    rows[0] |= {**dict.fromkeys(years, 1.0), column: None} if column != "rating_multiple" else {}
    found = projection.value(pa.Table.from_pylist(rows), [endowment(5)], basis(folder), COMMENCED)
    (row,) = found.exceptions.to_pylist()
    assert (row["policy_id"], row["reason"]) == ("Q2", reason)
    assert rule in row["rule"]
    assert row["field"] == (column if reason != "age outside the table" else "birth_date")


def test_a_table_that_ends_open_ends_earlier_for_added_years(folder: Path) -> None:
    assumed = basis(folder, table="open.csv")
    rows = [policy(70, policy_id="Q1", rating_age=None), policy(70, policy_id="Q2", rating_age=10.0)]
    for row in rows:
        row["rating_age_years"] = 12.0
    # Treated as 80 for 12 years and as 82 after them, 92 = 70 + 22 is inside the table of ages up to 100.
    found = projection.value(pa.Table.from_pylist(rows), [endowment(22)], assumed, COMMENCED)
    assert found.exceptions.num_rows == 0
    for row in rows:
        row["rating_age_years"] = None
    found = projection.value(pa.Table.from_pylist(rows), [endowment(22)], assumed, COMMENCED)
    assert [(row["policy_id"], row["reason"]) for row in found.exceptions.to_pylist()] == [
        ("Q2", "table ends too early")
    ]


@pytest.mark.parametrize(
    ("columns", "said"),
    [
        ({}, "none of the columns rating_multiple, rating_age, rating_extra"),
        ({"rating_extra": 1.0, "rating_age_years": 1.0}, "'rating_age_years' without 'rating_age'"),
        ({"rating_extra": 1.0, "rating_mulitple": 1.0}, "'rating_mulitple' is no rating known"),
    ],
)
def test_columns_that_do_not_give_ratings(folder: Path, columns: dict[str, float], said: str) -> None:
    with pytest.raises(DocumentError, match="Invented basis, mortality: key 'ratings' is true") as caught:
        projection.value(pa.Table.from_pylist([policy(**columns)]), [endowment(5)], basis(folder), COMMENCED)
    assert said in str(caught.value)


def test_the_sheet_and_the_working_say_it(folder: Path) -> None:
    settings = Settings(COMMENCED)
    for asked, words in ((True, "for the years that it states"), (False, "not used")):
        sheet = dict(convention_sheet(basis(folder, ratings=asked), settings))
        assert words in sheet["ratings of the policies"]
    row = policy(rating_multiple=2.0, rating_multiple_years=3.0, rating_extra=4.0, rating_extra_years=1.0)
    design = Design.model_validate(endowment(5))
    text = working(row, design, basis(folder), settings)
    assert "from year 0: 2 x, +0.004, age +0 years" in text
    assert "from year 1: 2 x, +0, age +0 years" in text
    assert "from year 3: standard" in text
    rates = [2 * q(40) + 0.004, 2 * q(41), 2 * q(42), q(43), q(44)]
    for year, rate in enumerate(rates):
        assert any(line.split() == [str(year), str(40 + year), f"{rate:.9f}"] for line in text.splitlines())


def test_chunks_and_threads_do_not_matter(folder: Path) -> None:
    rows = [
        policy(30 + n % 20, policy_id=f"Q{n}", rating_multiple=[1.5, None, 2.0][n % 3], rating_extra=[None, 5.0][n % 2])
        for n in range(200)
    ]
    design = Design.model_validate(endowment(20))
    tables = []
    for threads, size in ((1, 7), (2, 64), (2, 1000)):
        parts: list[pa.Table] = []
        value_extract(
            open_extract(pa.Table.from_pylist(rows)), [design], basis(folder), Settings(date(2024, 5, 17)),
            sink=parts.append, threads=threads, chunk_rows=size,
        )  # fmt: skip
        tables.append(pa.concat_tables(parts).combine_chunks())
    assert tables[0].equals(tables[1])
    assert tables[0].equals(tables[2])


FIELDS = ([1.0, 1.5], [0.0, -0.0, 3.0], [0.0, 5.0], *[[153.0, 5.0]] * 4)


@given(rows=st.lists(st.tuples(*map(st.sampled_from, FIELDS)), min_size=1, max_size=40))
def test_distinct_ratings(rows: list[tuple[float, ...]]) -> None:
    matrix = np.array(rows)
    for mixing in (True, False):
        # With factors of 0 all rows look alike, and they are compared one by one.
        with pytest.MonkeyPatch.context() as patch:
            if not mixing:
                patch.setattr(ratings, "_ODD", ratings._ODD * np.uint64(0))
            keys, places = ratings._distinct_rows(matrix)
        assert np.array_equal(keys[places], matrix)
        assert len(keys) == len({tuple(row) for row in rows})
