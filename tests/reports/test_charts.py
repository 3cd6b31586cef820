from __future__ import annotations

import re
from xml.etree import ElementTree

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from reports.charts import axis_for, bar_chart, run_off_chart

AMOUNTS = st.floats(-1e12, 1e12, allow_nan=False)


@given(AMOUNTS, AMOUNTS)
@example(0.0, 5e-324)
@example(-1e-310, 0.0)
def test_an_axis_holds_its_values_and_nothing(a: float, b: float) -> None:
    low, high = sorted((a, b))
    axis = axis_for(low, high)
    slack = 1e-6 * (axis.high - axis.low)
    assert axis.low <= min(low, 0.0) + slack
    assert axis.high >= max(high, 0.0) - slack
    assert 2 <= len(axis.ticks) <= 12
    assert min(abs(tick) for tick in axis.ticks) < slack


@given(AMOUNTS, AMOUNTS)
def test_labels_of_an_axis_are_distinct(a: float, b: float) -> None:
    axis = axis_for(*sorted((a, b)))
    labels = [axis.label(tick) for tick in axis.ticks]
    assert len(set(labels)) == len(labels)


def heights(chart: str, kind: str) -> list[float]:
    return [float(height) for height in re.findall(rf'<rect class="{kind}"[^>]* height="([\d.]+)"', chart)]


def test_bars_are_as_high_as_their_amounts() -> None:
    chart = run_off_chart(["2026", "2027"], [100.0, 50.0], [25.0, 0.0], "florins")
    out, in_ = heights(chart, "out"), heights(chart, "in")
    assert out[1] / out[0] == pytest.approx(0.5, abs=0.01)
    assert in_[0] / out[0] == pytest.approx(0.25, abs=0.01)
    assert in_[1] == 0


def test_negative_reserves_go_to_the_left() -> None:
    chart = bar_chart("Reserve by product", [("A", 100.0), ("B", -50.0)], "florins", 2)
    bars = re.findall(r'<rect class="out" x="([\d.]+)" y="[\d.]+" width="([\d.]+)"', chart)
    (x_a, width_a), (x_b, width_b) = [(float(x), float(width)) for x, width in bars]
    assert x_b + width_b == pytest.approx(x_a, abs=0.2)
    assert width_b / width_a == pytest.approx(0.5, abs=0.01)


@pytest.mark.parametrize("years", [0, 1, 3, 120])
def test_any_number_of_years_gives_a_well_formed_picture(years: int) -> None:
    labels = [str(2026 + i) for i in range(years)]
    chart = run_off_chart(labels, [float(i) for i in range(years)], [0.0] * years, "<florins> & more")
    tree = ElementTree.fromstring(chart)
    assert tree.find("title") is not None
    assert any("<florins> & more" in (text.text or "") for text in tree.iter("text"))


def test_labels_are_escaped_and_shortened() -> None:
    chart = bar_chart("Reserve", [("<script>" + "x" * 60, 1.0)], "florins", 2)
    assert "<script>" not in chart
    assert "…" in chart
    ElementTree.fromstring(chart)
