"""The annuities of the invented demo office, deferred and in payment, and the premiums that fit them."""

from __future__ import annotations

import numpy as np

from .demo_buyers import Buyers, Columns, instalments
from .demo_rates import ANNUITANT_RATES as RATES
from .demo_rates import ANNUITANTS, PREMIUM_INTEREST, Floats, certain_annuity, commutation

ESCALATIONS = (0.01, 0.015, 0.02, 0.03)


def step_down_deferred(buyers: Buyers) -> Columns:
    """Deferred annuity to a pension age, premiums that step down, five years certain once in payment."""
    start = buyers.choice((60, 65, 67), (0.15, 0.45, 0.40))
    n = np.maximum(5, start - np.floor(buyers.age)).astype(np.int64)
    annuity = buyers.amounts(4_800, 0.5, 60)
    x, sex, frequency = buyers.entered, buyers.sex, buyers.frequencies()
    rates = RATES
    steps = (
        0.25 * rates.annuity(sex, x, np.minimum(n, 10))
        + 0.25 * rates.annuity(sex, x, np.minimum(n, 20))
        + 0.50 * rates.annuity(sex, x, n)
    )
    five = np.full(len(buyers), 5, dtype=np.int64)
    in_payment = certain_annuity(five.astype(np.float64)) + rates.N[sex, x + n + 5] / rates.D[sex, x + n]
    yearly = 1.06 * annuity * rates.survival(sex, x, n) * (in_payment - 0.46) / steps + 36
    return {
        "deferral_years": n.astype(np.float64),
        "premium_years": n.astype(np.float64),
        "annuity_pa": annuity,
        "annuity_frequency": buyers.choice((12, 4, 1), (0.90, 0.06, 0.04)),
        "premium_frequency": frequency,
        "premium_pa": instalments(yearly, frequency),
    }


def single_premium_deferred(buyers: Buyers) -> Columns:
    """Deferred annuity to the 67th birthday, whose single premium comes back on death before it."""
    n = np.ceil(67 - buyers.age).astype(np.int64)
    single = buyers.amounts(40_000, 0.6, 500)
    x, sex = buyers.entered, buyers.sex
    back = RATES.assurance(sex, x, n)
    annuity = RATES.survival(sex, x, n) * (RATES.whole_annuity(sex, x + n) - 0.46)
    return {"single_premium": single, "annuity_pa": np.round(single * (0.95 - back) / annuity, 2)}


def _at_price(annuity: Floats, price: Floats) -> Columns:
    return {"annuity_pa": annuity, "single_premium": np.round(1.05 * annuity * price + 400, 2)}


def immediate_arrears(buyers: Buyers) -> Columns:
    """Annuity for life, monthly in arrears."""
    price = RATES.whole_annuity(buyers.sex, buyers.entered) - 0.54
    return _at_price(buyers.amounts(6_000, 0.6, 12), price)


def immediate_guaranteed(buyers: Buyers) -> Columns:
    """Annuity for life in advance, the first years certain."""
    years = buyers.choice((5, 10, 15), (0.35, 0.50, 0.15))
    x, sex, rates = buyers.entered, buyers.sex, RATES
    after = rates.N[sex, x + years.astype(np.int64)] / rates.D[sex, x]
    columns = _at_price(buyers.amounts(7_200, 0.6, 12), certain_annuity(years) + after - 0.46)
    frequency = buyers.choice((12, 4, 2, 1), (0.82, 0.08, 0.04, 0.06))
    return columns | {"guarantee_years": years, "annuity_frequency": frequency}


def temporary(buyers: Buyers) -> Columns:
    """Annuity for some years, quarterly in arrears."""
    n = buyers.terms((5, 7, 10, 12), (0.30, 0.25, 0.30, 0.15), end_age=80)
    price = RATES.annuity(buyers.sex, buyers.entered, n) - 0.54
    return _at_price(buyers.amounts(9_600, 0.5, 12), price) | {"term_years": n.astype(np.float64)}


_ESCALATING = [commutation(ANNUITANTS, (1 + PREMIUM_INTEREST) / (1 + rate) - 1) for rate in ESCALATIONS]


def escalating(buyers: Buyers) -> Columns:
    """Annuity for life that grows every year."""
    chosen = buyers.choice((0, 1, 2, 3), (0.25, 0.20, 0.40, 0.15))
    price = np.empty(len(buyers))
    for kind, rates in enumerate(_ESCALATING):
        here = chosen == kind
        price[here] = rates.whole_annuity(buyers.sex[here], buyers.entered[here]) - 0.46
    escalation = np.asarray(ESCALATIONS)[chosen.astype(np.int64)]
    frequency = buyers.choice((12, 4, 1), (0.88, 0.07, 0.05))
    columns = _at_price(buyers.amounts(5_400, 0.6, 12), price)
    return columns | {"escalation": escalation, "annuity_frequency": frequency}
