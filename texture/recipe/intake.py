"""`[intake]`: what counts as a usable row."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Positive, Settings

__all__ = ["Intake", "Void"]


class Void(Settings):
    """A place where older samples no longer hold: dredged, filled, or covered since."""

    polygon: tuple[tuple[float, float], ...] | None = Field(
        None, min_length=3, description="corners as [longitude, latitude] in degrees of WGS 84"
    )
    file: Path | None = Field(None, description="polygons instead: GeoJSON, GeoPackage or Shapefile, in any projection")
    date: dt.date | None = Field(
        None,
        description="day of the change; samples taken before it are set aside; else each polygon's own, an attribute",
    )
    date_attribute: str = Field(
        "date", description="what the file calls the day of each polygon, where `date` is absent"
    )
    reason: Annotated[str, Field(min_length=1)] = Field(
        "dredging", description="what happened, for the account of rows"
    )

    @model_validator(mode="after")
    def _one_place(self) -> Void:
        if (self.polygon is None) == (self.file is None):
            raise ValueError("void: give either polygon or file")
        if self.polygon is not None and self.date is None:
            raise ValueError("void: a polygon needs its date")
        return self


class Intake(Settings):
    """What counts as a usable row."""

    sum_tolerance: Annotated[float, Field(gt=0.0, lt=0.5)] = Field(
        0.02, description="rows whose parts sum outside 1 ± this are set aside"
    )
    mud_below_mm: Positive = Field(0.063, description="cut between mud and sand for columns of size classes")
    gravel_above_mm: Positive = Field(2.0, description="cut between sand and gravel for columns of size classes")
    surface_m: Positive = Field(0.10, description="samples that begin deeper than this are not the surface")
    noise_per_decade: Annotated[float, Field(ge=0.0, le=0.5)] = Field(
        0.0, description="fractions of 1 by which samples are known less well for each decade before the latest"
    )
    void: tuple[Void, ...] = Field((), description="places and days before which samples are set aside")
    on_land: Literal["snap", "drop", "keep"] = Field(
        "snap",
        description="stations on land: move to the nearest wet cell within one cell, set aside, or keep",
    )
