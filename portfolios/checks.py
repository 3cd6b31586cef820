"""Checking the policies of a chunk: the first rule that each one breaks, if any.

The checks run in this order, and a policy is reported with the first that it fails: identifier missing, not
readable, not unique; product not known; status not in force; birth date, then commencement date, missing or
out of range; commenced before birth; commences after the valuation date; on two lives, who lives, and the birth
date of the second life where it lives; on named states, the state; then each number that the product's design uses,
in the order of the registry of columns and after it by name: missing, not finite, negative, frequency not known, out
of range, duration not in whole months. A number is looked at only for the products whose design uses it.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from datetime import date
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
import pyarrow as pa

from .chunk import MISSING_DAY, Chunk
from .designs import Design
from .identifiers import Duplicates, byte_lengths, string_bytes
from .named_states import DEAD, is_named, living
from .number_rules import Mask, NumberRule, needed_columns, number_columns, number_rules
from .reasons import Reason
from .states import LIVES

__all__ = ["Checked", "Checks", "check_chunk", "needed_columns", "number_columns"]

EARLIEST = (date(1800, 1, 1) - date(1970, 1, 1)).days
LATEST = (date(2200, 12, 31) - date(1970, 1, 1)).days


class Checked(NamedTuple):
    """Result of the checks, one entry per policy, shape (n,).

    product: position of the design, -1 where not known; reason: a Reason, 0 where fine; field: position of
    the column in question among the needed ones, -1 where there is none.
    """

    product: npt.NDArray[np.int32]
    reason: npt.NDArray[np.uint8]
    field: npt.NDArray[np.int16]


class Checks:
    """The checks of one run, prepared; may be used by several threads on different chunks.

    designs: in the order that gives the product its position; needed: the columns that the run reads, which
    must hold those always needed and those of the designs. Raises ValueError where one is not among them.
    """

    def __init__(
        self,
        designs: Sequence[Design],
        valuation_date: date,
        in_force: Collection[str],
        duplicates: Duplicates,
        needed: Sequence[str],
    ) -> None:
        absent = [name for name in needed_columns(designs) if name not in needed]
        if absent:
            raise ValueError(f"the needed columns lack '{absent[0]}'")
        self._places = {name: place for place, name in enumerate(needed)}
        self._codes = {design.code: place for place, design in enumerate(designs)}
        self._in_force = frozenset(in_force)
        self._today = (valuation_date - date(1970, 1, 1)).days
        self.duplicates = duplicates
        self._rules = number_rules(designs)
        self._named = {place: {*living(design), DEAD} for place, design in enumerate(designs) if is_named(design)}
        self._on_two = np.array([design.states == "two lives" for design in designs] + [False])

    def check(self, chunk: Chunk) -> Checked:
        """Return the product of each policy and the first rule that it breaks."""
        product = self._products(chunk)
        checked = Checked(product, np.zeros(chunk.n, dtype=np.uint8), np.full(chunk.n, -1, dtype=np.int16))
        self._check_identifiers(chunk, checked)
        self._mark(checked, product < 0, Reason.PRODUCT_UNKNOWN, "product")
        self._check_status(chunk, checked)
        self._check_dates(chunk, checked)
        if self._on_two.any():
            self._check_second(chunk, checked)
        if self._named:
            self._check_state(chunk, checked)
        self._check_numbers(chunk, checked)
        return checked

    def _mark(self, checked: Checked, bad: Mask, reason: Reason, column: str) -> None:
        if bad.any():
            rows = np.flatnonzero(bad & (checked.reason == 0))
            checked.reason[rows] = reason
            checked.field[rows] = self._places[column]

    def _products(self, chunk: Chunk) -> npt.NDArray[np.int32]:
        codes, values = chunk.text("product")
        places = np.array([self._codes.get(value, -1) for value in values] + [-1], dtype=np.int32)
        return places.take(codes, mode="wrap")

    def _check_identifiers(self, chunk: Chunk, checked: Checked) -> None:
        self._mark(checked, byte_lengths(chunk.ids) == 0, Reason.IDENTIFIER_MISSING, "policy_id")
        unreadable = _unreadable(chunk.ids)
        if unreadable is not None:
            self._mark(checked, unreadable, Reason.IDENTIFIER_UNREADABLE, "policy_id")
        if len(self.duplicates):
            twice = self.duplicates.mask(chunk.ids, chunk.hashes)
            self._mark(checked, twice, Reason.IDENTIFIER_NOT_UNIQUE, "policy_id")

    def _check_status(self, chunk: Chunk, checked: Checked) -> None:
        codes, values = chunk.text("status")
        not_valued = np.array([value not in self._in_force for value in values] + [True])
        if not_valued[:-1].any() or (codes < 0).any():
            self._mark(checked, not_valued.take(codes, mode="wrap"), Reason.NOT_IN_FORCE, "status")

    def _check_dates(self, chunk: Chunk, checked: Checked) -> None:
        for column in ("birth_date", "commencement_date"):
            days = chunk.day(column)
            outside = (days < EARLIEST) | (days > LATEST)
            if outside.any():
                self._mark(checked, days == MISSING_DAY, Reason.DATE_MISSING, column)
                self._mark(checked, outside, Reason.DATE_OUT_OF_RANGE, column)
        commenced = chunk.day("commencement_date")
        early = commenced < chunk.day("birth_date")
        self._mark(checked, early, Reason.COMMENCED_BEFORE_BIRTH, "commencement_date")
        self._mark(checked, commenced > self._today, Reason.COMMENCES_LATER, "commencement_date")

    def _check_second(self, chunk: Chunk, checked: Checked) -> None:
        on_two = self._on_two.take(checked.product, mode="wrap")
        codes, values = chunk.text("lives")
        unknown = np.array([value not in LIVES for value in values] + [True]).take(codes, mode="wrap")
        self._mark(checked, on_two & unknown, Reason.LIVES_UNKNOWN, "lives")
        # The birth date of a second life that is dead, or was never there, does not matter.
        dead = np.array([value in ("first", "none") for value in values] + [True]).take(codes, mode="wrap")
        days, alive = chunk.day("second_birth_date"), on_two & ~dead
        self._mark(checked, alive & (days == MISSING_DAY), Reason.DATE_MISSING, "second_birth_date")
        outside = (days < EARLIEST) | (days > LATEST)
        self._mark(checked, alive & outside, Reason.DATE_OUT_OF_RANGE, "second_birth_date")
        early = chunk.day("commencement_date") < days
        self._mark(checked, alive & early, Reason.COMMENCED_BEFORE_BIRTH, "second_birth_date")

    def _check_state(self, chunk: Chunk, checked: Checked) -> None:
        codes, values = chunk.text("state")
        for place, states in self._named.items():
            unknown = np.array([value not in states for value in values] + [True]).take(codes, mode="wrap")
            self._mark(checked, unknown & (checked.product == place), Reason.STATE_UNKNOWN, "state")

    def _check_numbers(self, chunk: Chunk, checked: Checked) -> None:
        places = checked.product.astype(np.intp)
        looked_at: dict[tuple[bool, ...], Mask] = {}
        for rule in self._rules:
            bad = rule.broken(chunk.number(rule.column), chunk.is_whole(rule.column))
            if not bad.any():
                continue
            if rule.products not in looked_at:
                # The last entry stands for an unknown product, whose numbers nobody looks at.
                looked_at[rule.products] = np.array([*rule.products, False]).take(places, mode="wrap")
            bad &= looked_at[rule.products]
            if bad.any():
                self._mark_numbers(chunk, checked, rule, bad)

    def _mark_numbers(self, chunk: Chunk, checked: Checked, rule: NumberRule, bad: Mask) -> None:
        rows = np.flatnonzero(bad & (checked.reason == 0))
        missing = chunk.raw(rule.column).take(pa.array(rows)).is_null().to_numpy(zero_copy_only=False)
        checked.reason[rows] = rule.reasons(chunk.number(rule.column)[rows], missing)
        checked.field[rows] = self._places[rule.column]


def check_chunk(
    chunk: Chunk,
    designs: Sequence[Design],
    valuation_date: date,
    in_force: Collection[str],
    duplicates: Duplicates,
    needed: Sequence[str],
) -> Checked:
    """Check one chunk; for many, prepare ``Checks`` once."""
    return Checks(designs, valuation_date, in_force, duplicates, needed).check(chunk)


def _unreadable(ids: pa.Array) -> Mask | None:
    """Say which identifiers are not UTF-8, or None where all are."""
    if int(string_bytes(ids).max(initial=0)) < 128:
        return None
    try:
        ids.validate(full=True)
    except pa.ArrowInvalid:
        cells = ids.cast(pa.binary()).to_pylist()
        return np.array([cell is not None and not _is_utf8(cell) for cell in cells])
    return None


def _is_utf8(cell: bytes) -> bool:
    try:
        cell.decode()
    except UnicodeDecodeError:
        return False
    return True
