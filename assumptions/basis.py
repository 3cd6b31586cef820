"""A basis: mortality, lapse, interest and expenses under one name, with its tables read and its digest."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

from pydantic import Field, field_validator

from .expenses import Expense
from .improvement import Scale, read_scale
from .indices import Index
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
    index: list[Index] = Field(default_factory=list, description="indices that increases of payments may follow")
    claims: Claims = Field(default_factory=Claims, description="when a death benefit is paid")

    @field_validator("index")
    @classmethod
    def _named_once(cls, indices: list[Index]) -> list[Index]:
        names = [index.name for index in indices]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f"two indices are called '{name}'")
        return indices

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

    @cached_property
    def digest(self) -> str:
        """SHA-256 of the document and of every table file that it names."""
        document = self.document.model_dump(mode="json", by_alias=True)
        text = json.dumps([document, sorted(self.files.items())], sort_keys=True, ensure_ascii=False)
        return hashlib.sha256(text.encode()).hexdigest()

    @property
    def title(self) -> str:
        """The name that the basis goes by."""
        return self.document.title or "untitled basis"


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
    for rule in document.interest.rule:
        held = rule.smith_wilson.spot if rule.smith_wilson is not None else rule.spot
        curves.append(curve_of(rule, read_curve(folder / held) if isinstance(held, str) else held))
        _seal(files, folder, [held] if isinstance(held, str) else [])
    improvements = [rule.improvement for rule in document.mortality.rule]
    scales = tuple(read_scale(one, folder) if one else None for one in improvements)
    _seal(files, folder, [one.table for one in improvements if one])
    return Basis(document, rates, lapses, tuple(curves), files, scales)


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
