"""`[outputs]`: what is written."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Positive, Settings

__all__ = ["Outputs"]


class Outputs(Settings):
    """What is written."""

    geotiff: bool = Field(True, description="write a GeoTIFF for each part and statistic")
    geotiff_cell_size_m: Positive | None = Field(
        None, description="cell size of the resample of a curvilinear grid; its median cell side if absent"
    )
    names: Path | None = Field(None, description="the user's own variable and dimension names for bed.nc")
    into: Path | None = Field(
        None, description="the model's own initial file; a copy gets the bed, under the names of the names file"
    )
    into_record: Annotated[int, Field(ge=0)] | None = Field(
        None, description="record of that file to fill, from 0, where it has several times"
    )
    precision: Literal["float64", "float32"] = Field(
        "float64", description="how bed.nc stores numbers; class fractions sum to 1 exactly in float32 too"
    )
    text: bool = Field(False, description="write bed.csv as well: one row for each cell, in the grid's own order")

    figures: bool = Field(
        False, description="write every map and diagnostic as PNG and PDF for a paper, in figures/ (some seconds)"
    )

    @model_validator(mode="after")
    def _into_has_names(self) -> Outputs:
        if self.into is not None and self.names is None:
            raise ValueError("into: needs names as well, the file that says what your variables are called")
        if self.into_record is not None and self.into is None:
            raise ValueError("into_record: says a record of the file in `into`, which is missing")
        return self
