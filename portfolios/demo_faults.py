"""Policies of the invented demo office that are wrong on purpose, one of each kind.

A month end meets such rows; the demo has them so that its runs have exceptions to list.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from .demo_policies import TEXTS, VALUATION_DAY, Block, draw_product
from .demo_products import PRODUCTS

Spoil = Callable[[Block, int], None]


@dataclass(frozen=True)
class Fault:
    """One kind of wrong policy: what is wrong, on which product, and how it is made so."""

    meaning: str
    product: str
    spoil: Spoil


def _misspelt(block: Block, row: int) -> None:
    block.codes["product"][row] = TEXTS["product"].index("LARBORD")


def _surrendered(block: Block, row: int) -> None:
    block.codes["status"][row] = TEXTS["status"].index("surrendered")


def _without_birth(block: Block, row: int) -> None:
    block.days["birth_date"][row] = np.datetime64("NaT")


def _dates_swapped(block: Block, row: int) -> None:
    birth, commencement = block.days["birth_date"], block.days["commencement_date"]
    birth[row], commencement[row] = commencement[row], birth[row]


def _not_yet_sold(block: Block, row: int) -> None:
    block.days["commencement_date"][row] = VALUATION_DAY + np.timedelta64(15, "D")


def _a_century_early(block: Block, row: int) -> None:
    block.days["birth_date"][row] -= np.timedelta64(36_524, "D")


def _ended(block: Block, row: int) -> None:
    late = np.timedelta64(int(366 * block.numbers["term_years"][row]) + 40, "D")
    shift = VALUATION_DAY - late - block.days["commencement_date"][row]
    for days in block.days.values():
        days[row] += shift


def _number(name: str, change: Callable[[float], float]) -> Spoil:
    def spoil(block: Block, row: int) -> None:
        block.numbers[name][row] = change(block.numbers[name][row])

    return spoil


def _same_identifier(block: Block, row: int) -> None:
    if row > 0:
        block.issued[row] = block.issued[row - 1]
    elif len(block) > 1:
        block.issued[1] = block.issued[0]


FAULTS: tuple[Fault, ...] = (
    Fault("amount missing", "QUAYWARD", _number("sum_assured", lambda _: np.nan)),
    Fault("status not in force", "QUAYWARD", _surrendered),
    Fault("birth date missing", "STEMPOST", _without_birth),
    Fault("product not known", "LARBOARD", _misspelt),
    Fault("amount negative", "MARRAM", _number("annuity_pa", lambda amount: -amount)),
    Fault("born after commencement", "THOLEPIN", _dates_swapped),
    Fault("commences after the valuation date", "FAIRLEAD", _not_yet_sold),
    Fault("ended before the valuation date", "LARBOARD", _ended),
    Fault("age outside the tables", "OARLOCK", _a_century_early),
    Fault("three premiums a year", "EBBSTONE", _number("premium_frequency", lambda _: 3.0)),
    Fault("premiums for 250 years", "THOLEPIN", _number("premium_years", lambda _: 250.0)),
    Fault("term not in whole months", "TIDEPOST", _number("term_years", lambda years: years - 0.7)),
    Fault("identifier of another policy", "LARBOARD", _same_identifier),
)


def fault_rows(policies: int) -> list[int]:
    """Return the rows of the wrong policies, spread through the office; one for each fault, in their order.

    An office of fewer than 130 policies has only one wrong policy for every ten.
    """
    count = min(len(FAULTS), policies // 10)
    return [(2 * place + 1) * policies // (2 * count) for place in range(count)]


def spoil_block(block: Block, start: int, policies: int, seed: int) -> None:
    """Make the wrong policies of a block, whose first row is the ``start``-th of the office."""
    for fault, row in zip(FAULTS, fault_rows(policies), strict=False):
        if start <= row < start + len(block):
            random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, start, row])))
            code = next(code for code, product in enumerate(PRODUCTS) if product.code == fault.product)
            draw_product(block, code, np.array([row - start]), random)
            fault.spoil(block, row - start)
