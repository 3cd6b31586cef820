"""The bases that a run values on, side by side, with one pass over the extract.

Each has an engine, sums and a sample of its own. A policy is valued on every basis or on none, so that figures that
stand side by side are of the same policies.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.chunk import Chunk

from .basis_names import OWN, check_name
from .documents import DocumentError
from .engine import Engine, Valued
from .plain_check import Sample
from .tally import Tally


@dataclass
class Side:
    """A basis at work. name: OWN, or what the run document calls it."""

    name: str
    basis: Basis
    engine: Engine
    tally: Tally
    sample: Sample

    @property
    def said(self) -> str:
        """The basis in the words of a message."""
        return f"on basis '{self.name}': " if self.name else ""


def named_bases(basis: Basis, further: Mapping[str, Basis]) -> dict[str, Basis]:
    """Return the run's own basis and the further ones by name. Raises DocumentError for a name that is no good."""
    for name in further:
        try:
            check_name(name)
        except ValueError as error:
            raise DocumentError(f"further bases: {error}") from None
    return {OWN: basis, **further}


def value_on_all(sides: list[Side], chunk: Chunk) -> tuple[list[Valued], NDArray[np.int8]]:
    """Value a chunk on every basis; return the results, and per policy the place of the first basis that refuses it.

    The place is -1 where no basis does. A policy that a later basis refuses is taken out of the earlier ones, by
    valuing the chunk on them again without it.
    """
    found = [sides[0].engine.value(chunk)]
    refused = np.where(found[0].checked.reason != 0, 0, -1).astype(np.int8)
    for place, side in enumerate(sides[1:], 1):
        found.append(side.engine.value(chunk, found[-1].placed))
        refused[(found[-1].checked.reason != 0) & (refused < 0)] = place
    left_out = np.count_nonzero(found[-1].checked.reason)
    for place, side in enumerate(sides[:-1]):
        if np.count_nonzero(found[place].checked.reason) < left_out:
            again = side.engine.value(chunk, found[-1].placed)
            again.add_seconds(found[place].seconds)
            found[place] = again
    return found, refused
