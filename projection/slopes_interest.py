"""Slopes to interest: to the figures of a curve, and to spot rates at key maturities.

With v(t) = exp(-H(t)) and A(t) the value that hangs on v(t), a change of H moves the value by -A(t) dH(t). Everything
here is linear in the A(t), whose times are those of the payments; none is moved to another time.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from assumptions.interest import Curve, InterestRule, YieldCurve, curve_of

from .curves import meaning_of
from .engine import Engine
from .slopes import Gathering, Slope

Numbers = NDArray[np.float64]

KEY_MATURITIES = (1, 2, 3, 5, 7, 10, 15, 20, 30, 40)
"""Maturities in years of the key rates; common practice, no source at hand."""

BUMP = 1e-6
"""Change on either side where a curve's formula is differentiated by a difference: its error is some 1e-10."""


def interest_slopes(engine: Engine, gathered: Gathering) -> list[Slope]:
    """Return the slopes to the figures of each interest rule: its flat rate, forwards, or spot rates.

    A curve by Svensson's formula has none but those to key rates.
    """
    found: list[Slope] = []
    for rule, (times, hung) in _by_rule(engine, gathered).items():
        document, curve = engine.basis.document.interest.rule[rule], engine.basis.curves[rule]
        for at, rate, change in _figures(document, curve, times):
            slope = -float(hung @ change)
            found.append(Slope("interest", rule + 1, document.title, at, -1, slope, slope * rate))
    return found


def key_rate_slopes(engine: Engine, gathered: Gathering) -> list[Slope]:
    """Return the slopes to the spot rates at key maturities, by rule.

    Between two key maturities a change is shared in proportion to the distance (a tent for each maturity); before the
    first and after the last it is that of the nearest. The tents add up to 1, so that the slopes of a rule
    add up to that of a parallel shift of its annual spot rates. relative: the slope for 0.01.
    """
    found: list[Slope] = []
    for rule, (times, hung) in _by_rule(engine, gathered).items():
        document, curve = engine.basis.document.interest.rule[rule], engine.basis.curves[rule]
        change = times / (1 + _spot(curve, times))
        for maturity, tent in zip(KEY_MATURITIES, tents(times), strict=True):
            slope = -float(hung @ (change * tent))
            found.append(Slope("key rate", rule + 1, document.title, maturity, -1, slope, slope / 100))
    return found


def parallel(engine: Engine, gathered: Gathering) -> tuple[float, float]:
    """Return first and second derivative of the value to a parallel shift of all annual spot rates."""
    first = second = 0.0
    for rule, (times, hung) in _by_rule(engine, gathered).items():
        growth = 1 + _spot(engine.basis.curves[rule], times)
        first -= float(hung @ (times / growth))
        # v = (1 + s)^-t: its second derivative is t (t + 1) (1 + s)^-(t + 2).
        second += float(hung @ (times * (times + 1) / growth**2))
    return first, second


def tents(times: Numbers) -> Numbers:
    """Return the weights of the key rates at some times, shape (key maturities, times); they add up to 1."""
    nodes = np.array(KEY_MATURITIES, dtype=np.float64)
    return np.array([np.interp(times, nodes, row) for row in np.eye(len(nodes))])


def _by_rule(engine: Engine, gathered: Gathering) -> dict[int, tuple[Numbers, Numbers]]:
    """Times in years and what hangs on the discount factors there, by interest rule."""
    pieces: dict[int, list[tuple[Numbers, Numbers]]] = {}
    discount = engine.discount
    for code, number in sorted(discount.known.items()):
        rule, passed = meaning_of(code)
        payment, claim = discount.places[number]
        for place, claims in [(payment, False)] + ([(claim, True)] if claim != payment else []):
            times = discount.times(passed, claims)
            hung = gathered.row(place, len(times))
            there = np.flatnonzero(hung)
            if len(there):
                pieces.setdefault(rule, []).append((times[there], hung[there]))
    return {
        rule: (np.concatenate([times for times, _ in found]), np.concatenate([hung for _, hung in found]))
        for rule, found in sorted(pieces.items())
    }


def _spot(curve: YieldCurve, times: Numbers) -> Numbers:
    """Annual spot rates at some times; at time 0, where nothing hangs on it, 0."""
    later = np.maximum(times, 1e-9)
    return np.asarray(np.where(times > 0, curve.factors(later) ** (-1 / later) - 1, 0.0))


def _figures(document: InterestRule, curve: YieldCurve, times: Numbers) -> Iterator[tuple[float, float, Numbers]]:
    """Yield each figure of a curve: its year or maturity, its rate, and dH/dfigure at some times."""
    if document.flat is not None:
        yield 0.0, document.flat, times / (1 + document.flat)
    elif document.forward is not None:
        last = len(document.forward) - 1
        for year, rate in enumerate(document.forward):
            lasting = np.maximum(times - year, 0) if year == last else np.clip(times - year, 0, 1)
            yield float(year + 1), rate, lasting / (1 + rate)
    elif isinstance(curve, Curve):
        yield from _nodes(curve, times)
    elif document.smith_wilson is not None and isinstance(document.smith_wilson.spot, dict):
        spots = document.smith_wilson.spot
        for maturity, rate in sorted(spots.items()):
            up, down = (curve_of(document, {**spots, maturity: rate + change}) for change in (BUMP, -BUMP))
            with np.errstate(divide="ignore"):
                change = np.log(down.factors(times) / up.factors(times)) / (2 * BUMP)
            yield maturity, rate, change


def _nodes(curve: Curve, times: Numbers) -> Iterator[tuple[float, float, Numbers]]:
    """Spot rates at maturities: H is linear between m ln(1 + s) at the maturities m, and goes on after the last."""
    maturities, integrals = np.array(curve.times[1:]), np.array(curve.integrals[1:])
    knots = np.array(curve.times)
    beyond = np.maximum(times - knots[-1], 0)
    for place, (maturity, integral) in enumerate(zip(maturities.tolist(), integrals.tolist(), strict=True), 1):
        rate = float(np.expm1(integral / maturity))
        weight = np.interp(times, knots, np.eye(len(knots))[place])
        # After the last maturity the slope between the last two is held.
        if place == len(knots) - 1:
            weight = weight + beyond / (knots[-1] - knots[-2])
        elif place == len(knots) - 2:
            weight = weight - beyond / (knots[-1] - knots[-2])
        yield maturity, rate, weight * maturity / (1 + rate)
