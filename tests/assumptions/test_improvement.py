"""Improvement of mortality: factors along a cohort, convergence to a long-term rate, and files that are wrong."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import table_writing as xml
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


KIND = "Projection Scale"
"""What an XTbML file of scales says that it holds."""


def xml_scale(folder: Path, text: str, table: Any = "table.xml", **keys: Any) -> Scale:
    """A scale from the text of an XTbML file."""
    xml.save(folder, text)
    return read_scale(Improvement.model_validate({"table": table, "base_year": 2015, **keys}), folder)


def by_year(rows: dict[int, dict[int, object]], swapped: bool = False) -> str:
    axes = [xml.axis("Age"), xml.axis("Year", scale="Ordinal Date")]
    return xml.table("".join(axes[::-1] if swapped else axes), xml.grid(rows), "by year")


def test_xtbml_by_age_and_by_age_and_calendar_year(tmp_path: Path) -> None:
    same = scale(tmp_path, BY_YEAR)
    rows: dict[int, dict[int, object]] = {60: {2016: 0.02, 2017: 0.01}, 61: {2016: 0.03, 2017: 0.015}}
    made = xml_scale(tmp_path, xml.document(by_year(rows), kind=KIND))
    assert (made.first_age, made.years) == (same.first_age, same.years)
    assert np.array_equal(made.values, same.values)
    turned: dict[int, dict[int, object]] = {year: {age: rows[age][year] for age in rows} for year in (2016, 2017)}
    assert np.array_equal(xml_scale(tmp_path, xml.document(by_year(turned, True), kind=KIND)).values, same.values)
    alone = xml_scale(tmp_path, xml.document(xml.by_age({60: 0.02, 61: 0.03}), kind=KIND))
    assert alone.factor(61, 2017) == pytest.approx(0.97**2, rel=1e-15)


def test_one_of_several_scales_of_a_file(tmp_path: Path) -> None:
    text = xml.document(xml.by_age({60: 0.02}, "Men"), xml.by_age({60: 0.01}, "Women"), kind=KIND)
    for wanted in (2, "Women"):
        assert xml_scale(tmp_path, text, {"file": "table.xml", "table": wanted}).yearly(60, 2016) == 0.01
    with pytest.raises(TableError, match="2 tables; name one"):
        xml_scale(tmp_path, text)
    with pytest.raises(TableError, match="only an XTbML file holds several tables"):
        scale(tmp_path, BY_YEAR, table={"file": "scale.csv", "table": 1})


def test_yearly_changes_have_the_other_sign(tmp_path: Path) -> None:
    made = scale(tmp_path, "age,rate\n60,-0.02\n61,0.01\n", holds="yearly changes")
    assert made.factor(60, 2017) == pytest.approx(0.98**2)
    assert made.factor(61, 2016) == pytest.approx(1.01)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (xml.document(xml.by_age({60: 0.02})), "a table of 'Insured Lives Mortality' holds no scale of improvement"),
        (xml.document(xml.by_age({60: 0.02, 62: 0.02}), kind=KIND), "age 62 follows age 60"),
        (xml.document(xml.by_age({60: 0.3}), kind=KIND), "age 60: 0.3 does not lie between -0.2 and 0.2"),
        (xml.document(by_year({60: {2016: 0.02, 2018: 0.01}}), kind=KIND), "the calendar years leave some out"),
        (
            xml.document(by_year({60: {2016: 0.02, 2017: 0.01}, 61: {2016: 0.02}}), kind=KIND),
            "no figure for age 61, year 2017",
        ),
        (
            xml.document(by_year({60: {2016: 0.02, 2017: 0.5}}), kind=KIND),
            "age 60, year 2017: 0.5 does not lie between",
        ),
        (xml.document(by_year({60: {1: 0.02, 2: 0.01}}), kind=KIND), "by age and duration, not by age"),
    ],
)
def test_wrong_xtbml_files(tmp_path: Path, text: str, said: str) -> None:
    with pytest.raises(TableError, match=said):
        xml_scale(tmp_path, text)


def test_the_digest_knows_a_scale_of_an_xtbml_file(tmp_path: Path) -> None:
    def files(table: Any) -> dict[str, str]:
        xml.save(tmp_path, xml.document(xml.by_age({60: 0.02}), kind=KIND))
        rule = {"table": {"law": "de Moivre", "omega": 110}, "improvement": {"table": table, "base_year": 2015}}
        return prepare_basis({"mortality": {"rule": [rule]}, "interest": {"rule": [{"flat": 0.02}]}}, tmp_path).files

    assert files("table.xml") == files({"file": "table.xml", "table": 1})
    assert "table.xml" in files("table.xml")
