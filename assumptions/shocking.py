"""From a basis and a shock to the shocked basis.

The result is a basis like any other. What values it asks for rates, lapses, discount factors and expenses as ever and
need not know that there was a shock. Parts that the shock does not touch are the same objects.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from datetime import date, timedelta

from .adjustments import Adjustment, Step, Window
from .basis import Basis, BasisDocument
from .expenses import Expense
from .interest import YieldCurve, curve_from
from .items import Item
from .shocked_curves import ForwardMoved, Move, SpotMoved, check_curve
from .shocked_expenses import changed_item, inflated
from .shocked_scales import Turn, turned
from .shocks import Change, Shock, span
from .split_rules import Piece, split


class WrongBasisError(ValueError):
    """A shock or a set of shocks that was made for another basis."""


def shocked(basis: Basis, shock: Shock, valuation_date: date) -> Basis:
    """Return the basis after a shock; the very same object where nothing changes.

    valuation_date: from which 'from_months' and 'for_months' are counted, inflation changes, and improvement too.
    Raises WrongBasisError where the shock bears the digest of another basis, and ValueError where the basis has nothing
    that could change as the shock says, or a rate would leave its range.
    """
    need_same_basis(shock.basis, basis, shock.name_in_words)
    made = basis
    for number, change in enumerate(shock.change, 1):
        if change.neutral:
            continue
        try:
            made = _CHANGES[change.what](made, change, valuation_date)
        except ValueError as error:
            raise ValueError(f"shock '{shock.name_in_words}', change {number}: {error}") from error
    if made is basis:
        return basis
    content = shock.model_copy(update={"basis": ""}).model_dump_json(by_alias=True)
    entry = (shock.name_in_words, f"{valuation_date.isoformat()} {content}")
    return replace(made, changed_by=(*basis.changed_by, entry))


def need_same_basis(digest: str, basis: Basis, name: str) -> None:
    """Raise WrongBasisError unless a digest is empty or that of the basis."""
    if digest and digest != basis.digest:
        raise WrongBasisError(
            f"'{name}' was made for the basis with digest {digest[:12]}..., but '{basis.title}' has {basis.digest[:12]}"
            "...; look whether the basis has changed, and put the new digest into 'basis'"
        )


def _today(valuation_date: date) -> int:
    day = valuation_date + timedelta(days=1)
    return 12 * day.year + day.month - 1


def _step(change: Change, valuation_date: date) -> Step:
    window = None
    if change.from_months or change.for_months is not None:
        today = _today(valuation_date)
        first = today + change.from_months
        end = float("inf") if change.for_months is None else first + change.for_months
        window = Window(first, end, today, {"months": 1, "quarters": 3, "years": 12}[change.counted_by])
    return Step(
        change.how,
        change.amount or 0.0,
        span(change.ages),
        span(change.durations),
        span(change.calendar_years),
        window,
        float("inf") if change.at_most is None else change.at_most,
    )


def _adjusted(held: tuple[Adjustment | None, ...], pieces: list[Piece], step: Step) -> tuple[Adjustment | None, ...]:
    """Return the adjustments of rules that were cut, with a step more where they are to change."""
    made: list[Adjustment | None] = []
    for piece in pieces:
        before = held[piece.of] if held else None
        steps = before.steps if before is not None else ()
        made.append(Adjustment((*steps, step)) if piece.changes else before)
    return tuple(made)


def _with_rules(basis: Basis, change: Change, **part: Item) -> BasisDocument:
    """Return the document with a part whose rules were cut in two; itself where the change is for all policies."""
    return basis.document.model_copy(update=part) if change.for_ else basis.document


def _mortality(basis: Basis, change: Change, valuation_date: date) -> Basis:
    made, pieces = _mortality_split(basis, change)
    return replace(made, adjustments=_adjusted(basis.adjustments, pieces, _step(change, valuation_date)))


def _improvement(basis: Basis, change: Change, valuation_date: date) -> Basis:
    made, pieces = _mortality_split(basis, change)
    low, high = span(change.calendar_years)
    turn = Turn(change.how, change.amount or 0.0, (max(low, valuation_date.year + 1), high), span(change.ages))
    scales = tuple(
        turned(scale, turn) if piece.changes else scale for scale, piece in zip(made.scales, pieces, strict=True)
    )
    return replace(made, scales=scales)


def _mortality_split(basis: Basis, change: Change) -> tuple[Basis, list[Piece]]:
    mortality = basis.document.mortality
    rules, pieces = split(mortality.rule, change.for_)
    scales = basis.scales or (None,) * len(mortality.rule)
    return replace(
        basis,
        document=_with_rules(basis, change, mortality=mortality.model_copy(update={"rule": rules})),
        rates=tuple(basis.rates[piece.of] for piece in pieces),
        scales=tuple(scales[piece.of] for piece in pieces),
        adjustments=tuple(basis.adjustments[piece.of] for piece in pieces) if basis.adjustments else (),
    ), pieces


def _lapse(basis: Basis, change: Change, valuation_date: date) -> Basis:
    lapse = basis.document.lapse
    if lapse is None:
        return _nothing(basis, change)
    rules, pieces = split(lapse.rule, change.for_)
    return replace(
        basis,
        document=_with_rules(basis, change, lapse=lapse.model_copy(update={"rule": rules})),
        lapses=tuple(basis.lapses[piece.of] for piece in pieces),
        lapse_adjustments=_adjusted(basis.lapse_adjustments, pieces, _step(change, valuation_date)),
    )


def _nothing(basis: Basis, change: Change, valuation_date: date | None = None) -> Basis:
    """A share of nothing is nothing; an amount needs something to be added to."""
    if change.how == "relative":
        return basis
    raise ValueError(f"the basis has no {change.what} to change by an amount; add the part to the basis")


def _interest(basis: Basis, change: Change, valuation_date: date) -> Basis:
    interest = basis.document.interest
    rules, pieces = split(interest.rule, change.for_)
    document = _with_rules(basis, change, interest=interest.model_copy(update={"rule": rules}))
    curves = tuple(_moved(basis.curves[one.of], change) if one.changes else basis.curves[one.of] for one in pieces)
    return replace(basis, document=document, curves=curves)


def _moved(curve: YieldCurve, change: Change) -> YieldCurve:
    amounts = tuple(sorted(change.by_maturity.items())) if change.by_maturity else ((0.0, change.amount or 0.0),)
    move = Move(change.how, amounts, span(change.maturities), change.at_least)
    if len(amounts) == 1 and change.maturities is None and (curve.flat or change.how == "replaced"):
        # One rate for all times before and after: still flat, and as quick.
        rate = math.expm1(curve.integral(1.0))
        rate += move.change(rate, 1.0)
        if not -0.5 < rate <= 1:
            raise ValueError(f"the interest rate becomes {rate:g}; it must lie above -0.5, up to 1")
        return curve_from(flat=amounts[0][1] if change.how == "replaced" else rate)
    made: SpotMoved | ForwardMoved = (SpotMoved if change.rates == "spot" else ForwardMoved)(curve, move)
    check_curve(made)
    return made


def _expenses(basis: Basis, change: Change, valuation_date: date) -> Basis:
    return _with_items(basis, change, lambda item: changed_item(item, change))


def _inflation(basis: Basis, change: Change, valuation_date: date) -> Basis:
    day, items = valuation_date + timedelta(days=1), basis.document.expense
    _check_items(items, change)
    made = tuple(
        inflated(item, prices, change, day) if change.items is None or item.name in change.items else prices
        for item, prices in zip(items, basis.expense_prices, strict=True)
    )
    if all(one is prices for one, prices in zip(made, basis.expense_prices, strict=True)):
        return basis
    return replace(basis, expense_prices=made)


def _with_items(basis: Basis, change: Change, make: Callable[..., object]) -> Basis:
    items = basis.document.expense
    _check_items(items, change)
    made = [make(item) if change.items is None or item.name in change.items else item for item in items]
    if all(one is item for one, item in zip(made, items, strict=True)):
        return basis
    return replace(basis, document=basis.document.model_copy(update={"expense": made}))


def _check_items(items: list[Expense], change: Change) -> None:
    names = [item.name for item in items]
    for name in change.items or ():
        if name not in names:
            raise ValueError(f"the basis has no item of expense '{name}'; it has {', '.join(names) or 'none'}")


_CHANGES: dict[str, Callable[[Basis, Change, date], Basis]] = {
    "mortality": _mortality,
    "improvement": _improvement,
    "lapse": _lapse,
    "interest": _interest,
    "expenses": _expenses,
    "inflation": _inflation,
    "disability": _nothing,
    "recovery": _nothing,
}
