"""Projection scales of the Society of Actuaries' archive: read as scales, and one against its published products."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
from contracts import annuity, value
from open_tables import FOLDER, open_table

from assumptions.improvement import Improvement, Scale, read_scale
from assumptions.tables import TableError
from assumptions.xtbml import read_xtbml

CHANGES = {1440, 1441, 1442, 1443}
"""Files that hold yearly changes, below 0 where mortality falls."""

BY_YEARS_SINCE = 2953
"""A file of figures from 0 to 0.59 by age and years since some year."""


def open_scale(number: int, base_year: int, **more: str) -> Scale:
    """Read the file of the archive's scale of that number."""
    document = {"table": f"t{number}.xml", "base_year": base_year, **more}
    return read_scale(Improvement.model_validate(document), FOLDER)


def raw_figures(number: int) -> list[float]:
    """Figures of a file in its order, without the reader that is tested."""
    text = (FOLDER / f"t{number}.xml").read_text("utf-8-sig")
    return [float(figure) for figure in re.findall(r"<Y t=.\s*\d+\s*.>([^<]*)</Y>", text)]


@pytest.mark.slow
def test_every_scale_of_the_archive_is_read() -> None:
    numbers = [int(path.stem[1:]) for path in FOLDER.glob("*.xml") if _holds_scale(path)]
    by_age, by_year = 0, 0
    for number in sorted(numbers):
        if number == BY_YEARS_SINCE:
            with pytest.raises(TableError, match="by age and duration, not by age, or age and calendar year"):
                open_scale(number, 2000)
            continue
        made = open_scale(number, 2000, holds="yearly changes" if number in CHANGES else "yearly improvements")
        by_age, by_year = by_age + (not made.years), by_year + bool(made.years)
        sign = -1 if number in CHANGES else 1
        assert np.array_equal(made.values.ravel() * sign, raw_figures(number))
        age, year = made.first_age + 7, made.years[-1] if made.years else 2004
        assert made.cohort(age, year, 3) == pytest.approx([made.factor(age + n, year + n) for n in range(3)], rel=1e-12)
    assert (len(numbers), by_age, by_year) == (57, 38, 18)


def _holds_scale(path: Path) -> bool:
    # Reading the head is enough, and quicker than taking all of 3,012 files apart.
    with path.open(encoding="utf-8-sig") as file:
        return ">Projection Scale</ContentType>" in file.read(20_000) and read_xtbml(path)[0].kind == "Projection Scale"


@pytest.mark.parametrize(("scale", "products"), [(3135, 3139), (3136, 3140)])
def test_mp_2014_from_2006_to_2014(scale: int, products: int) -> None:
    # The archive holds the products (1 - f(x, 2007)) ... (1 - f(x, 2014)) of Scale MP-2014 as a table of its own,
    # "factoring out factors", printed to 15 decimals.
    made = open_scale(scale, 2006)
    figures = raw_figures(products)
    assert len(figures) == 101
    for age, figure in enumerate(figures, 20):
        assert made.factor(age, 2014) == pytest.approx(figure, abs=5e-15)


def test_an_annuity_by_a_scale_in_two_dimensions_through_documents() -> None:
    # Scale MP-2020 for men on the RP-2000 rates of healthy men, with base year 2000, followed along the diagonal here
    # from the files' figures; the scale's last year is 2036.
    grid = np.array(raw_figures(3610)).reshape(101, 86)
    rates = open_table(1595)
    living, expected = 1.0, 0.0
    for duration in range(rates.final_age - 65):
        expected += living / 1.03**duration
        age, year = 65 + duration, 2012 + duration
        left = np.prod([1 - grid[age - 20, min(later, 2036) - 1951] for later in range(2001, year + 1)])
        living *= 1 - rates.rate(age, 0) * left if age < rates.final_age - 1 else 0.0
    improvement = {"table": str(FOLDER / "t3610.xml"), "base_year": 2000}
    rules = [{"table": str(FOLDER / "t1595.xml"), "improvement": improvement, "close": True}]
    assert value([annuity()], rules, 0.03, 65, commenced=2012) == pytest.approx(expected, abs=1e-8)
