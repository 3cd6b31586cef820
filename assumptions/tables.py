"""The files that assumptions come in: tables of rates, lapse rates by policy year, spot curves.

CSV and Parquet files have a column ``age`` and either ``rate`` (or another column named by the document) or
``select_0``, ``select_1`` ... and ``ultimate``, the last by attained age. XTbML files say what is in them.
"""

from __future__ import annotations

import math
import re
from pathlib import Path

import numpy as np

from .rate_table import RateTable, Rows, TableError
from .select_rows import SelectBy, by_entry_age, check_rate, consecutive_ages, keying, without_blank_ends
from .table_files import Columns, is_xml, read_columns
from .xtbml import read_xtbml
from .xtbml_axes import rate_table, yearly_by_duration

__all__ = ["RateTable", "TableError", "read_curve", "read_lapse", "read_rates"]


def read_rates(
    path: Path | str,
    table: int | str | None = None,
    column: str | None = None,
    select_by: SelectBy | None = None,
) -> RateTable:
    """Read yearly rates by age from a CSV, Parquet or XTbML file.

    table: which table of an XTbML file, by number from 1 or by title; absent, a select and an ultimate table
    that make up the file are taken together. column: which column of a CSV or Parquet file holds rates by
    attained age; its select columns are then left aside. select_by: whether row x, column t of select rates
    is q_[x]+t ("entry age") or q_[x-t]+t ("attained age"); not looked at without select rates of two or more
    years, and needed with them unless an XTbML file says it itself.

    Raises TableError, with file, place, value and remedy, for anything that is not a table of yearly rates.
    """
    if is_xml(path):
        if column is not None:
            raise TableError(f"{path}: an XTbML file has no columns; use 'table' in place of 'column'")
        return rate_table(str(path), read_xtbml(path), table, select_by)
    if table is not None:
        raise TableError(f"{path}: the file holds one table only; use 'column' in place of 'table'")
    columns = read_columns(path)
    places = [f"{path}, {place}" for place in columns.places]
    first = consecutive_ages(columns.numbers("age"), places)
    selects = _select_columns(columns)
    if column is not None or not selects:
        rates, first = _by_age(columns, column or "rate", first)
        return RateTable(Path(path).stem, rates, first, file=str(path))
    if "rate" in columns.cells:
        raise TableError(f"{path}: both 'rate' and select columns; remove one, or say column = 'rate'")
    by = keying(str(path), None, select_by) if len(selects) > 1 else "entry age"
    held = [columns.numbers(name, blanks=True) for name in selects]
    for name, rates_held in zip(selects, held, strict=True):
        _check(columns, name, rates_held)
    rows, first_entry = by_entry_age(np.array(held).T, first, by)
    if not np.isfinite(rows[:, 0]).any():
        raise TableError(f"{path}: column 'select_0' is blank; leave the select columns out")
    ultimate, first = _by_age(columns, "ultimate", first)
    return RateTable(Path(path).stem, ultimate, first, rows, first_entry, file=str(path))


def read_lapse(path: Path | str) -> list[float]:
    """Read yearly lapse rates by policy year, the first year first.

    A CSV or Parquet file with columns ``year`` (1, 2, 3 ...) and ``rate``, or an XTbML file with one table by
    duration. Raises TableError for missing years and for rates outside 0 to 1.
    """
    if is_xml(path):
        tables = read_xtbml(path)
        if len(tables) != 1:
            raise TableError(f"{path}: {len(tables)} tables; lapse rates are read from a file with one")
        return yearly_by_duration(str(path), tables[0])
    columns = read_columns(path)
    for row, year in enumerate(columns.numbers("year")):
        if year != row + 1:
            place = columns.places[row]
            raise TableError(f"{path}, {place}: year {year:g} where {row + 1} is due; years go 1, 2, 3 ...")
    rates = columns.numbers("rate")
    _check(columns, "rate", rates)
    return rates


def read_curve(path: Path | str) -> dict[float, float]:
    """Read spot rates by maturity in years: a CSV or Parquet file with columns ``maturity`` and ``rate``.

    Raises TableError for a maturity that is not above 0 or there twice, and for a rate that does not lie
    above -0.5 and not above 1.
    """
    columns = read_columns(path)
    curve: dict[float, float] = {}
    pairs = zip(columns.numbers("maturity"), columns.numbers("rate"), columns.places, strict=True)
    for maturity, rate, place in pairs:
        if maturity <= 0 or maturity in curve:
            fault = "is there twice" if maturity in curve else "is not above 0"
            raise TableError(f"{path}, {place}: maturity {maturity:g} {fault}; give each once, in years")
        if not -0.5 < rate <= 1:
            raise TableError(f"{path}, {place}: rate {rate:g} must lie above -0.5, up to 1; 3 % is 0.03")
        curve[maturity] = rate
    return curve


def _select_columns(columns: Columns) -> list[str]:
    """Return the names of select columns in order of duration, checked to run from 0 without gaps."""
    matches = [re.fullmatch(r"select_([0-9]{1,3})", name) for name in columns.cells]
    found = {int(match[1]): match[0] for match in matches if match}
    names = [found[duration] for duration in sorted(found)]
    if names != [f"select_{duration}" for duration in range(len(names))]:
        raise TableError(f"{columns.file}: select columns {', '.join(names)}; they go select_0, select_1 ...")
    return names


def _by_age(columns: Columns, name: str, first_age: int) -> tuple[Rows, int]:
    # A column among others may begin later or end earlier than they do, but not have a hole in it.
    rates = columns.numbers(name, blanks=name.strip().lower() != "rate")
    _check(columns, name, rates)
    held, first = without_blank_ends(np.array(rates), first_age)
    for hole in np.flatnonzero(np.isnan(held))[:1]:
        age = first + int(hole)
        place = columns.places[age - first_age]
        raise TableError(f"{columns.file}, {place}: column '{name}' is blank at age {age}; fill it in")
    if not held.size:
        raise TableError(f"{columns.file}: column '{name}' is blank; a table needs rates by attained age")
    return held, first


def _check(columns: Columns, name: str, rates: list[float]) -> None:
    for rate, place in zip(rates, columns.places, strict=True):
        if not math.isnan(rate):
            check_rate(rate, f"{columns.file}, {place}, column '{name.strip()}'")
