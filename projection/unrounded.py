"""Values of policies in memory, not rounded: for premiums and alterations, which solve for an amount."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.chunk import Chunk
from portfolios.designs import Design
from portfolios.exception_rows import exception_rows
from portfolios.extract import open_extract

from .basis_columns import needs_of
from .engine import Engine
from .settings import Settings

Numbers = NDArray[np.float64]


@dataclass(frozen=True)
class Unrounded:
    """Values of policies in currency, not rounded.

    parts: benefits, expenses with commission, premiums, shape (n, 3), NaN for a policy that is not valued;
    exceptions: those, as a run would list them.
    """

    parts: Numbers
    exceptions: pa.Table

    @property
    def reserve(self) -> Numbers:
        """Value of benefits and expenses less that of premiums, shape (n,)."""
        return self.parts[:, 0] + self.parts[:, 1] - self.parts[:, 2]

    @property
    def net(self) -> Numbers:
        """Value of benefits less that of premiums, without expenses and commission, shape (n,)."""
        return self.parts[:, 0] - self.parts[:, 2]


class Valuer:
    """Values tables of policies with one set of columns, on one basis; curves once made are kept.

    Raises DocumentError and ExtractError where designs, basis and columns do not fit together.
    """

    def __init__(
        self,
        columns: pa.Table,
        designs: list[Design],
        basis: Basis,
        settings: Settings,
        in_force: Collection[str] = ("in force",),
    ) -> None:
        extract = open_extract(columns)
        needs = needs_of(extract, designs, [basis])
        self.needed = needs.needed
        self.engine = Engine(designs, basis, settings, needs.needed, needs.kinds, in_force)

    def value(self, policies: pa.Table) -> Unrounded:
        """Value a table of policies. Identifiers need not be unique."""
        parts = np.full((policies.num_rows, 3), np.nan)
        exceptions = []
        for chunk in _chunks(policies, self.needed):
            valued = self.engine.value(chunk)
            good = np.flatnonzero(valued.valued)
            parts[chunk.start + good] = valued.results.parts[good]
            exceptions.append(exception_rows(chunk, valued.checked, self.needed))
        return Unrounded(parts, pa.concat_tables(exceptions) if exceptions else pa.table({}))


def _chunks(policies: pa.Table, needed: tuple[str, ...]) -> list[Chunk]:
    extract = open_extract(policies)
    return list(extract.chunks(needed)) if extract.rows else []
