"""`[target]`: the cells to fill."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Positive, Settings

__all__ = ["TargetSettings"]


class TargetSettings(Settings):
    """The cells to fill: a grid file, or bounds with a cell size."""

    file: Path | None = Field(
        None, description="CF or UGRID NetCDF grid, GeoTIFF template, or a table or vector file of places"
    )
    bounds: tuple[float, float, float, float] | None = Field(None, description="west, south, east, north in `crs`")
    cell_size: Positive | None = Field(None, description="side of a square cell in units of `crs`")
    crs: str | None = Field(None, description="EPSG code or WKT of the grid; read from the file if absent")
    mask: str | None = Field(None, description="mask variable, where CF attributes do not tell")
    longitude: str | None = Field(
        None, description="variable of cell-centre longitudes, where CF attributes do not tell"
    )
    latitude: str | None = Field(None, description="variable of cell-centre latitudes, where CF attributes do not tell")
    variable: str | None = Field(
        None, description="variable of a staggered grid whose places are to be filled; its coordinates are taken"
    )
    depth: str | None = Field(None, description="variable of water depth, where CF attributes do not tell")
    location: Literal["face", "node"] = Field("face", description="where on a mesh the bed is wanted")
    halo_cells: Annotated[int, Field(ge=0, le=8)] = Field(
        0, description="outer rows and columns of a grid that repeat their neighbours and get no bed of their own"
    )
    points_per_cell: Literal["auto"] | Annotated[int, Field(ge=1, le=64)] = Field(
        "auto", description="points inside a cell that its value is averaged over (1, 4, 9, …)"
    )
    land: Path | None = Field(None, description="land polygons (GeoJSON, GeoPackage, Shapefile)")
    inlet_width_m: Literal["auto"] | Annotated[float, Field(ge=0.0)] = Field(
        "auto", description="narrower openings are river inlets, not sea; a tenth of the widest if `auto`"
    )

    @model_validator(mode="after")
    def _one_kind(self) -> TargetSettings:
        if (self.file is None) == (self.bounds is None):
            raise ValueError("give either file, or bounds with cell_size and crs")
        if self.bounds is not None:
            if self.cell_size is None or self.crs is None:
                raise ValueError("bounds need cell_size and crs beside them")
            west, south, east, north = self.bounds
            if not (west < east and south < north):
                raise ValueError(f"bounds are west, south, east, north; found {list(self.bounds)}")
        if self.variable is not None and (self.file is None or self.longitude is not None or self.latitude is not None):
            raise ValueError(
                "variable chooses the coordinates in a grid file; leave out longitude and latitude, or variable"
            )
        if self.points_per_cell != "auto" and round(self.points_per_cell**0.5) ** 2 != self.points_per_cell:
            raise ValueError(f"points_per_cell is 1, 4, 9, 16 …; found {self.points_per_cell}")
        return self
