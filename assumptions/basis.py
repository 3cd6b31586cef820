"""A basis: mortality, lapse, interest and expenses under one name, with its tables read and its digest."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

from pydantic import Field, field_validator, model_validator

from .adjustments import Adjustment
from .expenses import Expense
from .improvement import Scale, read_scale
from .inflation import NamedInflation, Prices, read_prices
from .interest import Interest, YieldCurve, curve_of
from .items import Item, Sourced
from .lapse import Lapse
from .laws import Law
from .mortality import Mortality, MortalityRule, Rates, TableFile
from .rules import Rule, columns_of
from .tables import read_curve, read_lapse, read_rates


class ClaimDelay(Item):
    """Claims paid a while after the death."""

    delay_months: float = Field(ge=0, le=60, description="months from the middle of the step of death to payment")


class Claims(Item):
    """When a death benefit is paid."""

    paid: Literal["end of step", "middle of step"] | ClaimDelay = Field(
        "end of step", description="end or middle of the step of death, or { delay_months } after its middle"
    )

    @field_validator("paid", mode="before")
    @classmethod
    def _one_kind(cls, value: Any) -> Any:
        return ClaimDelay.model_validate(value) if isinstance(value, dict) else value


class BasisDocument(Sourced):
    """The document of a basis, as written."""

    mortality: Mortality = Field(description="rates of death")
    lapse: Lapse | None = Field(None, description="rates of leaving by choice; absent: nobody lapses")
    interest: Interest = Field(description="discount curves")
    expense: list[Expense] = Field(default_factory=list, description="items of expense; all of them count")
    inflation: list[NamedInflation] = Field(
        default_factory=list, description="inflation that expense items and the increases of designs call by name"
    )
    claims: Claims = Field(default_factory=Claims, description="when a death benefit is paid")

    @model_validator(mode="after")
    def _inflation_there(self) -> BasisDocument:
        names = [one.name for one in self.inflation]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f"two inflations are called '{name}'; give each a name of its own")
        for item in self.expense:
            if isinstance(item.inflation, str) and item.inflation not in names:
                listed = ", ".join(f"'{name}'" for name in names) or "none"
                raise ValueError(
                    f"expense '{item.name}': key 'inflation' is '{item.inflation}', but the basis has {listed}; "
                    "add [[inflation]] with this name"
                )
        return self

    def rules(self) -> Iterator[tuple[str, Rule]]:
        """Yield every rule with the place that it stands in."""
        parts: list[tuple[str, Any]] = [
            ("mortality", self.mortality.rule),
            ("lapse", self.lapse.rule if self.lapse else []),
            ("interest", self.interest.rule),
            *((f"expense '{item.name}'", item.rule) for item in self.expense),
        ]
        for place, rules in parts:
            for rule in rules:
                yield place, rule

    def rule_columns(self) -> list[str]:
        """Extract columns that some rule looks at."""
        return columns_of(rule for _, rule in self.rules())


@dataclass(frozen=True)
class Basis:
    """A basis ready for use: the document and, per rule, what its tables hold.

    rates[i], lapses[i] and curves[i] belong to rule i of the mortality, lapse and interest parts.
    """

    document: BasisDocument
    rates: tuple[Rates, ...]
    lapses: tuple[tuple[float, ...], ...]
    curves: tuple[YieldCurve, ...]
    files: dict[str, str] = field(default_factory=dict)
    """SHA-256 of every table file read, by its path in the document."""
    scales: tuple[Scale | None, ...] = ()
    """Improvement of each mortality rule, None where there is none."""
    prices: dict[str, Prices] = field(default_factory=dict)
    """Level of prices by the names of inflation."""
    expense_prices: tuple[Prices | None, ...] = ()
    """Level of prices of each expense item, None where its amounts do not grow."""
    adjustments: tuple[Adjustment | None, ...] = ()
    """What is done to the rates of each mortality rule; empty for none at all."""
    lapse_adjustments: tuple[Adjustment | None, ...] = ()
    """The same of each lapse rule."""
    changed_by: tuple[tuple[str, str], ...] = ()
    """What the basis was made with from the one that its tables were read for: titles and contents of shocks."""

    @cached_property
    def digest(self) -> str:
        """SHA-256 of the document and of every table file that it names."""
        document = self.document.model_dump(mode="json", by_alias=True)
        content = [document, sorted(self.files.items())]
        if self.changed_by:
            content.append([text for _, text in self.changed_by])
        text = json.dumps(content, sort_keys=True, ensure_ascii=False)
        return hashlib.sha256(text.encode()).hexdigest()

    @property
    def title(self) -> str:
        """The name that the basis goes by."""
        return "; ".join([self.document.title or "untitled basis", *(title for title, _ in self.changed_by)])

    def adjustment(self, rule: int) -> Adjustment | None:
        """What is done to the rates of a mortality rule."""
        return self.adjustments[rule] if self.adjustments else None

    def lapse_adjustment(self, rule: int) -> Adjustment | None:
        """What is done to the rates of a lapse rule, None too where there is no rule (-1)."""
        return self.lapse_adjustments[rule] if self.lapse_adjustments and rule >= 0 else None


def prepare_basis(document: BasisDocument | dict[str, Any], folder: Path | str = ".") -> Basis:
    """Read the tables that a basis names, relative to ``folder``.

    Raises pydantic.ValidationError for a wrong document and tables.TableError for a wrong table.
    """
    if not isinstance(document, BasisDocument):
        document = BasisDocument.model_validate(document)
    folder = Path(folder)
    files: dict[str, str] = {}
    rates = tuple(_rates_of(rule, folder, files) for rule in document.mortality.rule)
    lapses: tuple[tuple[float, ...], ...] = ()
    if document.lapse:
        lapses = tuple(
            tuple(rule.rates if rule.rates is not None else read_lapse(folder / str(rule.table)))
            for rule in document.lapse.rule
        )
        _seal(files, folder, [rule.table for rule in document.lapse.rule])
    curves = []
    for number, rule in enumerate(document.interest.rule, 1):
        held = rule.smith_wilson.spot if rule.smith_wilson is not None else rule.spot
        spots = read_curve(folder / held) if isinstance(held, str) else held
        try:
            curves.append(curve_of(rule, spots))
        except (ValueError, ArithmeticError) as error:
            raise ValueError(f"interest, rule {number}: {error}") from error
        _seal(files, folder, [held] if isinstance(held, str) else [])
    improvements = [rule.improvement for rule in document.mortality.rule]
    scales = tuple(read_scale(one, folder) if one else None for one in improvements)
    _seal(files, folder, [one.file for one in improvements if one])
    prices = {one.name: read_prices(one, folder) for one in document.inflation}
    grown: list[Prices | None] = []
    for item in document.expense:
        own = item.inflation
        grown.append(prices[own] if isinstance(own, str) else None if own is None else read_prices(own, folder))
        _seal(files, folder, [own.table] if own is not None and not isinstance(own, str) else [])
    _seal(files, folder, [one.table for one in document.inflation])
    return Basis(document, rates, lapses, tuple(curves), files, scales, prices, tuple(grown))


def _rates_of(rule: MortalityRule, folder: Path, files: dict[str, str]) -> Rates:
    if isinstance(rule.table, Law):
        return rule.table
    source = rule.table if isinstance(rule.table, TableFile) else TableFile(file=rule.table)
    _seal(files, folder, [source.file])
    return read_rates(folder / source.file, source.table, source.column, source.select_by)


def _seal(files: dict[str, str], folder: Path, names: list[str | None]) -> None:
    for name in names:
        if name is not None and name not in files and (folder / name).is_file():
            files[name] = hashlib.sha256((folder / name).read_bytes()).hexdigest()
