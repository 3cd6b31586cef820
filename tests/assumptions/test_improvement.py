"""Improvement of mortality: factors along a cohort, convergence to a long-term rate, and files that are wrong."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from assumptions.basis import prepare_basis
from assumptions.improvement import Improvement, Scale, read_scale
from assumptions.rate_table import TableError


def scale(folder: Path, text: str, **keys: Any) -> Scale:
    """A scale from the text of a CSV file."""
    (folder / "scale.csv").write_text(text)
    return read_scale(Improvement.model_validate({"table": "scale.csv", "base_year": 2015, **keys}), folder)


BY_YEAR = "age,2016,2017\n60,0.02,0.01\n61,0.03,0.015\n"


def test_factors_by_hand(tmp_path: Path) -> None:
    made = scale(tmp_path, BY_YEAR)
    assert made.factor(60, 2015) == made.factor(60, 1990) == 1
    assert made.factor(60, 2017) == pytest.approx(0.98 * 0.99)
    assert made.factor(61, 2018) == pytest.approx(0.97 * 0.985 * 0.985)  # the last year is held
    assert made.factor(90, 2016) == 0.97  # so is the last age
    assert made.factor(20, 2016) == 0.98


def test_a_cohort_is_followed_along_its_diagonal(tmp_path: Path) -> None:
    made = scale(tmp_path, BY_YEAR)
    assert made.cohort(60, 2016, 3) == pytest.approx([made.factor(60 + n, 2016 + n) for n in range(3)], rel=1e-14)


def test_convergence_to_the_long_term_rate(tmp_path: Path) -> None:
    made = scale(tmp_path, BY_YEAR, long_term={"rate": 0.012, "years": 10})
    assert made.yearly(61, 2017) == 0.015
    assert made.yearly(61, 2022) == pytest.approx((0.015 + 0.012) / 2)
    assert made.yearly(61, 2027) == made.yearly(61, 2100) == pytest.approx(0.012)
    earlier = scale(tmp_path, BY_YEAR, long_term={"rate": 0.012, "years": 10, "from": 2016})
    assert earlier.yearly(61, 2017) == pytest.approx(0.9 * 0.03 + 0.1 * 0.012)


def test_reduction_factors_stand_for_themselves(tmp_path: Path) -> None:
    made = scale(tmp_path, "age,2016,2017\n60,0.98,0.95\n", holds="reduction factors")
    assert [made.factor(60, year) for year in (2015, 2016, 2017, 2040)] == [1, 0.98, 0.95, 0.95]


@given(
    age=st.integers(0, 120), year=st.integers(1950, 2150), rate=st.floats(-0.05, 0.05), long=st.floats(-0.05, 0.05),
    years=st.integers(1, 40), start=st.none() | st.integers(2000, 2060), multiple=st.floats(0, 2),
)  # fmt: skip
@settings(deadline=None, max_examples=40)
def test_the_two_ways_to_a_factor_agree(
    age: int, year: int, rate: float, long: float, years: int, start: int | None, multiple: float
) -> None:
    term = {"rate": long, "years": years} | ({} if start is None else {"from": start})
    document = {"rate": rate, "base_year": 2015, "multiple": multiple, "long_term": term}
    made = Scale(Improvement.model_validate(document))
    assert made.cohort(age, year, 30) == pytest.approx([made.factor(age + n, year + n) for n in range(30)], rel=1e-12)


@pytest.mark.parametrize(
    ("text", "keys", "said"),
    [
        ("age,rate\n60,0.3\n", {}, "0.3 does not lie between -0.2 and 0.2"),
        ("age,2016,2018\n60,0.01,0.01\n", {}, "leave some out"),
        ("age,rate,2016\n60,0.01,0.01\n", {}, "both 'rate' and columns of calendar years"),
        ("age,rate\n60,0.01\n", {"holds": "reduction factors"}, "need a column for each calendar year"),
        ("age,rate\n60,0.01\n62,0.01\n", {}, "age 62 follows age 60"),
        ("year,rate\n60,0.01\n", {}, "no column 'age'"),
    ],
)
def test_wrong_files(tmp_path: Path, text: str, keys: dict[str, Any], said: str) -> None:
    with pytest.raises(TableError, match=said):
        scale(tmp_path, text, **keys)


@pytest.mark.parametrize(
    "document",
    [
        {"base_year": 2015},
        {"base_year": 2015, "rate": 0.01, "table": "scale.csv"},
        {"base_year": 2015, "rate": 0.01, "holds": "reduction factors"},
        {"base_year": 2015, "table": "scale.csv", "holds": "reduction factors", "multiple": 0.5},
        {"rate": 0.01},
    ],
)
def test_wrong_documents(document: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        Improvement.model_validate(document)


def test_the_digest_of_a_basis_knows_its_improvement(tmp_path: Path) -> None:
    def basis(text: str) -> str:
        (tmp_path / "scale.csv").write_text(text)
        rule = {
            "table": {"law": "de Moivre", "omega": 110}, "improvement": {"table": "scale.csv", "base_year": 2015}
        }  # fmt: skip
        return prepare_basis({"mortality": {"rule": [rule]}, "interest": {"rule": [{"flat": 0.02}]}}, tmp_path).digest

    assert basis(BY_YEAR) != basis(BY_YEAR.replace("0.03", "0.031"))


def test_factors_of_all_ages_and_years_are_made_once(tmp_path: Path) -> None:
    made = scale(tmp_path, BY_YEAR)
    assert made._factors is made._factors
    assert np.all(made._factors[:, 0] == 1)
