"""What every assumption document is made of: strict items with their provenance."""

from __future__ import annotations

from datetime import date

from pydantic import BaseModel, ConfigDict, Field


class Item(BaseModel):
    """A part of a document. Unknown keys are errors, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, strict=True)


class Sourced(Item):
    """A part of a document that says where its figures come from."""

    title: str = Field("", description="what this is, in words")
    effective: date | None = Field(None, description="date from which the figures are meant to hold")
    reference: str = Field("", description="where the figures come from")
