"""`[method]`: how values travel from stations to cells."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from texture.recipe.settings import Settings

__all__ = ["Method", "MethodName"]

MethodName = Literal["mean", "nearest", "inverse_distance", "kriging"]


class Method(Settings):
    """How values travel from stations to cells."""

    name: MethodName = Field("kriging", description="method of the map")
    neighbours: Annotated[int, Field(ge=4, le=500)] = Field(32, description="stations around a point")
    neighbourhood: Literal["tile", "nearest"] = Field(
        "tile", description="one neighbourhood for each small tile, or exactly `neighbours` for each point"
    )
    fit: Literal["likelihood", "variogram"] = Field("likelihood", description="how the covariance is fitted")
    estimate: Literal["mean", "median"] = Field(
        "mean", description="expected fraction, or back-transform of the kriged coordinates"
    )
