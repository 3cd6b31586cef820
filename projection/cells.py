"""Cells: sets of policies that every rule of the basis treats alike.

Rules look at a few columns and tell few values apart. Each such column becomes a small code per policy, the
codes together a signature, and each distinct signature is looked up in the rules once, not once per policy.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date, timedelta
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from assumptions.rules import Band, Rule, first_fit
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.states import LIVES

from .documents import DocumentError
from .lives import LIFE, now, rule_columns
from .lives import second as second_column

EPOCH = date(1970, 1, 1)
OTHER = "\0any other"


@dataclass(frozen=True)
class Cell:
    """What the rules say of one set of policies: positions of design and rules, or the part that has none.

    lapse is -1 where the basis has no lapses; missing names the part of the basis without a fitting rule. lives:
    the value of that column, nothing on one life that lives. mortality is the rule of the first life, or of the only
    one that is left; second that of the second where both live.
    """

    design: int
    mortality: int = -1
    second: int = -1
    lives: str = ""
    lapse: int = -1
    interest: int = -1
    expenses: tuple[int, ...] = ()
    missing: str = ""
    streams: tuple[bool, ...] = ()
    """Which of the design's streams the policies have; nothing where all have all."""


class _Coder(Protocol):
    size: int

    def codes(self, chunk: Chunk) -> NDArray[np.int64]: ...

    def example(self, code: int) -> Any: ...


class _Listed:
    """Codes of a column whose values are only ever compared for equality."""

    def __init__(self, column: str, values: Iterable[Any]) -> None:
        self.column = column
        self.values = list(dict.fromkeys(values))
        self.size = len(self.values) + 2

    def codes(self, chunk: Chunk) -> NDArray[np.int64]:
        codes, values = chunk.text(self.column)
        other = len(self.values)
        # Flags are 'true' and 'false' as text.
        known = {
            str(value).lower() if isinstance(value, bool) else value: code for code, value in enumerate(self.values)
        }
        # The last entry answers for -1, a missing value.
        table = np.array([*(known.get(value, other) for value in values), other + 1], dtype=np.int64)
        return table[codes]

    def example(self, code: int) -> Any:
        return [*self.values, OTHER, None][code]


class _Measured:
    """Codes of a numeric or date column: below, at and between the values that rules mention."""

    def __init__(self, column: str, bounds: Iterable[float], dates: bool) -> None:
        self.column = column
        self.bounds = np.unique(np.array(list(bounds), dtype=np.float64))
        self.dates = dates
        self.size = 2 * len(self.bounds) + 2

    def codes(self, chunk: Chunk) -> NDArray[np.int64]:
        values: NDArray[Any] = chunk.day(self.column) if self.dates else chunk.number(self.column)
        missing = values == np.iinfo(np.int32).min if self.dates else np.isnan(values)
        codes = np.searchsorted(self.bounds, values, "left") + np.searchsorted(self.bounds, values, "right")
        codes[missing] = self.size - 1
        return codes.astype(np.int64, copy=False)

    def example(self, code: int) -> Any:
        if code == self.size - 1:
            return None
        outer = np.concatenate(([self.bounds[0] - 2], self.bounds, [self.bounds[-1] + 2]))
        place = code // 2
        value = outer[place + 1] if code % 2 else (outer[place] + outer[place + 1]) / 2
        if not self.dates:
            return float(value)
        # Between two neighbouring days there is no date; nobody has that code.
        return EPOCH + timedelta(days=int(np.floor(value)))


