"""The premium document: which amount is asked for, for whom, on which basis, and how rates are made of it."""

from __future__ import annotations

import math
from datetime import date
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from .settings import Settings, Step


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, strict=True)


class Steps(_Part):
    """Numbers from one to another in equal steps, both ends included."""

    from_: float = Field(alias="from", description="first number")
    to: float = Field(description="last number")
    step: float = Field(1.0, gt=0, description="distance from one to the next")

    @model_validator(mode="after")
    def _ordered(self) -> Steps:
        if self.to < self.from_:
            raise ValueError(f"steps from {self.from_:g} to {self.to:g} run backwards")
        if (self.to - self.from_) / self.step > MOST_CELLS:
            raise ValueError(f"these are more than {MOST_CELLS:,} steps")
        return self

    def numbers(self) -> list[float]:
        """Return the numbers; whole ones where from and step are whole."""
        count = int((self.to - self.from_) / self.step + 1e-9) + 1
        return [self.from_ + self.step * place for place in range(count)]


class SameAs(_Part):
    """A column that holds in every cell what an axis holds, such as a premium term that is the term."""

    as_: str = Field(alias="as", description="the axis")


class ToAge(_Part):
    """A column of years that run to an age, counted from the axis 'age'."""

    to_age: float = Field(gt=0, le=130, description="age at the end")


class SizeBand(_Part):
    """Policies of a size from one amount on, up to the next band, that share a rate."""

    from_: float = Field(0.0, alias="from", ge=0, description="smallest size in the band")
    at: float = Field(gt=0, description="size for which the rate of the band is worked out")


class Size(_Part):
    """What rates are per unit of: an amount of the policy, in bands or at one size."""

    column: str = Field(description="the amount, such as sum_assured, annuity_pa or single_premium")
    per: float = Field(1000.0, gt=0, description="rates are for so much of it")
    band: list[SizeBand] = Field(min_length=1, description="size bands, from the smallest up")

    @model_validator(mode="after")
    def _ordered(self) -> Size:
        starts = [band.from_ for band in self.band]
        if starts != sorted(set(starts)):
            raise ValueError("size bands must rise from one to the next")
        ends = [*starts[1:], float("inf")]
        for band, end in zip(self.band, ends, strict=True):
            if not band.from_ <= band.at <= end:
                raise ValueError(f"the band from {band.from_:g} is worked out at {band.at:g}, which lies outside it")
        return self


class Rounding(_Part):
    """How a rate is rounded."""

    to: float = Field(0.01, gt=0, description="rates are whole multiples of this")
    way: Literal["nearest", "up", "down"] = Field(
        "up", description="'nearest' takes an exact half to the even multiple; a rate within 1e-9 of a multiple is one"
    )


class RateChecks(_Part):
    """What a rate table must keep to; every breach is listed."""

    rises_with: list[str] = Field(default_factory=list, description="axes along which no rate may fall")
    falls_with: list[str] = Field(default_factory=list, description="axes along which no rate may rise")
    smooth: float = Field(
        0.05, gt=0, description="largest second difference of the logarithm of rates, by the axes of 'smooth_along'"
    )
    smooth_along: list[str] | None = Field(
        None, description="axes along which rates must be smooth; absent: those of ages and of years"
    )


