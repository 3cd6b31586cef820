"""Blocks of invented policies: columns of the extract, drawn product by product with numpy.

A block is drawn from its own random stream, so that it is the same whatever was drawn before it, and memory
does not grow with the number of policies.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from .demo_buyers import Buyers, Product
from .demo_products import IN_PAYMENT_CODES, PRODUCTS, UNRATED_CODES
from .demo_rates import Floats, Whole

VALUATION_DAY = np.datetime64("2026-11-30", "D")
OLDEST_AGE = 103
RATED_SHARE, RATED_YEARS = 0.04, 4
FIRST_OF_MONTH_SHARE = 0.3
DAYS_A_YEAR = 365.2425

# Texts by code. The last product and the last status belong to policies that are wrong on purpose.
TEXTS: dict[str, tuple[str, ...]] = {
    "product": (*(product.code for product in PRODUCTS), "LARBORD"),
    "status": ("in force", "surrendered"),
    "sex": ("F", "M"),
    "channel": ("branch", "broker", "employer", "online"),
    "region": ("Harbourside", "Lee Shore", "Middle Fells", "Outer Skerries", "Windward Parishes"),
    "policy_class": ("standard", "rated"),
}
DAYS = ("birth_date", "commencement_date")
NUMBERS = (
    "term_years",
    "premium_years",
    "deferral_years",
    "guarantee_years",
    "premium_pa",
    "premium_frequency",
    "single_premium",
    "sum_assured",
    "annuity_pa",
    "annuity_frequency",
    "escalation",
)
_CHANNELS = ((0.25, 0.30, 0.15, 0.30), (0.30, 0.55, 0.10, 0.05))
_REGIONS = (0.38, 0.17, 0.21, 0.06, 0.18)


@dataclass
class Block:
    """Columns of some policies; arrays of one length.

    issued: number of the policy, of which its identifier is made; codes: places in TEXTS; days: dates, NaT
    for none; numbers: NaN for none.
    """

    issued: Whole
    codes: dict[str, npt.NDArray[np.int8]]
    days: dict[str, npt.NDArray[np.datetime64]]
    numbers: dict[str, Floats] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.issued)


def draw_block(start: int, rows: int, seed: int) -> Block:
    """Draw the policies ``start`` to ``start + rows`` of the office, all of them right."""
    random = np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, start])))
    places = np.arange(start, start + rows, dtype=np.int64)
    block = Block(
        # Policies that have left the books leave gaps in the numbers.
        issued=7 * places + random.integers(1, 8, rows),
        codes={name: np.zeros(rows, dtype=np.int8) for name in TEXTS},
        days={name: np.full(rows, np.datetime64("NaT", "D")) for name in DAYS},
        numbers={name: np.full(rows, np.nan) for name in NUMBERS},
    )
    shares = np.cumsum([product.share for product in PRODUCTS])[:-1]
    block.codes["product"][:] = np.searchsorted(shares, random.random(rows), "right")
    block.codes["region"][:] = np.searchsorted(np.cumsum(_REGIONS)[:-1], random.random(rows), "right")
    for code in range(len(PRODUCTS)):
        draw_product(block, code, np.flatnonzero(block.codes["product"] == code), random)
    return block


def draw_product(block: Block, code: int, where: npt.NDArray[np.intp], random: np.random.Generator) -> None:
    """Draw policies of one product, the one with this place in PRODUCTS, into rows of the block."""
    product, rows = PRODUCTS[code], len(where)
    sex = (random.random(rows) >= product.women).astype(np.int64)
    age = random.triangular(*product.ages, rows)
    rated = (random.random(rows) < RATED_SHARE) & (product.code not in UNRATED_CODES)
    entered = np.floor(age).astype(np.int64) + RATED_YEARS * rated
    columns = product.columns(Buyers(random, age, sex, entered))
    commencement = _commencements(product, age, columns.get("term_years"), random)
    channels = _CHANNELS[product.code in IN_PAYMENT_CODES]
    block.codes["product"][where] = code
    block.codes["sex"][where] = sex
    block.codes["policy_class"][where] = rated
    block.codes["channel"][where] = np.searchsorted(np.cumsum(channels)[:-1], random.random(rows), "right")
    block.days["commencement_date"][where] = commencement
    block.days["birth_date"][where] = commencement - np.floor(age * DAYS_A_YEAR).astype("timedelta64[D]")
    for name in NUMBERS:
        block.numbers[name][where] = columns.get(name, np.nan)


def _commencements(
    product: Product, age: Floats, term: Floats | None, random: np.random.Generator
) -> npt.NDArray[np.datetime64]:
    """Dates of sale, more of them the nearer to the valuation date, at which no policy has ended."""
    longest = np.minimum(product.sold, OLDEST_AGE - age)
    if term is not None:
        longest = np.minimum(longest, term)
    # A year has at least 365 days, and the move to the first of the month takes at most 30.
    longest_days = 365 * longest - 32
    scale = 365 * product.scale
    drawn = random.random(len(age)) * -np.expm1(-longest_days / scale)
    days = VALUATION_DAY - np.floor(-scale * np.log1p(-drawn)).astype("timedelta64[D]")
    firsts = days.astype("datetime64[M]").astype("datetime64[D]")
    return np.where(random.random(len(age)) < FIRST_OF_MONTH_SHARE, firsts, days)