class Cells:
    """Finds the cell of every policy of a chunk; cells are numbered as they are met.

    kinds: per rule column its kind in the extract (text, number, day, flag). Raises DocumentError where a
    rule compares a column with a value of another kind.
    """

    def __init__(self, designs: list[Design], basis: Basis, kinds: dict[str, str]) -> None:
        self.designs, self.basis = designs, basis
        self.columns = [column for column in rule_columns(basis, designs, kinds) if column != "product"]
        rules = _placed(basis)
        self.coders: list[_Coder] = [_coder(column, kinds[column], rules, designs) for column in self.columns]
        self.cells: list[Cell] = []
        self._numbers: dict[Cell, int] = {}
        self._by_signature: dict[int, int] = {}

    def of(self, chunk: Chunk, product: NDArray[np.int32]) -> NDArray[np.int32]:
        """Return the cell number of each policy; product: position of its design, -1 where unknown gives -1."""
        signature = product.astype(np.int64)
        for coder in self.coders:
            signature *= coder.size
            signature += coder.codes(chunk)
        values, inverse = distinct(signature)
        numbers = np.array([self._number(int(value)) for value in values], dtype=np.int32)
        cells = numbers[inverse]
        cells[product < 0] = -1
        return cells

    def _number(self, signature: int) -> int:
        if signature not in self._by_signature:
            self._by_signature[signature] = self._resolve(signature)
        return self._by_signature[signature]

    def _resolve(self, signature: int) -> int:
        policy: dict[str, Any] = {}
        for column, coder in zip(reversed(self.columns), reversed(self.coders), strict=True):
            signature, code = divmod(signature, coder.size)
            policy[column] = coder.example(code)
        if signature < 0:
            return -1
        policy["product"] = self.designs[signature].code
        cell = self._rules_for(signature, policy)
        number = self._numbers.setdefault(cell, len(self.cells))
        if number == len(self.cells):
            self.cells.append(cell)
        return number

    def _rules_for(self, design: int, policy: dict[str, Any]) -> Cell:
        document = self.basis.document
        lives = now(self.designs[design], policy.get("lives"))
        if lives and lives not in LIVES:
            return Cell(design, missing="lives")  # the checks have listed the policy
        mortality = first_fit(document.mortality.rule, _of_life(policy, "second" if lives == "second" else "first"))
        second = first_fit(document.mortality.rule, _of_life(policy, "second")) if lives == "both" else -1
        if mortality is None or second is None:
            return Cell(design, missing="mortality")
        lapse = first_fit(document.lapse.rule, policy) if document.lapse else -1
        if lapse is None:
            return Cell(design, missing="lapse")
        interest = first_fit(document.interest.rule, policy)
        if interest is None:
            return Cell(design, missing="interest")
        expenses: list[int] = []
        for item in document.expense:
            rule = first_fit(item.rule, policy)
            if rule is None:
                return Cell(design, missing=f"expense '{item.name}'")
            expenses.append(rule)
        streams = tuple(stream.is_for(policy) for stream in self.designs[design].stream)
        has = () if all(streams) else streams
        return Cell(design, mortality, second, lives, lapse, interest, tuple(expenses), streams=has)


def _of_life(policy: dict[str, Any], life: str) -> dict[str, Any]:
    """What mortality rules see of a life: columns of the second life stand in for those of the first."""
    seen = {**policy, LIFE: life}
    if life == "second":
        seen |= {column: policy[second_column(column)] for column in policy if second_column(column) in policy}
    return seen


def _placed(basis: Basis) -> list[tuple[str, Rule]]:
    """Return every rule with its place as the author of the basis would count it."""
    count: dict[str, int] = {}
    placed = []
    for place, rule in basis.document.rules():
        count[place] = count.get(place, 0) + 1
        placed.append((f"{place}, rule {count[place]}", rule))
    return placed


_KINDS = {"text": "text", "number": "numbers", "day": "dates", "flag": "true and false"}


def _coder(column: str, kind: str, rules: list[tuple[str, Rule]], designs: list[Design]) -> _Coder:
    fitting: Any = {"text": str, "flag": bool, "number": (int, float), "day": date}[kind]
    values: list[Any] = list(LIVES) if column == "lives" else []
    for design in designs:
        for stream, asked_of, wanted in design.filters():
            if asked_of == column and kind != "text":
                raise DocumentError(
                    f"design {design.code}, stream '{stream}', for: key '{column}' asks for text, but the extract's "
                    f"column holds {_KINDS[kind]}; use a text column"
                )
            values += wanted if asked_of == column else []
    for place, rule in rules:
        # Of the second life the same is asked as of the first.
        condition = rule.for_.get(column, rule.for_.get(column.removeprefix("second_")))
        if condition is None:
            continue
        if isinstance(condition, Band):
            asked: list[Any] = [bound for bound in (condition.from_, condition.to) if bound is not None]
        else:
            asked = condition if isinstance(condition, list) else [condition]
        banded = isinstance(condition, Band) and kind not in ("number", "day")
        for value in asked:
            if banded or not isinstance(value, fitting) or (kind == "number" and isinstance(value, bool)):
                shown = repr(value) if isinstance(value, str) else str(value).lower()
                what = f"a band with the bound {shown}" if isinstance(condition, Band) else shown
                raise DocumentError(
                    f"{place}, for: key '{column}' is {what}, but the extract's column holds {_KINDS[kind]}; "
                    "no policy could ever fit: compare like with like"
                )
        values += asked
    if kind == "day":
        return _Measured(column, [(value - EPOCH).days for value in values], dates=True)
    if kind == "number":
        return _Measured(column, values, dates=False)
    return _Listed(column, values)


def distinct(values: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Distinct values and, per value, the position of its own; by counting where the range is small."""
    low = int(values.min(initial=0))
    span = int(values.max(initial=0)) - low + 1
    if span > 1 << 20:
        return np.unique(values, return_inverse=True)
    offsets = values - low
    present = np.zeros(span, dtype=bool)
    present[offsets] = True
    position = np.cumsum(present) - 1
    return np.flatnonzero(present) + low, position[offsets]
