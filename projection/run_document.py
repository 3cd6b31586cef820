"""The run document: what is to be valued, when, how, and on which basis."""

from __future__ import annotations

from datetime import date

from pydantic import BaseModel, ConfigDict, Field, field_validator

from .basis_names import check_name
from .settings import Due, Settings, Step


class RunDocument(BaseModel):
    """A reserve run as written in TOML. Paths are relative to the document's folder."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)

    title: str = Field("", description="name of the run in reports")
    valuation_date: date = Field(description="end of this day")
    extract: str = Field(description="Parquet file, folder, pattern or URI of the policies")
    designs: str = Field(description="folder of product designs, or one of them")
    basis: str = Field(description="document of the basis")
    further_bases: dict[str, str] = Field(
        default_factory=dict,
        description="more bases to value on in the same run: a name of small letters, digits and '_' for each, which "
        "stands behind those of its columns, and its document",
    )
    step: Step = Field("month", description="length of a projection step")
    due: Due = Field("settled", description="whether cash flows due on the valuation date are settled or outstanding")
    group_by: list[str] = Field(
        default_factory=lambda: ["product"], description="extract columns by which totals are shown"
    )
    currency: str = Field("", max_length=12, description="label of the currency in reports")
    decimals: int = Field(2, ge=0, le=4, description="decimals of the currency's minor unit")
    in_force: list[str] = Field(
        default_factory=lambda: ["in force"], min_length=1, description="values of 'status' that are valued"
    )
    exceptions_limit: float = Field(
        0.01, ge=0, le=1, description="share of policies that may be exceptions before the run stops"
    )
    sample: int = Field(24, ge=1, le=10000, description="policies valued a second time by the plain twin")

    @field_validator("further_bases")
    @classmethod
    def _named(cls, value: dict[str, str]) -> dict[str, str]:
        for name in value:
            check_name(name)
        return value

    @property
    def settings(self) -> Settings:
        """The settings that change a number."""
        return Settings(self.valuation_date, self.step, self.due, self.decimals)
