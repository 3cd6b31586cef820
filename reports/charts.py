"""Charts as SVG, drawn here so that a page needs nothing from outside."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from .figures import amount

WIDTH = 900
_SCALES = ((1e9, "thousand million"), (1e6, "million"), (1e3, "thousand"))


@dataclass(frozen=True)
class Axis:
    """A scale of round steps: lowest and highest value, step, divisor of the labels and its name."""

    low: float
    high: float
    step: float
    divisor: float
    scale: str

    @property
    def ticks(self) -> list[float]:
        """Values that are labelled."""
        return [self.low + i * self.step for i in range(round((self.high - self.low) / self.step) + 1)]

    def label(self, value: float) -> str:
        """Return the label of a tick, without its sign's loss at nothing."""
        digits = max(0, -math.floor(math.log10(self.step / self.divisor) + 1e-9))
        return amount(value / self.divisor, digits)

    def unit(self, currency: str) -> str:
        """Return the unit of the labels in words."""
        return f"{self.scale} {currency}".strip()


def axis_for(low: float, high: float, steps: int = 6) -> Axis:
    """Return an axis that holds 0, ``low`` and ``high`` with about so many steps of 1, 2 or 5 times 10^n."""
    low, high = min(0.0, low), max(0.0, high)
    if high - low < 1e-9:
        # Nothing, or so little that dividing it would leave nothing.
        high = 1.0
    raw = (high - low) / steps
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(factor * power for factor in (1, 2, 5, 10) if factor * power >= raw * (1 - 1e-9))
    low, high = math.floor(low / step + 1e-9) * step, math.ceil(high / step - 1e-9) * step
    divisor, scale = next(((d, s) for d, s in _SCALES if max(high, -low) >= 2 * d), (1.0, ""))
    return Axis(low, high, step, divisor, scale)


def run_off_chart(years: Sequence[str], out: Sequence[float], in_: Sequence[float], currency: str) -> str:
    """Return the expected cash flows by calendar year: paid out above the line, received below it.

    years: labels; out, in_: amounts in currency, not negative, one for each year.
    """
    axis = axis_for(-max(in_, default=0.0), max(out, default=0.0))
    left, right, top, height = 76, 12, 34, 300
    plot = WIDTH - left - right

    def y(value: float) -> float:
        return top + height * (axis.high - value) / (axis.high - axis.low)

    slot = plot / max(1, len(years))
    bar = max(1.0, slot * 0.78)
    marks: list[str] = [_grid_line(left, WIDTH - right, y(tick), axis.label(abs(tick))) for tick in axis.ticks]
    for i, year in enumerate(years):
        x = left + i * slot + (slot - bar) / 2
        marks.append(_bar(x, y(out[i]), bar, y(0) - y(out[i]), "out", f"{year}: {amount(out[i], 0)} out"))
        marks.append(_bar(x, y(0), bar, y(-in_[i]) - y(0), "in", f"{year}: {amount(in_[i], 0)} in"))
    marks.append(f'<line class="zero" x1="{left}" x2="{WIDTH - right}" y1="{y(0):.1f}" y2="{y(0):.1f}"/>')
    marks += _year_labels(years, left, slot, top + height + 20)
    marks.append(_text(left, 16, f"{axis.unit(currency)} a calendar year, undiscounted", "start"))
    marks.append(_text(WIDTH - right, top + 14, "paid out", "end", "key out"))
    marks.append(_text(WIDTH - right, top + height - 6, "received", "end", "key in"))
    said = (
        f"Expected cash flows by calendar year, {years[0]} to {years[-1]}; out upwards, in downwards."
        if years
        else "No expected cash flows."
    )
    return _svg(top + height + 30, "Expected cash flows by calendar year", said, marks)


def bar_chart(title: str, rows: Sequence[tuple[str, float]], currency: str, decimals: int) -> str:
    """Return horizontal bars, one for each (label, amount in currency), with the amounts written out."""
    values = [value for _, value in rows]
    axis = axis_for(min(values, default=0.0), max(values, default=0.0), steps=5)
    left, right, top, step = 300, 140, 30, 26
    plot = WIDTH - left - right

    def x(value: float) -> float:
        return left + plot * (value - axis.low) / (axis.high - axis.low)

    bottom = top + step * len(rows)
    marks = [_grid_column(x(tick), top - 4, bottom, axis.label(tick)) for tick in axis.ticks]
    for i, (label, value) in enumerate(rows):
        y = top + i * step
        start, end = sorted((x(0), x(value)))
        written = amount(value, decimals)
        marks.append(_text(left - 8, y + 17, _short(label, 38), "end", "label", label))
        marks.append(_bar(start, y + 4, end - start, step - 8, "out", f"{label}: {written}"))
        marks.append(_text(WIDTH - 2, y + 17, written, "end", "value"))
    marks.append(f'<line class="zero" x1="{x(0):.1f}" x2="{x(0):.1f}" y1="{top - 4}" y2="{bottom}"/>')
    marks.append(_text(left, bottom + 34, axis.unit(currency), "start"))
    return _svg(bottom + 42, title, f"{title}, in {currency}.", marks)


def _svg(height: float, title: str, said: str, marks: list[str]) -> str:
    return (
        f'<svg viewBox="0 0 {WIDTH} {height:.0f}" role="img" aria-label="{escape(title)}">'
        f"<title>{escape(title)}</title><desc>{escape(said)}</desc>{''.join(marks)}</svg>"
    )


def _bar(x: float, y: float, width: float, height: float, kind: str, said: str) -> str:
    return (
        f'<rect class="{kind}" x="{x:.1f}" y="{y:.1f}" width="{width:.1f}" height="{max(0.0, height):.1f}">'
        f"<title>{escape(said)}</title></rect>"
    )


def _text(x: float, y: float, text: str, anchor: str, kind: str = "", title: str = "") -> str:
    said = f"<title>{escape(title)}</title>" if title else ""
    name = f' class="{kind}"' if kind else ""
    return f'<text{name} x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}">{escape(text)}{said}</text>'


def _grid_line(x1: float, x2: float, y: float, label: str) -> str:
    line = f'<line class="grid" x1="{x1}" x2="{x2}" y1="{y:.1f}" y2="{y:.1f}"/>'
    return line + _text(x1 - 8, y + 4, label, "end")


def _grid_column(x: float, y1: float, y2: float, label: str) -> str:
    line = f'<line class="grid" x1="{x:.1f}" x2="{x:.1f}" y1="{y1}" y2="{y2}"/>'
    return line + _text(x, y2 + 16, label, "middle")


def _year_labels(years: Sequence[str], left: float, slot: float, y: float) -> list[str]:
    every = next(n for n in (1, 2, 5, 10, 20, 50, 100, 1000) if n * slot >= 44)
    return [
        _text(left + (i + 0.5) * slot, y, year, "middle")
        for i, year in enumerate(years)
        if (int(year) % every == 0 if year.isdigit() else i % every == 0)
    ]


def _short(text: str, most: int) -> str:
    return text if len(text) <= most else text[: most - 1] + "…"
