"""XTbML: what the tables of a file become, which belong together, and what each fault says."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from table_writing import axis, by_age, by_age_and_duration, document, grid, line, save, table

from assumptions.tables import TableError, read_lapse, read_rates
from assumptions.xtbml import read_xtbml

SELECT: dict[int, dict[int, Any]] = {60: {1: 0.1, 2: 0.2}, 61: {1: 0.3, 2: 0.4}, 62: {1: 0.5, 2: ""}}
ULTIMATE: dict[int, Any] = {62: 0.7, 63: 0.8, 64: 1}


def both(age: str = "Age", title: str = "") -> str:
    return document(by_age_and_duration(SELECT, title, age), by_age(ULTIMATE))


def test_an_aggregate_table(tmp_path: Path) -> None:
    path = save(tmp_path, document(by_age({60: "0.25", 61: "1E-2", 62: " 1 "})))
    rates = read_rates(path)
    assert rates.ultimate.tolist() == [0.25, 0.01, 1.0]
    assert (rates.first_age, rates.final_age, rates.closed, rates.select_years) == (60, 63, True, 0)
    assert (rates.title, rates.kind, rates.reference) == (
        "Invented lives",
        "Insured Lives Mortality",
        "made up",
    )


def test_select_and_ultimate_tables_are_taken_together(tmp_path: Path) -> None:
    path = save(tmp_path, both())
    entry = read_rates(path, select_by="entry age")
    assert [entry.rate(60, duration) for duration in range(5)] == [0.1, 0.2, 0.7, 0.8, 1.0]
    attained = read_rates(path, select_by="attained age")
    assert [attained.rate(60, duration) for duration in range(3)] == [0.1, 0.4, 0.7]
    with pytest.raises(TableError, match="duration 1"):
        attained.rate(61, 1)
    # In either order.
    turned = save(tmp_path, document(by_age(ULTIMATE), by_age_and_duration(SELECT)), "turned.xml")
    assert read_rates(turned, select_by="entry age").rates_from(60, 5).tolist() == [0.1, 0.2, 0.7, 0.8, 1.0]


def test_the_keying_must_come_from_the_file_or_the_document(tmp_path: Path) -> None:
    with pytest.raises(TableError, match="state select_by = 'entry age'"):
        read_rates(save(tmp_path, both()))
    for text, by in [
        (both("Issue Age"), "entry age"),
        (both("Attained Age"), "attained age"),
        (both(title="two years select: values of q[x-t]+t"), "attained age"),
        (both(title="values of q[x]+t"), "entry age"),
    ]:
        path = save(tmp_path, text)
        assert read_rates(path).rate(60, 1) == {"entry age": 0.2, "attained age": 0.4}[by]
        assert read_rates(path, select_by=by).rate(60, 0) == 0.1
        other = "entry age" if by == "attained age" else "attained age"
        with pytest.raises(TableError, match=f"select rows go by {by}, as the file says"):
            read_rates(path, select_by=other)


def test_one_table_of_several_by_number_and_by_title(tmp_path: Path) -> None:
    path = save(tmp_path, document(by_age({60: 0.1}, "Light work"), by_age({60: 0.2}, "Heavy  work")))
    for wanted, rate in [(1, 0.1), ("2", 0.2), ("light work", 0.1), ("Heavy work", 0.2)]:
        assert read_rates(path, table=wanted).ultimate.tolist() == [rate]
    assert read_rates(path, table=2).title == "Heavy work"
    listed = "1 'Light work', 2 'Heavy work'"
    with pytest.raises(TableError, match=f"several tables; name one.*{listed}"):
        read_rates(path)
    for wanted in (0, 3, "work"):
        with pytest.raises(TableError, match=f"no table with number or title '{wanted}'; there are: {listed}"):
            read_rates(path, table=wanted)
    twins = save(tmp_path, document(by_age({60: 0.1}, "Work"), by_age({60: 0.2}, "work")))
    with pytest.raises(TableError, match="several tables with number or title 'work'"):
        read_rates(twins, table="work")


def test_select_or_ultimate_alone_by_number(tmp_path: Path) -> None:
    path = save(tmp_path, both())
    assert read_rates(path, table=2).survivors() == pytest.approx([1, 0.3, 0.06, 0])
    select = read_rates(path, table=1, select_by="entry age")
    assert select.rate(61, 1) == 0.4
    with pytest.raises(TableError, match="duration 2"):
        select.rate(61, 2)


def test_one_select_year_in_a_table_by_age_alone(tmp_path: Path) -> None:
    said = by_age({60: 0.1, 61: 0.2}, "Minimum Select Age: 60"), by_age({61: 0.5, 62: 1}, "Ultimate")
    beside = (
        table(axis("Age") + axis("Duration", 1, 1), line({60: 0.1, 61: 0.2})),
        table(axis("Age") + axis("Duration", 2, 2), line({61: 0.5, 62: 1})),
    )
    for pair in (said, beside):
        rates = read_rates(save(tmp_path, document(*pair)))
        assert rates.rates_from(60, 3).tolist() == [0.1, 0.5, 1.0]
    # Without a word that one is select and the other ultimate, nothing is guessed.
    with pytest.raises(TableError, match="several tables"):
        read_rates(save(tmp_path, document(by_age({60: 0.1}), by_age({61: 1}, "Ultimate"))))


def test_axes_in_either_order_and_durations_from_0_or_1(tmp_path: Path) -> None:
    for first in (0, 1):
        rows = {first: {60: 0.1, 61: 0.3}, first + 1: {60: 0.2, 61: 0.4}}
        text = document(table(axis("Duration") + axis("Issue Age"), grid(rows)))
        rates = read_rates(save(tmp_path, text))
        assert rates.select.tolist() == [[0.1, 0.2], [0.3, 0.4]]
    with pytest.raises(TableError, match=r"durations go 2, 3, not 1, 2, 3"):
        read_rates(save(tmp_path, document(by_age_and_duration({60: {2: 0.1, 3: 0.2}}))), select_by="entry age")


def test_scaling_factors(tmp_path: Path) -> None:
    for factor in (None, "0", "", "1", "0.0"):
        assert read_rates(save(tmp_path, document(by_age({60: 0.5}, factor=factor)))).rate(60, 0) == 0.5
    assert read_rates(save(tmp_path, document(by_age({60: 12.5}, factor="1000")))).rate(60, 0) == 0.0125
    for factor in ("3", "-1", "0.1", "1e30", "ten", "nan"):
        with pytest.raises(TableError, match=f"table 1: scaling factor '{factor}'"):
            read_rates(save(tmp_path, document(by_age({60: 0.5}, factor=factor))))


def test_missing_cells(tmp_path: Path) -> None:
    rates = read_rates(save(tmp_path, document(by_age({59: "", 60: 0.1, 61: "", 62: 0.2, 63: ""}))))
    assert (rates.first_age, rates.final_age) == (60, 63)
    with pytest.raises(TableError, match="duration 1"):
        rates.rate(60, 1)
    with pytest.raises(TableError, match="no rate at age 61"):
        rates.survivors()
    with pytest.raises(TableError, match="no rate to begin with"):
        read_rates(save(tmp_path, document(by_age({60: ""}))))


def test_scales_of_improvement_are_read_but_are_no_rates(tmp_path: Path) -> None:
    rows = {60: {2000: 0.01, 2001: -0.02}, 61: {2000: 0.0, 2001: 0.5}}
    scale = document(table(axis("Age") + axis("Year"), grid(rows)), kind="Projection Scale")
    path = save(tmp_path, scale)
    (read,) = read_xtbml(path)
    assert read.values.tolist() == [[0.01, -0.02], [0.0, 0.5]]
    assert [held.ticks for held in read.axes] == [(60, 61), (2000, 2001)]
    with pytest.raises(TableError, match="by age and calendar year"):
        read_rates(save(tmp_path, scale.replace("Projection Scale", "Generational Mortality")))
    for kind in ("Projection Scale", "Selection Factors", "Claim Cost (in Disability)"):
        with pytest.raises(TableError, match="not yearly rates"):
            read_rates(save(tmp_path, document(by_age({60: 0.1}), kind=kind)))


def test_lapse_tables(tmp_path: Path) -> None:
    text = document(table(axis("Duration"), line({1: 0.1, 2: 0.05})))
    assert read_lapse(save(tmp_path, text)) == [0.1, 0.05]
    with pytest.raises(TableError, match="by duration, not by age"):
        read_rates(save(tmp_path, text))
    for values, said in [
        ({1: 0.1, 3: 0.2}, "policy years go 1, 3"),
        ({2: 0.1}, "policy years go 2"),
        ({1: 1.5}, "policy year 1: rate 1.5"),
        ({1: 0.1, 2: ""}, "no rate for policy year 2"),
    ]:
        with pytest.raises(TableError, match=said):
            read_lapse(save(tmp_path, document(table(axis("Duration"), line(values)))))
    with pytest.raises(TableError, match="by age, not by policy year"):
        read_lapse(save(tmp_path, document(by_age({60: 0.1}))))
    with pytest.raises(TableError, match="2 tables"):
        read_lapse(save(tmp_path, both()))


@pytest.mark.parametrize("name", ["Month", "Week", "Day", "Nonsense"])
def test_other_axes_are_refused(tmp_path: Path, name: str) -> None:
    text = document(table(axis(name) + axis("Age"), grid({1: {60: 0.1}, 2: {60: 0.1}})))
    with pytest.raises(TableError, match="not by age and policy year"):
        read_rates(save(tmp_path, text), select_by="entry age")


@pytest.mark.parametrize(
    ("rates", "said"),
    [
        ({60: 0.5, 61: -0.1}, "table 1, age 61: rate -0.1 does not lie between 0 and 1"),
        ({60: 1000, 61: 900}, "table 1, age 60: rate 1000 .* numbers living"),
        ({60: "NaN"}, "table 1: 'NaN' at 60 is no number"),
        ({60: "1e999"}, "'1e999' at 60 is no number"),
        ({60: "half"}, "'half' at 60 is no number"),
        ({60: "0,5"}, "'0,5' at 60 is no number"),
        ({60: 0.1, 65: 0.2}, "age 65 follows age 60"),
        ({200: 0.1}, "age 200"),
    ],
)
def test_faults_in_the_figures(tmp_path: Path, rates: dict[int, object], said: str) -> None:
    path = save(tmp_path, document(by_age(rates)))
    with pytest.raises(TableError, match=said) as caught:
        read_rates(path)
    assert str(path) in str(caught.value)


def test_faults_in_select_figures_name_the_cell(tmp_path: Path) -> None:
    path = save(tmp_path, document(by_age_and_duration({60: {1: 0.1, 2: 3}})))
    with pytest.raises(TableError, match="table 1, age 60, duration 2: rate 3"):
        read_rates(path, select_by="entry age")


@pytest.mark.parametrize(
    ("values", "said"),
    [
        ('<Axis><Y t="60">0.1</Y><Y t="60">0.2</Y></Axis>', "two values at 60"),
        ('<Axis t="60"><Axis><Y t="1">0</Y></Axis></Axis>' * 2, "the axis value 60 is there twice"),
        ("<Axis><Y>0.1</Y></Axis>", "axis value '' is no whole number"),
        ('<Axis><Y t="60.5">0.1</Y></Axis>', "axis value '60.5' is no whole number"),
        ('<Axis><Y t="nan">0.1</Y></Axis>', "axis value 'nan'"),
        ('<Axis><Y t="9e9">0.1</Y></Axis>', "axis value '9e9'"),
        ("", "no values"),
        ("<Axis></Axis>", "no values"),
        ("<Row/>", "'Row' among the values"),
        ('<Axis t="60"><Y t="1">0</Y></Axis><Axis><Y t="60">0</Y></Axis>', "values along 1 and 2 axes"),
        ('<Axis t="1"><Axis t="1"><Axis t="1"><Y t="1">0</Y></Axis></Axis></Axis>', "values along 4 axes"),
        ('<Axis t="60"><Axis><Y t="1">0</Y></Axis></Axis>', "values run along 2 axes, but 1 are defined"),
    ],
)
def test_faults_in_the_layout(tmp_path: Path, values: str, said: str) -> None:
    path = save(tmp_path, document(table(axis("Age"), values)))
    with pytest.raises(TableError, match=said):
        read_rates(path)


def test_a_namespace_and_a_byte_order_mark_change_nothing(tmp_path: Path) -> None:
    text = document(by_age({60: 0.5})).replace("<XTbML>", '<XTbML xmlns="http://example.org/x">')
    assert read_rates(save(tmp_path, "\ufeff" + text, "table.XTbML")).rate(60, 0) == 0.5
    wide = text.replace("utf-8", "utf-16").encode("utf-16")
    assert read_rates(save(tmp_path, wide)).rate(60, 0) == 0.5


def test_columns_are_for_other_files(tmp_path: Path) -> None:
    with pytest.raises(TableError, match="use 'table' in place of 'column'"):
        read_rates(save(tmp_path, both()), column="rate")


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data(), years=st.integers(1, 6), ages=st.integers(1, 20), first=st.integers(0, 60))
def test_written_tables_are_read_to_the_last_bit(
    tmp_path: Path, data: st.DataObject, years: int, ages: int, first: int
) -> None:
    cell = st.floats(0, 1) | st.none()
    cells = data.draw(st.lists(st.lists(cell, min_size=years, max_size=years), min_size=ages, max_size=ages))
    cells[0][0] = 0.5
    ends = data.draw(st.lists(st.floats(0, 1), min_size=1, max_size=40))
    rows = {
        first + age: {duration + 1: "" if rate is None else repr(rate) for duration, rate in enumerate(row)}
        for age, row in enumerate(cells)
    }
    start = first + years
    ultimate = {start + age: repr(rate) for age, rate in enumerate(ends)}
    path = save(tmp_path, document(by_age_and_duration(rows, age="Issue Age"), by_age(ultimate)))
    written = np.array([[np.nan if rate is None else rate for rate in row] for row in cells])
    read = read_xtbml(path)
    assert np.array_equal(read[0].values, written, equal_nan=True)
    assert read[1].values.tolist() == ends
    rates = read_rates(path)
    assert (rates.first_age, rates.final_age, rates.closed) == (first, start + len(ends), ends[-1] == 1)
    for age in range(ages):
        for duration in range(years):
            if np.isnan(written[age, duration]):
                with pytest.raises(TableError):
                    rates.rate(first + age, duration)
            else:
                assert rates.rate(first + age, duration) == written[age, duration]
    assert [rates.rate(first, years + later) for later in range(len(ends))] == ends
