"""Profits of new business from a notebook: model points on an experience and a reserving basis."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from assumptions.basis import Basis
from portfolios.designs import Design
from portfolios.extract import Extract, open_extract
from portfolios.reasons import Reason

from .basis_columns import needs_of
from .engine import Engine
from .loops import Profile
from .notebook import Designs, _basis, _designs
from .plain_profit import Reserves
from .profit_profile import ProfitArrays, profits
from .settings import Settings, Step

Numbers = NDArray[np.float64]

YEAR = 12


@dataclass(frozen=True)
class NewBusiness:
    """Profits of model points, by policy year, per policy sold; money in currency, not rounded.

    policy_id: of the model points with profits, in the order of the extract; refused: policy_id to the reason of the
    others; arrays: reserves, signature and vector, (n, periods) from outset; value: of the signature at the risk
    discount rate, (n).
    """

    policy_id: list[str]
    refused: dict[str, str]
    arrays: ProfitArrays
    value: Numbers


def new_business_profits(
    extract: Any,
    designs: Designs,
    experience: Any,
    reserving: Any,
    sold_on: date | str,
    risk_discount_rate: float,
    *,
    step: Step = "month",
    reserves: Reserves = "gross premium",
) -> NewBusiness:
    """Return the profits of model points that all commence on one day, by policy year.

    extract, designs and bases: as for ``projection.value``; risk_discount_rate: a year. Raises DocumentError and
    ExtractError as there, and ValueError for contracts on two lives, three terms of Woolhouse's formula, a policy
    that does not commence on the day of sale, and guarantees that start within a year or at several points.
    """
    if not risk_discount_rate > -1:
        raise ValueError(f"the risk discount rate is {risk_discount_rate}; it must exceed -1")
    read, known = _designs(designs), open_extract(extract)
    _sayable(read)
    settings = Settings(date.fromisoformat(str(sold_on)), step, "outstanding")
    ids, reasons, first = _profile(known, read, _basis(experience), settings)
    second, again = None, [""] * len(ids)
    if reserves != "none":
        _, again, second = _profile(known, read, _basis(reserving), settings)
    bad = [one or two for one, two in zip(reasons, again, strict=True)]
    fine = np.array([not reason for reason in bad], dtype=bool)
    arrays = profits(_rows(first, fine), None if second is None else _rows(second, fine))
    discount = (1 + risk_discount_rate) ** -np.arange(arrays.signature.shape[1], dtype=float)
    return NewBusiness(
        policy_id=[name for name, reason in zip(ids, bad, strict=True) if not reason],
        refused={name: reason for name, reason in zip(ids, bad, strict=True) if reason},
        arrays=arrays,
        value=arrays.signature @ discount,
    )


def _sayable(designs: list[Design]) -> None:
    for design in designs:
        if design.states != "one life":
            raise ValueError(f"design {design.code}: profits are those of contracts on one life")
        if any(stream.payments == "Woolhouse 3" for stream in design.stream):
            raise ValueError(
                f"design {design.code}: the third term of Woolhouse's formula is no cash flow; use 'exact'"
            )


def _profile(
    extract: Extract, designs: list[Design], basis: Basis, settings: Settings
) -> tuple[list[str], list[str], Profile]:
    needs = needs_of(extract, designs, [basis])
    needed = needs.needed
    engine = Engine(designs, basis, settings, needed, needs.kinds)
    ids: list[str] = []
    reasons: list[str] = []
    profiles: list[Profile] = []
    sold = (settings.valuation_date - date(1970, 1, 1)).days
    for chunk in extract.chunks(needed):
        checked, profile = engine.profile(chunk, YEAR)
        others = (chunk.day("commencement_date") != sold) & (checked.reason == 0)
        names = [str(name) for name in pa.array(chunk.raw("policy_id")).to_pylist()]
        if others.any():
            raise ValueError(f"policy {names[int(others.argmax())]} does not commence on {settings.valuation_date}")
        ids += names
        reasons += ["" if reason == 0 else Reason(int(reason)).words for reason in checked.reason]
        profiles.append(profile)
    fields = {name: np.concatenate([getattr(one, name) for one in profiles]) for name in Profile._fields[1:]}
    return ids, reasons, Profile(YEAR, **fields)


def _rows(profile: Profile, fine: NDArray[np.bool_]) -> Profile:
    return profile._replace(**{name: getattr(profile, name)[fine] for name in Profile._fields[1:]})
