"""Improvement of mortality: the British tables of the 92 series, projected by published reduction factors."""

from __future__ import annotations

from pathlib import Path

import pytest
from contracts import insurance, printed, value
from open_tables import FOLDER
from test_open_table_figures import reduction_factor


@pytest.mark.parametrize(("name", "number"), [("PMA", 2365), ("PFA", 2368)])
@pytest.mark.parametrize("age", [50, 60, 65, 70, 80, 100])
def test_a10_rates_of_2010_from_those_of_1992(tmp_path: Path, name: str, number: int, age: int) -> None:
    # The reduction factors of CMI Report 17; their constants are from memory, and confirmed by the match.
    columns = range(1993, 2011)
    rows = [",".join([str(x), *(repr(reduction_factor(x, year - 1992)) for year in columns)]) for x in range(20, 120)]
    path = tmp_path / "factors.csv"
    path.write_text("\n".join([",".join(["age", *map(str, columns)]), *rows]) + "\n")
    improvement = {"table": str(path), "base_year": 1992, "holds": "reduction factors"}
    rules = [{"table": str(FOLDER / f"t{number}.xml"), "improvement": improvement, "close": True}]
    found = value([insurance(0, 1)], rules, 0.0, age, commenced=2010)
    assert found == pytest.approx(printed("A10")[f"{name}_{age}"], abs=0.5e-6)
