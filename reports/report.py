"""What page, workbook and console show of a run: the outcome, its record, and the tables they share."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from functools import cached_property

from projection.basis_names import OWN, column_on
from projection.results import JSON, Outcome, SampleCheck

from .figures import money, shown, words
from .record import is_count

PARTS = ("benefit", "expense", "commission", "premium")
"""Parts of the cash flows in the order that they are shown."""


@dataclass(frozen=True)
class YearFlows:
    """Expected cash flows of a calendar year in currency: by part, and out and in altogether."""

    label: str
    parts: dict[str, float]
    paid_out: float
    paid_in: float

    @property
    def net(self) -> float:
        """Out less in."""
        return self.paid_out - self.paid_in


@dataclass(frozen=True)
class Report:
    """A finished run, ready to be laid out."""

    outcome: Outcome
    record: JSON

    @property
    def decimals(self) -> int:
        """Decimals of the currency's minor unit."""
        return self.outcome.settings.decimals

    @property
    def currency(self) -> str:
        """Label of the currency, or the word itself."""
        return str(self.record["settings"]["currency"] or "currency")

    @property
    def title(self) -> str:
        """Name of the run."""
        return str(self.record["title"])

    def money(self, minor: int) -> str:
        """Return minor units as text."""
        return money(minor, self.decimals)

    @property
    def rounding(self) -> int:
        """Reserve less what its parts, rounded one by one, add up to; minor units."""
        total = self.outcome.total
        parts = total["value_of_benefits"] + total["value_of_expenses"] - total["value_of_premiums"]
        return total["reserve"] - parts

    @property
    def widest_sample(self) -> SampleCheck:
        """The sample of the basis on which engine and plain twin lie furthest apart."""
        samples = [self.outcome.sample, *(one.sample for one in self.outcome.further)]
        return max(samples, key=lambda sample: sample.largest_relative)

    @cached_property
    def control_rows(self) -> list[tuple[str, str, str, str, bool]]:
        """The in-force gate: quantity, read, valued, exceptions, closes."""
        rows = []
        for total in self.outcome.control:
            decimals = 0 if is_count(total) else self.decimals
            figures = [money(figure, decimals) for figure in (total.read, total.valued, total.exceptions)]
            rows.append((words(total.name), figures[0], figures[1], figures[2], total.closes))
        return rows

    @cached_property
    def total_rows(self) -> list[dict[str, object]]:
        """Rows of the totals by group."""
        rows: list[dict[str, object]] = self.outcome.totals.to_pylist()
        return rows

    @cached_property
    def by_first_group(self) -> list[tuple[str, float]]:
        """Reserve by product, or by the first group where product is not among the groups; in currency."""
        name = self.bar_group
        if name is None:
            return []
        sums: dict[str, int] = defaultdict(int)
        for row in self.total_rows:
            sums[shown(row[name])] += round(float(str(row["reserve"])) * 10**self.decimals)
        return [(group, minor / 10**self.decimals) for group, minor in sums.items()]

    @property
    def basis_rows(self) -> list[tuple[str, str, dict[str, int]]]:
        """The bases side by side: name, title and sums in minor units; the run's own first, without a name."""
        own = (OWN, str(self.record["basis"]["title"]), self.outcome.total)
        return [own, *((one.name, one.title, one.total) for one in self.outcome.further)]

    @cached_property
    def reserves_by_group(self) -> list[tuple[str, list[float]]]:
        """Reserve on each basis by product, or by the first group where product is not among the groups."""
        if self.bar_group is None:
            return []
        columns = [column_on("reserve", name) for name, _, _ in self.basis_rows]
        sums: dict[str, list[int]] = defaultdict(lambda: [0] * len(columns))
        for row in self.total_rows:
            figures = sums[shown(row[self.bar_group])]
            for place, column in enumerate(columns):
                figures[place] += round(float(str(row[column])) * 10**self.decimals)
        return [(group, [minor / 10**self.decimals for minor in minors]) for group, minors in sums.items()]

    @cached_property
    def other_conventions(self) -> list[tuple[str, str, str]]:
        """Conventions of the further bases that differ from those of the run's own: basis, matter, rule."""
        own = set(self.outcome.conventions)
        return [(one.name, *line) for one in self.outcome.further for line in one.conventions if line not in own]

    @property
    def bar_group(self) -> str | None:
        """The group column whose bars are drawn."""
        groups = self.outcome.group_by
        return "product" if "product" in groups else (groups[0] if groups else None)

    @cached_property
    def years(self) -> list[YearFlows]:
        """Expected cash flows by calendar year, without gaps; from the first year with any to the last."""
        parts: dict[int, dict[str, float]] = defaultdict(lambda: defaultdict(float))
        ways: dict[int, dict[str, float]] = defaultdict(lambda: defaultdict(float))
        for row in self._yearly_rows:
            if not row["amount"]:
                continue
            parts[row["year"]][str(row["part"])] += row["amount"]
            ways[row["year"]][str(row["direction"])] += row["amount"]
        if not parts:
            return []
        return [
            YearFlows(str(year), dict(parts[year]), ways[year]["out"], ways[year]["in"])
            for year in range(min(parts), max(parts) + 1)
        ]

    @cached_property
    def stream_years(self) -> tuple[list[tuple[str, str, str]], dict[int, dict[tuple[str, str, str], float]]]:
        """Streams as (part, stream, direction) in order of part, and per year the amount of each."""
        table: dict[int, dict[tuple[str, str, str], float]] = defaultdict(lambda: defaultdict(float))
        for row in self._yearly_rows:
            table[row["year"]][row["part"], row["stream"], row["direction"]] += row["amount"]
        keys = {key for row in table.values() for key in row}
        return sorted(keys, key=lambda key: (_order(key[0]), key)), {year: dict(table[year]) for year in sorted(table)}

    @cached_property
    def _yearly_rows(self) -> list[JSON]:
        import pyarrow.compute as pc

        flows = self.outcome.cash_flows
        flows = flows.append_column("year", pc.year(flows.column("month")))
        keys = ["year", "part", "stream", "direction"]
        # One thread adds in one order, so that the last bits are the same every time.
        rows: list[JSON] = flows.group_by(keys, use_threads=False).aggregate([("amount", "sum")]).to_pylist()
        for row in rows:
            row["amount"] = float(row.pop("amount_sum"))
        return rows

    @property
    def parts(self) -> list[str]:
        """Parts that some cash flow belongs to, in the order that they are shown."""
        met = {part for year in self.years for part in year.parts}
        return sorted(met, key=_order)


def in_blocks(years: list[YearFlows], single: int = 10, block: int = 5) -> list[YearFlows]:
    """Return the first years one by one and the later ones added up in blocks."""
    rows = list(years[:single])
    for start in range(single, len(years), block):
        piece = years[start : start + block]
        parts: dict[str, float] = defaultdict(float)
        for year in piece:
            for part, value in year.parts.items():
                parts[part] += value
        label = piece[0].label if len(piece) == 1 else f"{piece[0].label} to {piece[-1].label}"
        rows.append(YearFlows(label, dict(parts), sum(y.paid_out for y in piece), sum(y.paid_in for y in piece)))
    return rows


def _order(part: str) -> int:
    return PARTS.index(part) if part in PARTS else len(PARTS)
