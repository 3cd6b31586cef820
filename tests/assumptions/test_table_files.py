"""CSV and Parquet: what is read, and every fault with file, place, value and remedy."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from table_writing import save

from assumptions import table_files
from assumptions.tables import TableError, read_curve, read_lapse, read_rates

SELECT = "age,select_0,select_1,ultimate\n60,0.1,0.2,\n61,0.3,0.4,\n62,0.5,0.6,0.7\n63,,0.8,1\n"


def csv(folder: Path, text: str | bytes, name: str = "rates.csv") -> Path:
    return save(folder, text, name)


def parquet(folder: Path, columns: dict[str, Any], name: str = "rates.parquet") -> Path:
    pq.write_table(pa.table(columns), folder / name)
    return folder / name


def test_rates_by_age(tmp_path: Path) -> None:
    table = read_rates(csv(tmp_path, "age,rate\n60,0.1\n61,1\n"))
    assert (table.first_age, table.final_age, table.closed, table.select_years) == (60, 62, True, 0)
    assert table.ultimate.tolist() == [0.1, 1.0]
    assert (table.title, table.kind) == ("rates", "")


def test_what_a_spreadsheet_adds_is_tolerated(tmp_path: Path) -> None:
    text = "\ufeff Age , RATE ,,\r\n60 , 0.1,,\r\n 61,1e-2,,\r\n,,,\r\n\r\n"
    assert read_rates(csv(tmp_path, text)).ultimate.tolist() == [0.1, 0.01]
    assert read_rates(csv(tmp_path, '"age","rate"\n"60",".5"\n')).ultimate.tolist() == [0.5]


def test_the_named_column_holds_the_rates(tmp_path: Path) -> None:
    path = csv(tmp_path, "age,Women,men\n60,,0.2\n61,0.1,0.3\n62,0.2,\n")
    women, men = read_rates(path, column="women"), read_rates(path, column="men")
    assert (women.first_age, women.ultimate.tolist()) == (61, [0.1, 0.2])
    assert (men.first_age, men.final_age, men.ultimate.tolist()) == (60, 62, [0.2, 0.3])


def test_select_columns_by_entry_age_and_by_attained_age(tmp_path: Path) -> None:
    path = csv(tmp_path, SELECT)
    entry = read_rates(path, select_by="entry age")
    assert [entry.rate(61, duration) for duration in range(3)] == [0.3, 0.4, 1.0]
    attained = read_rates(path, select_by="attained age")
    assert [attained.rate(60, duration) for duration in range(4)] == [0.1, 0.4, 0.7, 1.0]
    assert [attained.rate(62, duration) for duration in range(2)] == [0.5, 0.8]
    assert (attained.first_age, attained.final_age) == (60, 64)


def test_select_columns_need_a_word_on_their_ages(tmp_path: Path) -> None:
    path = csv(tmp_path, SELECT)
    with pytest.raises(TableError, match=r"rates\.csv: select rates.*select_by = 'entry age'"):
        read_rates(path)
    # One select year has one meaning, and the ultimate column alone has no select rates.
    assert read_rates(csv(tmp_path, "age,select_0,ultimate\n60,0.1,0.2\n61,0.3,1\n", "one.csv")).select_years == 1
    assert read_rates(path, column="ultimate").ultimate.tolist() == [0.7, 1.0]


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "empty"),
        ("age,rate\n", "no rows"),
        ("x,rate\n60,0.1\n", "no column 'age', only x, rate"),
        ("age,rates\n60,0.1\n", "no column 'rate', only age, rates; did you mean 'rates'"),
        ("age,rate,rate\n60,0.1,0.2\n", "column 'rate' is there twice"),
        ("age;rate\n60;0,1\n", "not parted by commas"),
        ("age,rate\n60,0.1\n61,1.5\n", "line 3, column 'rate': rate 1.5 does not lie between 0 and 1"),
        ("age,rate\n60,-0.1\n", "line 2, column 'rate': rate -0.1 does not lie"),
        ("age,rate\n60,nan\n", "line 2: column 'rate': 'nan' is no number"),
        ("age,rate\n60,inf\n", "'inf' is no number"),
        ("age,rate\n60,1e999\n", "'1e999' is no number"),
        ("age,rate\n60,1_0\n", "'1_0' is no number"),
        ("age,rate\n60,3%\n", "'3%' is no number"),
        ("age,rate\n60,=1/2\n", "'=1/2' is no number"),
        ("age,rate\n60,\n", "line 2: column 'rate': a blank cell"),
        ("age,rate\n,0.1\n", "line 2: column 'age': a blank cell"),
        ("age,rate\n60,0.1\n\n62,0.2\n", "line 4: age 62 follows age 60"),
        ("age,rate\n60,0.1\n60,0.2\n", "line 3: age 60 follows age 60"),
        ("age,rate\n61,0.1\n60,0.2\n", "line 3: age 60 follows age 61"),
        ("age,rate\n60.5,0.1\n", "line 2: age 60.5; ages must be whole"),
        ("age,rate\n-1,0.1\n", "age -1"),
        ("age,rate\n200,0.1\n", "age 200"),
        ("age,rate\n60,0.1,0.2\n", "line 2: 3 cells under 2 column names"),
        ("age,rate\n60\n", "line 2: 1 cells under 2"),
        ('age,rate\n60,"0.1\n', "line 2"),
        ("age,rate,select_0,ultimate\n60,0.1,0.1,0.1\n", "both 'rate' and select columns"),
        ("age,select_0,select_2,ultimate\n60,0.1,0.1,0.1\n", "they go select_0, select_1"),
        ("age,select_1,ultimate\n60,0.1,0.1\n", "they go select_0"),
        ("age,select_0\n60,0.1\n", "no column 'ultimate'"),
        ("age,select_0,ultimate\n60,0.1,\n", "column 'ultimate' is blank"),
        ("age,select_0,ultimate\n60,,0.1\n", "column 'select_0' is blank"),
        ("age,select_0,ultimate\n60,7,0.1\n", "column 'select_0': rate 7"),
        (
            "age,select_0,ultimate\n60,.1,.1\n61,.1,\n62,.1,1\n",
            "line 3: column 'ultimate' is blank at age 61",
        ),
    ],
)
def test_faults_of_a_csv_file(tmp_path: Path, text: str, said: str) -> None:
    path = csv(tmp_path, text)
    with pytest.raises(TableError) as caught:
        read_rates(path, select_by="entry age")
    assert said in str(caught.value)
    assert str(path) in str(caught.value)


def test_files_that_are_no_tables(tmp_path: Path) -> None:
    for path, said in [
        (tmp_path / "absent.csv", "cannot be read"),
        (tmp_path / "absent.xml", "cannot be read"),
        (csv(tmp_path, "a", "rates.xlsx"), "'.xlsx'"),
        (csv(tmp_path, b"age,rate\n60,\xff\n"), "not UTF-8 text at byte 12"),
        (csv(tmp_path, "age,rate\n", "rates.parquet"), "not a Parquet file"),
        (tmp_path / "a\0b.csv", "cannot be read"),
    ]:
        with pytest.raises(TableError, match=said):
            read_rates(path)
    (tmp_path / "folder.csv").mkdir()
    with pytest.raises(TableError, match="cannot be read"):
        read_rates(tmp_path / "folder.csv")


def test_size_and_rows_are_bounded(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = csv(tmp_path, "age,rate\n60,0.1\n61,0.1\n62,0.1\n")
    monkeypatch.setattr(table_files, "MAX_ROWS", 2)
    for written in (path, parquet(tmp_path, {"age": [1, 2, 3], "rate": [0.1] * 3})):
        with pytest.raises(TableError, match="more than 2 rows"):
            read_rates(written)
    monkeypatch.setattr(table_files, "MAX_BYTES", 10)
    with pytest.raises(TableError, match="limit for a table file"):
        read_rates(path)


def test_words_for_other_kinds_of_file_are_refused(tmp_path: Path) -> None:
    with pytest.raises(TableError, match="one table only; use 'column'"):
        read_rates(csv(tmp_path, "age,rate\n60,0.1\n"), table=1)


def test_parquet_of_several_types(tmp_path: Path) -> None:
    small = pa.array([Decimal("0.25"), Decimal("1.00")], pa.decimal128(5, 2))
    for rate in ([0.25, 1], pa.array([0.25, 1], pa.float32()), small):
        path = parquet(tmp_path, {"Age ": pa.array([60, 61], pa.int8()), "rate": rate})
        assert read_rates(path).ultimate.tolist() == [0.25, 1.0]
    path = parquet(tmp_path, {"age": [60, 61], "select_0": [0.1, 0.2], "ultimate": [None, 1.0]})
    assert read_rates(path).rate(60, 1) == 1.0


@pytest.mark.parametrize(
    ("columns", "said"),
    [
        ({"age": [60, 61], "rate": [0.1, 1.1]}, "row 2, column 'rate': rate 1.1"),
        ({"age": [60, 61], "rate": [0.1, None]}, "row 2: column 'rate': a blank cell"),
        ({"age": [60, 61], "rate": [0.1, float("nan")]}, "row 2: column 'rate': 'nan'"),
        ({"age": [60, 62], "rate": [0.1, 0.2]}, "row 2: age 62 follows age 60"),
        ({"age": [60], "rate": [True]}, "column 'rate' holds bool, not numbers"),
        ({"age": [60], "rate": [[0.1]]}, "column 'rate' holds list<element: double>, not numbers"),
        ({"age": [60], "rate": ["0.1"]}, "column 'rate' holds string, not numbers; convert it"),
        ({"age": [60], "x": [0.1]}, "no column 'rate', only age, x"),
        ({"age": [60], "rate": [0.1], "Rate": [0.1]}, "column 'rate' is there twice"),
        ({"age": pa.array([], pa.int64()), "rate": pa.array([], pa.float64())}, "no rows"),
    ],
)
def test_faults_of_a_parquet_file(tmp_path: Path, columns: dict[str, Any], said: str) -> None:
    with pytest.raises(TableError) as caught:
        read_rates(parquet(tmp_path, columns))
    assert said in str(caught.value)


def test_lapse_rates_by_policy_year(tmp_path: Path) -> None:
    assert read_lapse(csv(tmp_path, "year,rate\n1,0.1\n2,0\n3,1\n")) == [0.1, 0.0, 1.0]
    assert read_lapse(parquet(tmp_path, {"year": [1], "rate": [0.1]})) == [0.1]
    for text, said in [
        ("year,rate\n0,0.1\n", "line 2: year 0 where 1 is due"),
        ("year,rate\n1,0.1\n3,0.1\n", "line 3: year 3 where 2 is due"),
        ("year,rate\n1,1.1\n", "line 2, column 'rate': rate 1.1"),
        ("year,rate\n1,\n", "line 2: column 'rate': a blank cell"),
    ]:
        with pytest.raises(TableError, match=said):
            read_lapse(csv(tmp_path, text))


def test_spot_rates_by_maturity(tmp_path: Path) -> None:
    assert read_curve(csv(tmp_path, "maturity,rate\n1,0.03\n0.5,-0.01\n")) == {1.0: 0.03, 0.5: -0.01}
    for text, said in [
        ("maturity,rate\n0,0.1\n", "line 2: maturity 0 is not above 0"),
        ("maturity,rate\n1,0.1\n1,0.2\n", "line 3: maturity 1 is there twice"),
        ("maturity,rate\n1,3\n", "line 2: rate 3 must lie above -0.5"),
        ("maturity,rate\n1,-0.5\n", "rate -0.5 must lie above -0.5"),
        ("maturity,rate\n1,x\n", "'x' is no number"),
    ]:
        with pytest.raises(TableError, match=said):
            read_curve(csv(tmp_path, text))


RATES = st.lists(st.floats(0, 1), min_size=1, max_size=60)
FOLDER = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


@FOLDER
@given(rates=RATES, first=st.integers(0, 90), ending=st.sampled_from(["\n", "\r\n"]))
def test_written_rates_are_read_to_the_last_bit(tmp_path: Path, rates: list[float], first: int, ending: str) -> None:
    ages = list(range(first, first + len(rates)))
    lines = ["age,rate", *(f"{age},{rate!r}" for age, rate in zip(ages, rates, strict=True))]
    for path in (csv(tmp_path, ending.join(lines)), parquet(tmp_path, {"age": ages, "rate": rates})):
        table = read_rates(path)
        assert table.first_age == first
        assert table.ultimate.tolist() == rates
        assert table.closed == (rates[-1] == 1)
        assert table.rates_from(first, len(rates)).tolist() == rates


@FOLDER
@given(data=st.data(), years=st.integers(2, 6), ages=st.integers(2, 30), first=st.integers(0, 60))
def test_both_keyings_of_written_select_rates(
    tmp_path: Path, data: st.DataObject, years: int, ages: int, first: int
) -> None:
    flat = data.draw(st.lists(st.floats(0, 1), min_size=ages * (years + 1), max_size=ages * (years + 1)))
    figures = np.array(flat).reshape(ages, years + 1)
    names = [*(f"select_{duration}" for duration in range(years)), "ultimate"]
    columns = {"age": np.arange(first, first + ages), **dict(zip(names, figures.T, strict=True))}
    path = parquet(tmp_path, columns)
    entry, attained = read_rates(path, select_by="entry age"), read_rates(path, select_by="attained age")
    for age in range(ages):
        for duration in range(years):
            assert entry.rate(first + age, duration) == figures[age, duration]
            if duration <= age:
                assert attained.rate(first + age - duration, duration) == figures[age, duration]
        if age >= years:
            assert entry.rate(first + age - years, years) == figures[age, years]
            assert attained.rate(first + age - years, years) == figures[age, years]


@settings(max_examples=200, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))
@given(data=st.data())
def test_a_damaged_parquet_file_is_read_or_refused_in_plain_words(tmp_path: Path, data: st.DataObject) -> None:
    path = parquet(tmp_path, {"age": list(range(60, 80)), "rate": [0.1] * 20})
    content = bytearray(path.read_bytes())
    for _ in range(data.draw(st.integers(1, 3))):
        content[data.draw(st.integers(0, len(content) - 1))] = data.draw(st.integers(0, 255))
    path.write_bytes(content[: data.draw(st.integers(0, len(content)))] if data.draw(st.booleans()) else content)
    said = ""
    try:
        rates = read_rates(path)
    except TableError as fault:
        said = str(fault)
    # Anything but a rate or a TableError would have come through.
    assert str(path) in said or 0 <= rates.rate(rates.first_age, 0) <= 1
