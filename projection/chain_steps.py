"""Matrices of the steps of a chain: one move in a step, or Kolmogorov's forward equations.

Letters: mu forces of the moves; stay (step, from, to) probabilities of the living states; moved (step, from, move)
expected numbers of the moves.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from assumptions.moves import CERTAIN

from .chain_rates import Rated

Row = NDArray[np.float64]

NODES = 4
"""Nodes of Gauss and Legendre in a part of a step: the method is of order 8."""


class Steps(NamedTuple):
    """Matrices of steps: stay (step, state, state) and moved (step, state, move)."""

    stay: Row
    moved: Row


def one_move(rated: Rated, years: int, a_year: int) -> Steps:
    """Return steps in which nobody moves twice: exits from a state share in proportion to their forces."""
    months = 12 // a_year * np.arange(a_year * years)
    before, after = rated.widths(months, a_year)
    hazard = before[:, None] * rated.forces(months, False)
    if after.any():
        hazard += after[:, None] * rated.forces(months, True)
    return _shared(rated, hazard)


def _shared(rated: Rated, hazard: Row) -> Steps:
    """Steps from the integrals of the forces over them (step, move)."""
    count, size = len(hazard), len(rated.states)
    stay, moved = np.zeros((count, size, size)), np.zeros((count, size, len(rated.pairs)))
    begins, ends = rated.begins, rated.ends
    for state in range(size):
        mine = [place for place, begin in enumerate(begins) if begin == state]
        total = hazard[:, mine].sum(axis=1)
        stay[:, state, state] = np.exp(-total)
        share = -np.expm1(-total) / np.where(total > 0, total, 1.0)
        for place in mine:
            moved[:, state, place] = hazard[:, place] * share
            if ends[place] < size:
                stay[:, state, ends[place]] += moved[:, state, place]
    return Steps(stay, moved)


def forward(rated: Rated, years: int) -> Steps:
    """Return monthly steps by Kolmogorov's forward equations P' = P Q, for all forces that are finite."""
    months = np.arange(12 * years)
    before, after = rated.widths(months, 12)
    first, second = rated.forces(months, False), rated.forces(months, True)
    steps = _integrated(rated, months / 12, before, first)
    cut = np.flatnonzero(after)
    if len(cut):
        more = _integrated(rated, months[cut] / 12 + before[cut], after[cut], second[cut])
        joined = _joined(Steps(steps.stay[cut], steps.moved[cut]), more)
        steps.stay[cut], steps.moved[cut] = joined
    hazard = before[:, None] * first + after[:, None] * second
    # A state that is left with certainty knows no equation.
    certain = (hazard >= 1e-6 * CERTAIN / 12).any(axis=1)
    if certain.any():
        simple = _shared(rated, hazard[certain])
        steps.stay[certain], steps.moved[certain] = simple
    return steps


def _joined(one: Steps, two: Steps) -> Steps:
    return Steps(one.stay @ two.stay, one.moved + one.stay @ two.moved)


def _integrated(rated: Rated, start: Row, width: Row, forces: Row) -> Steps:
    """Steps by collocation at Gauss's nodes, which solves the linear equations with an error of order 8.

    start, width: of each part, in years from commencement; forces: (part, move), for those that do not vary.
    """
    nodes, within, whole = _gauss()
    size, count = len(rated.states), len(start)
    mu = np.repeat(np.where(forces >= CERTAIN, 0.0, forces)[:, None, :], NODES, axis=1)
    for place, rule in enumerate(rated.rules):
        law = rated.smooth(place)
        if law is not None:
            age = rated.age + rule.added_years
            times = start[:, None] + width[:, None] * nodes
            varying = [[rule.adjusted(law.force(age + t, t)) for t in row] for row in times.tolist()]
            mu[:, :, place] = np.where(mu[:, :, place] > 0, np.array(varying), 0.0)
    mu = np.where(np.isfinite(mu), mu, 0.0)
    rates = np.zeros((count, NODES, size, size))
    for place, (begin, end) in enumerate(zip(rated.begins, rated.ends, strict=True)):
        rates[:, :, begin, begin] -= mu[:, :, place]
        if end < size:
            rates[:, :, begin, end] += mu[:, :, place]
    # K_i = (1 + h sum_j a_ij K_j) Q_i for the slopes K_i at the nodes, for all rows at once.
    h = width[:, None, None]
    blocks = np.einsum("ij,pikl->pjkil", within, rates).reshape(count, NODES * size, NODES * size)
    right = np.moveaxis(rates, 1, 2).reshape(count, size, NODES * size)
    left = np.eye(NODES * size) - h * blocks
    slopes = np.linalg.solve(left.transpose(0, 2, 1), right.transpose(0, 2, 1)).transpose(0, 2, 1)
    slopes = slopes.reshape(count, size, NODES, size)
    stay = np.eye(size) + h * np.einsum("j,pajs->pas", whole, slopes)
    inside = np.eye(size)[None, :, None, :] + h[..., None] * np.einsum("ij,pajs->pais", within, slopes)
    moved = h * np.einsum("i,paim,pim->pam", whole, inside[..., rated.begins], mu)
    return Steps(stay, moved)


def _gauss() -> tuple[Row, Row, Row]:
    """Gauss's nodes on 0 to 1, integrals of Lagrange's polynomials up to each node, and up to 1."""
    nodes = (np.polynomial.legendre.leggauss(NODES)[0] + 1) / 2
    powers = np.arange(NODES)
    vandermonde = nodes[:, None] ** powers
    until = nodes[:, None] ** (powers + 1) / (powers + 1)
    inverse = np.linalg.inv(vandermonde)
    return nodes, until @ inverse, (1 / (powers + 1)) @ inverse


def chained(steps: Steps, together: int) -> Steps:
    """Return steps of so many at a time."""
    whole = Steps(steps.stay[::together], steps.moved[::together])
    for later in range(1, together):
        whole = _joined(whole, Steps(steps.stay[later::together], steps.moved[later::together]))
    return whole


def parts_of_year(steps: Steps) -> Steps:
    """Return the matrices from the start of a year to each of its twelve points.

    A state is kept for a part s of the year with the probability of the year to the power of s; exits share in
    proportion.
    """
    size = steps.stay.shape[1]
    own = np.einsum("pss->ps", steps.stay)
    parts = np.arange(1, 13)[None, :, None] / 12
    kept = own[:, None, :] ** parts
    left = np.where(own[:, None, :] < 1, (1 - kept) / np.where(own < 1, 1 - own, 1.0)[:, None, :], parts)
    stay = left[..., None] * steps.stay[:, None]
    stay[..., np.arange(size), np.arange(size)] = kept
    moved = left[..., None] * steps.moved[:, None]
    stay[:, 11], moved[:, 11] = steps.stay, steps.moved
    points = 12 * len(steps.stay)
    return Steps(stay.reshape(points, size, size), moved.reshape(points, size, steps.moved.shape[2]))
