"""`[[method.covariates]]`: what the bed may follow beside place, such as depth."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Settings

__all__ = ["BUILT_IN", "Covariate"]

BUILT_IN = ("depth", "shore_distance")
"""Covariates that the target itself can give."""


class Covariate(Settings):
    """One `[[method.covariates]]` block: values from a GeoTIFF or a NetCDF file, or from the target itself."""

    name: Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]*$")] = Field(
        description='a word for it; "depth" and "shore_distance" need no file, the target gives them'
    )
    file: Path | None = Field(
        None,
        description="GeoTIFF in any CRS, or NetCDF with one- or two-dimensional coordinates or on the target's cells",
    )
    variable: str | None = Field(None, description="of a NetCDF file that holds several")
    transform: Literal["none", "log", "sqrt"] = Field(
        "none", description='"log" is ln(1 + value), "sqrt" the square root; values below 0 count as 0 in both'
    )

    @model_validator(mode="after")
    def _has_a_source(self) -> Covariate:
        if self.name in ("x", "y"):
            raise ValueError(f'"{self.name}" is the place itself; give the covariate another name')
        if self.file is None and self.name not in BUILT_IN:
            raise ValueError(
                f'"{self.name}": file is missing; without one the target gives {" and ".join(BUILT_IN)} only'
            )
        if self.variable is not None and (self.file is None or self.file.suffix.lower() in (".tif", ".tiff")):
            raise ValueError(
                f'"{self.name}": variable = "{self.variable}" names one of a NetCDF file; found {self.file}'
            )
        return self
