"""The products of the invented demo office: how many of each are in force, who bought them and since when."""

from __future__ import annotations

from . import demo_annuities as annuities
from . import demo_assurances as assurances
from .demo_buyers import Product

PRODUCTS: tuple[Product, ...] = (
    Product("LARBOARD", 0.170, (20, 34, 60), 0.46, 28, 7, assurances.level_term),
    Product("EBBSTONE", 0.100, (23, 33, 58), 0.44, 26, 8, assurances.decreasing_term),
    Product("THOLEPIN", 0.070, (18, 38, 65), 0.52, 38, 14, assurances.whole_life),
    Product("STEMPOST", 0.080, (30, 55, 72), 0.57, 38, 11, assurances.whole_life_for_life),
    Product("QUAYWARD", 0.200, (18, 32, 60), 0.49, 28, 9, assurances.endowment),
    Product("TIDEPOST", 0.060, (20, 36, 58), 0.53, 18, 6, assurances.pure_endowment),
    Product("FAIRLEAD", 0.120, (22, 33, 55), 0.48, 35, 12, annuities.step_down_deferred),
    Product("NETLOFT", 0.040, (36, 54, 64), 0.50, 23, 8, annuities.single_premium_deferred),
    Product("MARRAM", 0.060, (58, 66, 80), 0.51, 30, 8, annuities.immediate_arrears),
    Product("OARLOCK", 0.050, (58, 66, 80), 0.47, 28, 8, annuities.immediate_guaranteed),
    Product("GANGPLANK", 0.015, (55, 61, 68), 0.45, 12, 4, annuities.temporary),
    Product("SPRINGTIDE", 0.035, (57, 65, 78), 0.50, 26, 8, annuities.escalating),
)

UNRATED_CODES = ("FAIRLEAD", "NETLOFT")
IN_PAYMENT_CODES = ("MARRAM", "OARLOCK", "GANGPLANK", "SPRINGTIDE")
