"""The assurances of the invented demo office: terms, sums assured and the premiums that fit them."""

from __future__ import annotations

import numpy as np

from .demo_buyers import Buyers, Columns, instalments
from .demo_rates import ASSURED_RATES as RATES


def level_term(buyers: Buyers) -> Columns:
    """Term assurance of a level sum."""
    n = buyers.terms((10, 15, 20, 25, 30), (0.15, 0.20, 0.30, 0.20, 0.15), end_age=75)
    amount = buyers.amounts(150_000, 0.6, 5_000)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    net = RATES.assurance(sex, x, n) / RATES.annuity(sex, x, n)
    return {
        "term_years": n.astype(np.float64),
        "premium_years": n.astype(np.float64),
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(1.15 * net * amount + 36, frequency),
    }


def decreasing_term(buyers: Buyers) -> Columns:
    """Term assurance that falls by a level part a year; premiums for four fifths of the term."""
    n = buyers.terms((10, 15, 20, 25, 30), (0.10, 0.20, 0.35, 0.25, 0.10), end_age=70)
    paying = np.maximum(4, n - n // 5)
    amount = buyers.amounts(180_000, 0.5, 5_000)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    net = RATES.falling(sex, x, n) / RATES.annuity(sex, x, paying)
    return {
        "term_years": n.astype(np.float64),
        "premium_years": paying.astype(np.float64),
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(1.14 * net * amount + 38, frequency),
    }


def whole_life(buyers: Buyers) -> Columns:
    """Whole life assurance, premiums for a number of years."""
    paying = buyers.terms((10, 15, 20, 25), (0.15, 0.30, 0.35, 0.20), end_age=80)
    amount = buyers.amounts(25_000, 0.5, 1_000)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    net = RATES.whole_assurance(sex, x) / RATES.annuity(sex, x, paying)
    return {
        "premium_years": paying.astype(np.float64),
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(1.12 * net * amount + 40, frequency),
    }


def whole_life_for_life(buyers: Buyers) -> Columns:
    """Whole life assurance, premiums for life."""
    amount = buyers.amounts(12_000, 0.5, 500)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    net = RATES.whole_assurance(sex, x) / RATES.whole_annuity(sex, x)
    return {
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(1.12 * net * amount + 34, frequency),
    }


def endowment(buyers: Buyers) -> Columns:
    """Endowment assurance; one in ten stops paying premiums five years early."""
    n = buyers.terms((10, 12, 15, 20, 25, 30), (0.15, 0.10, 0.25, 0.25, 0.15, 0.10), end_age=75)
    shorter = buyers.random.random(len(buyers)) < 0.10
    paying = np.where(shorter & (n >= 10), n - 5, n)
    amount = buyers.amounts(30_000, 0.6, 1_000)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    benefit = RATES.assurance(sex, x, n) + RATES.survival(sex, x, n)
    net = benefit / RATES.annuity(sex, x, paying)
    return {
        "term_years": n.astype(np.float64),
        "premium_years": paying.astype(np.float64),
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(1.06 * net * amount + 32, frequency),
    }


def pure_endowment(buyers: Buyers) -> Columns:
    """Pure endowment with the gross premiums back on death."""
    n = buyers.terms((8, 10, 12, 15, 18), (0.15, 0.30, 0.20, 0.20, 0.15), end_age=70)
    amount = buyers.amounts(22_000, 0.5, 1_000)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    # The premiums that come back on death are gross premiums: they stand on both sides of the equation.
    paid = RATES.annuity(sex, x, n) / 1.06 - RATES.rising(sex, x, n)
    yearly = amount * RATES.survival(sex, x, n) / paid
    return {
        "term_years": n.astype(np.float64),
        "premium_years": n.astype(np.float64),
        "sum_assured": amount,
        "premium_frequency": frequency,
        "premium_pa": instalments(yearly + 32, frequency),
    }
