"""`[[samples]]`: one file of samples, and what has to be known to read it."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Positive, Settings, nearest_known

__all__ = ["COLUMN_ROLES", "Join", "Samples"]

COLUMN_ROLES = (
    "id", "survey", "date", "latitude", "latitude_minutes", "latitude_seconds", "latitude_hemisphere", "longitude",
    "longitude_minutes", "longitude_seconds", "longitude_hemisphere", "easting", "northing", "zone", "position", "depth",
    "sample_interval", "sample_top", "sample_bottom", "mud", "sand", "gravel", "silt", "clay", "mud_tare",
    "sand_tare", "gravel_tare", "split_factor", "median_size", "description", "remarks",
)  # fmt: skip


class Join(Settings):
    """Where the positions stand if the samples block names a table of results without them."""

    sheet: str | None = Field(None, description="sheet of the positions; the first that has them if absent")
    file: Path | None = Field(None, description="file of the positions; the same workbook if absent")
    on: str | None = Field(None, description="heading of the id among the positions; recognised if absent")


class Samples(Settings):
    """One `[[samples]]` block: one file, and what has to be known to read it."""

    file: Path = Field(description="spreadsheet or text table, relative to the recipe")
    sheet: str | None = Field(None, description="sheet name; the first sheet with a table if absent")
    survey: str | None = Field(None, description="name of the survey; the file's stem if absent")
    credit: str | None = Field(
        None,
        description="who is to be thanked for the data, and under which licence; stands on the page and in the files",
    )
    crs: str | None = Field(None, description="EPSG code or WKT of the positions; longitude and latitude if absent")
    hemisphere: Literal["", "N", "S", "E", "W", "NE", "NW", "SE", "SW"] = Field(
        "", description="half of the globe of degrees that carry neither sign nor letter; north and east if empty"
    )
    degrees: Literal["decimal", "minutes"] = Field(
        "decimal", description='what 54.30 says: degrees with decimals, or 54 degrees and 30 minutes if "minutes"'
    )
    position_accuracy_m: Positive | None = Field(
        None, description="how far positions may be off either way, where that is more than their digits tell"
    )
    basis: Literal["whole", "below_2mm"] = Field(
        "whole", description="whether the laboratory saw the whole sample or only what passed 2 mm"
    )
    method: Literal["sieve", "laser", "pipette"] = Field(
        "sieve", description="how the fractions were measured; becomes the kind of the stations"
    )
    blank_means: Literal["not_measured", "zero"] = Field("not_measured", description="what an empty fraction cell says")
    unit: Literal["auto", "fraction", "percent"] = Field(
        "auto", description="unit of the fraction columns; found from the rows' sums if `auto`"
    )
    join: Join | None = Field(None, description="the table of positions; found in the same workbook if absent")
    header_row: Annotated[int, Field(ge=1)] | None = Field(
        None, description="row number of the first header line, as the spreadsheet shows it"
    )
    layout: Literal["auto", "rows", "columns", "certificates"] = Field(
        "auto",
        description="whether samples are rows, columns, or certificates (one a sheet, or stacked); found if `auto`",
    )
    skip: tuple[Annotated[int, Field(ge=1)], ...] = Field(
        (), description="row numbers, as the spreadsheet shows them, that are neither headings nor samples"
    )
    split_below_mm: Positive | None = Field(
        None, description="size below which the split factor counts, where its heading does not say"
    )
    from_: dt.date | None = Field(None, alias="from", description="first day of the survey")
    to: dt.date | None = Field(None, description="last day of the survey")
    columns: dict[str, str] = Field(
        default_factory=dict, description="role = heading, only where recognition needs help"
    )

    quantities: dict[str, str] = Field(
        default_factory=dict, description="name of a quantity = heading, where this file calls its column otherwise"
    )

    @model_validator(mode="after")
    def _known_roles(self) -> Samples:
        for role in self.columns:
            if role not in COLUMN_ROLES:
                raise ValueError(f"columns.{role}: unknown role; {nearest_known(role, COLUMN_ROLES)}")
        return self
