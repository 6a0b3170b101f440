"""`[[zones]]`: places with a bed of their own, such as a dredged channel, a river or an estuary."""

from __future__ import annotations

from pathlib import Path
from typing import Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Fraction, NotNegative, Settings

__all__ = ["Zone"]


class Zone(Settings):
    """A place with a bed of its own. Where zones overlap, the one that is listed first has the cell."""

    name: str = Field(min_length=1, description="stands in the inventory and in messages")
    polygons: Path | None = Field(None, description="polygons of the zone (GeoJSON, GeoPackage, Shapefile)")
    file: Path | None = Field(None, description="NetCDF file of `variable`; that of the target if absent")
    variable: str | None = Field(None, description="variable on the target's cells that numbers zones")
    values: tuple[int, ...] = Field((), description="its values that are this zone")
    kind: Literal["stations", "mean", "given"] = Field(
        "stations",
        description="its own stations alone by the map's method; their mean everywhere; or the composition given here",
    )
    composition: dict[str, Fraction] | None = Field(None, description='in parts, summing to 1, for kind = "given"')
    soft_edge_m: NotNegative = Field(
        0.0,
        description="width over which the zone fades into the map around it; 0: a hard edge, which no station speaks across",
    )

    @model_validator(mode="after")
    def _complete(self) -> Zone:
        if (self.polygons is None) == (self.variable is None):
            raise ValueError(f'zones "{self.name}": give either polygons, or variable with values')
        if self.variable is not None and not self.values:
            raise ValueError(f'zones "{self.name}": variable = "{self.variable}" needs values, such as [2]')
        if self.variable is None and (self.values or self.file is not None):
            raise ValueError(f'zones "{self.name}": file and values are of a variable, which is missing')
        if (self.kind == "given") != (self.composition is not None):
            raise ValueError(f'zones "{self.name}": kind = "given" and composition belong together')
        return self
