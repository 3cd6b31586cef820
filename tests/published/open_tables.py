"""Where the files of the open archive lie, and plain sums over a life made from their rates."""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np

from assumptions.tables import RateTable, read_rates

# Found without importing the package: only its data files are used.
_FOUND = find_spec("pymort")
FOLDER = Path(next(iter((_FOUND and _FOUND.submodule_search_locations) or ["absent"]))) / "table_xml"


def open_table(number: int, **words: Any) -> RateTable:
    """Read the file of the archive's table of that number."""
    return read_rates(FOLDER / f"t{number}.xml", **words)


def life_values(rates: RateTable, age: int, i: float, years: int | None = None) -> tuple[float, float]:
    """Annuity-due and assurance of 1 on a life that enters at ``age``; endowment for so many ``years``."""
    term = rates.final_age - age if years is None else years
    q = rates.rates_from(age, term)
    living = np.concatenate([[1.0], np.cumprod(1 - q)])
    v = 1 / (1 + i)
    powers = v ** np.arange(term + 1.0)
    annuity = float((living[:-1] * powers[:-1]).sum())
    survival = 0.0 if years is None else float(living[-1] * powers[-1])
    return annuity, float((living[:-1] * q * powers[1:]).sum()) + survival
