"""What the working of a policy says of named states: the moves with their rules, and the probabilities by year."""

from __future__ import annotations

from collections.abc import Iterator

from .plain import PlainValue
from .plain_chain import Chain
from .plain_layout import pairs, plain, table

MOVE_FIGURES = ("rule", "figures", "multiple", "extra", "added years")


def states_section(value: PlainValue, chain: Chain) -> list[str]:
    """Return the lines on states and moves, and the probabilities of the states at the points of yearly payments."""
    lines = ["", "States and moves", *pairs(_facts(value, chain))]
    last = max((payment.point for payment in value.payments), default=0)
    heads = ("point", *(plain(state) for state in chain.states), "dead or lapsed")
    rows = [
        (str(point), *(f"{share:.9f}" for share in shares), f"{max(0.0, 1 - sum(shares)):.9f}")
        for point, shares in occupancy(value, chain, last)
        if point % 12 == 0 or point == last
    ]
    return [*lines, *table(heads, rows)] if rows else lines


def _facts(value: PlainValue, chain: Chain) -> Iterator[tuple[str, str]]:
    yield "age at commencement", f"{float(value.age):.6f}"
    yield "state at valuation", plain(chain.state)
    for (begin, end), (rule, _) in chain.moves.rules.items():
        source = f"{rule.rate:g}" if rule.rate is not None else "table or law"
        adjusted = f"{rule.multiple:g} x {source} + {rule.extra:g}; age {rule.added_years:+d} years"
        titled = f"{plain(rule.title)}: " if rule.title else ""
        yield f"from {plain(begin)} to {plain(end)}", f"{titled}{adjusted}; {rule.figures}"
    yield "lapses from", ", ".join(plain(state) for state in chain.states if state in chain.lapsing) or "no state"
    yield "survival below", "probability of the states of a stream, or expected number of its moves; lapses are in it"


def occupancy(value: PlainValue, chain: Chain, last: int) -> Iterator[tuple[int, list[float]]]:
    """Yield the points after the valuation date up to a last one, with the probabilities after their lapses."""
    if chain.state == "dead":
        return
    last = min(last, chain.moves.last)
    for point in range(value.position.k + 1, last + 1):
        yield point, [chain.share(point, frozenset({state}), True) for state in chain.states]