class PremiumDocument(_Part):
    """Premiums and rate tables as written in TOML. Paths are relative to the document's folder."""

    title: str = Field("", description="name in reports")
    sale_date: date = Field(description="day on which all contracts commence; premiums due on it are still to come")
    designs: str = Field(description="folder of product designs, or one of them")
    design: str = Field(description="code of the design that is sold")
    basis: str = Field(description="document of the basis")
    unknown: str = Field(description="the amount asked for: a column that the design uses, such as premium_pa")
    equivalence: Literal["gross", "net"] = Field(
        "gross", description="with expenses and commission of basis and design, or without"
    )
    step: Step = Field("month", description="length of a projection step")
    policy: dict[str, str | float | int | date | SameAs | ToAge] = Field(
        default_factory=dict,
        description="further columns of the extract: a value for all cells, { as = axis }, or { to_age = years }",
    )
    grid: dict[str, Steps | list[str | float | int]] = Field(
        description="axes of the table: a column and its values, as a list or in steps; 'age' is the age on the day "
        "of sale, 'second_age' that of the second life"
    )
    size: Size | None = Field(None, description="what rates are per unit of; absent: the amount itself is shown")
    policy_fee: float = Field(
        0.0, ge=0, description="part of a year's premium that does not depend on the size, charged beside the rate"
    )
    rounding: Rounding = Field(default_factory=lambda: Rounding(), description="how rates are rounded")
    checks: RateChecks = Field(default_factory=lambda: RateChecks(), description="what rates must keep to")
    currency: str = Field("", max_length=12, description="label of the currency in reports")
    decimals: int = Field(2, ge=0, le=4, description="decimals of the currency's minor unit")

    @model_validator(mode="after")
    def _consistent(self) -> PremiumDocument:
        if not self.grid:
            raise ValueError("the grid has no axis; a single premium has one, such as age = [65]")
        for axis, values in self.grid.items():
            if isinstance(values, list) and len(set(map(str, values))) != len(values):
                raise ValueError(f"grid: axis '{axis}' holds a value twice")
            if isinstance(values, list) and not values:
                raise ValueError(f"grid: axis '{axis}' is empty")
            if axis in self.policy:
                raise ValueError(f"'{axis}' stands both in grid and in policy")
        for column, value in self.policy.items():
            asked = value.as_ if isinstance(value, SameAs) else "age" if isinstance(value, ToAge) else None
            if asked is not None and asked not in self.grid:
                raise ValueError(f"policy: '{column}' goes by the axis '{asked}', which the grid does not have")
        sized = {self.size.column} if self.size else set()
        for column in (self.unknown, *sized):
            if column in self.grid or column in self.policy:
                raise ValueError(f"'{column}' is worked out or given by size; leave it out of grid and policy")
        if self.unknown in sized:
            raise ValueError(f"rates for '{self.unknown}' cannot be per unit of itself")
        for name in ("rises_with", "falls_with", "smooth_along"):
            for axis in getattr(self.checks, name) or ():
                if axis not in self.grid:
                    raise ValueError(f"checks: '{axis}' in {name} is no axis of the grid")
                values = self.values(axis)
                if not all(isinstance(value, int | float) for value in values) or values != sorted(values):
                    raise ValueError(f"checks: '{axis}' in {name} is no axis of rising numbers")
        if self.policy_fee and self.size is None:
            raise ValueError("a policy fee needs 'size', since it is what does not depend on the size")
        cells = math.prod(map(len, self.axes.values()))
        if cells > MOST_CELLS:
            raise ValueError(f"the grid has {cells:,} cells; at most {MOST_CELLS:,} are worked out at once")
        return self

    def values(self, axis: str) -> list[Any]:
        """Return the values of an axis in order."""
        written = self.grid[axis]
        return written.numbers() if isinstance(written, Steps) else list(written)

    @property
    def axes(self) -> dict[str, list[Any]]:
        """Every axis of the table with its values, the size bands last where there are sizes."""
        axes = {axis: self.values(axis) for axis in self.grid}
        if self.size is not None:
            axes[BAND] = [band.from_ for band in self.size.band]
        return axes

    @property
    def smooth_axes(self) -> list[str]:
        """Axes along which rates must be smooth: those stated, or those of rising ages and years."""
        if self.checks.smooth_along is not None:
            return list(self.checks.smooth_along)
        named = [axis for axis in self.grid if axis in ("age", "second_age") or axis.endswith("_years")]
        return [axis for axis in named if self.values(axis) == sorted(self.values(axis))]

    @property
    def settings(self) -> Settings:
        """The settings that change a number: payments due on the day of sale are to come."""
        return Settings(self.sale_date, self.step, "outstanding", self.decimals)


MOST_CELLS = 2_000_000
"""Cells of a rate table."""

BAND = "size_from"
"""Axis and column of a rate table with the smallest size of a cell's band."""
