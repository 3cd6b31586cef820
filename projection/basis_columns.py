"""Columns of the extract that bases and designs look at, checked before anything is valued."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from assumptions.basis import Basis
from portfolios.checks import needed_columns, number_columns
from portfolios.designs import Design
from portfolios.extract import Extract

from .lives import need_ratings, ratings_used, rule_columns


@dataclass(frozen=True)
class Needs:
    """Columns to read, and of those that rules look at the kind in the extract (text, number, day, flag)."""

    needed: tuple[str, ...]
    kinds: dict[str, str]


def needs_of(extract: Extract, designs: list[Design], bases: Iterable[Basis], others: Iterable[str] = ()) -> Needs:
    """Return what is to be read of an extract that is valued on some bases; others: further columns.

    Raises ExtractError where a column is missing or holds something else, and DocumentError where a basis asks for
    ratings that the extract does not give.
    """
    held, numbers, asked = extract.column_names, number_columns(designs), list[str]()
    ratings: list[str] = []
    for basis in bases:
        numbers += until_columns(basis)
        asked += rule_columns(basis, designs, held)
        need_ratings(basis, designs, held)
        ratings += ratings_used(basis, designs, held)
    needed = needed_columns(designs, [*numbers, *asked, *ratings, *others])
    extract.need(needed, numbers=numbers)
    return Needs(needed, {column: str(extract.column_kind(column)) for column in dict.fromkeys(asked)})


def until_columns(basis: Basis) -> list[str]:
    """Return the columns that say when lapses stop."""
    rules = basis.document.lapse.rule if basis.document.lapse else []
    return [rule.until for rule in rules if isinstance(rule.until, str)]
