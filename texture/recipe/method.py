"""`[method]`: how values travel from stations to cells."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from texture.recipe.covariate import Covariate
from texture.recipe.settings import Positive, Settings, check_names

__all__ = ["Method", "MethodName"]

MethodName = Literal[
    "mean",
    "nearest",
    "triangulation",
    "inverse_distance",
    "kriging",
    "kriging_in_water",
    "kriging_with_covariates",
    "kriging_with_drift",
    "forest",
    "forest_kriging",
    "average",
]
KRIGING_BY = {"plane": "kriging", "in_water": "kriging_in_water", "with_covariates": "kriging_with_covariates"}
"""What `name = "kriging"` means with each distance."""


class Method(Settings):
    """How values travel from stations to cells."""

    name: MethodName | Literal["best"] = Field(
        "kriging",
        description="method of the map; best takes the simplest within one standard error of the lowest energy score",
    )
    neighbours: Annotated[int, Field(ge=4, le=500)] = Field(32, description="stations around a point")
    neighbourhood: Literal["tile", "nearest"] = Field(
        "tile", description="one neighbourhood for each small tile, or exactly `neighbours` for each point"
    )
    radius_m: Positive | None = Field(
        None,
        description='with neighbourhood = "nearest": stations further off are not used; cells with fewer than `at_least` within it '
        "are empty in texture.nc, and filled from the nearest stations in bed.nc",
    )
    at_least: Annotated[int, Field(ge=1)] = Field(
        1,
        description="stations that a point needs within the radius and sectors; with fewer the nearest serve, and it is flagged",
    )
    per_sector_at_most: Annotated[int, Field(ge=1)] | None = Field(
        None, description='with neighbourhood = "nearest": stations from each quadrant around a point at most'
    )
    distance: Literal["plane", "in_water", "with_covariates"] = Field(
        "plane",
        description="how far apart two places are: in the plane, along the shortest way around land, or in the plane with the "
        "covariates as further coordinates, each with a range of its own",
    )
    covariates: tuple[Covariate, ...] = Field(
        (), description="what the bed may follow beside place; used by kriging_with_covariates and kriging_with_drift"
    )
    drift: tuple[str, ...] = Field(
        (), description='covariates, or "x" and "y", that the mean follows linearly; all covariates if absent'
    )
    anisotropy: Literal["none", "fit"] | tuple[float, float] = Field(
        "none",
        description="ranges that depend on direction: found by likelihood, or azimuth in degrees clockwise from grid north and ratio "
        "of longer to shorter; not for distance in water",
    )
    fit: Literal["likelihood", "variogram"] = Field("likelihood", description="how the covariance is fitted")
    estimate: Literal["mean", "median"] = Field(
        "mean", description="expected fraction, or back-transform of the kriged coordinates"
    )

    @model_validator(mode="before")
    @classmethod
    def _one_name(cls, given: Any) -> Any:
        """`name = "kriging"` with another distance, or with drift, is the method of that name."""
        if not isinstance(given, dict):
            return given
        name, distance = given.get("name", "kriging"), given.get("distance")
        if name == "kriging" and distance in KRIGING_BY:
            name = KRIGING_BY[distance]
        if name == "kriging" and given.get("drift"):
            name = "kriging_with_drift"
        own = next((d for d, n in KRIGING_BY.items() if n == name), "plane")
        if distance in KRIGING_BY and distance != own:
            raise ValueError(f'distance = "{distance}" acts with name = "{KRIGING_BY[distance]}", found "{name}"')
        if distance not in (None, *KRIGING_BY):
            return given
        # A key that was not given and keeps its default stays a default that nobody chose.
        plain = {"name": "kriging", "distance": "plane"}
        implied = {"name": name, "distance": own}
        return {**given, **{key: v for key, v in implied.items() if key in given or v != plain[key]}}

    @model_validator(mode="after")
    def _agrees(self) -> Method:
        self._check_neighbourhood()
        if self.anisotropy != "none" and (self.name == "kriging_in_water" or not self.name.startswith("kriging")):
            raise ValueError(f'anisotropy acts on kriging in the plane; found name = "{self.name}"')
        if isinstance(self.anisotropy, tuple) and not 1.0 <= self.anisotropy[1] <= 1000.0:
            raise ValueError(
                f"anisotropy: found ratio {self.anisotropy[1]:g}, expected longer over shorter range, 1 or more"
            )
        if self.anisotropy == "fit" and self.fit == "variogram":
            raise ValueError('anisotropy = "fit" needs fit = "likelihood"; or give azimuth and ratio')
        names = tuple(c.name for c in self.covariates)
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f'covariates: the name "{name}" is given twice')
        check_names("drift", dict.fromkeys(self.drift, 0.0), ("x", "y", *names))
        if len(set(self.drift)) < len(self.drift):
            raise ValueError(f"drift: found {list(self.drift)}, expected each name once")
        return self

    def _check_neighbourhood(self) -> None:
        ruled = [key for key in ("radius_m", "per_sector_at_most") if getattr(self, key) is not None]
        if ruled and self.neighbourhood != "nearest":
            raise ValueError(f'{ruled[0]} chooses stations point by point; it needs neighbourhood = "nearest"')
        if ruled and not self.name.startswith("kriging"):
            raise ValueError(f'{ruled[0]} acts on kriging only; found name = "{self.name}"')
        if self.at_least > 1 and not ruled:
            raise ValueError("at_least acts with radius_m or per_sector_at_most only; give one of them")
        if self.at_least > self.neighbours:
            raise ValueError(
                f"at_least = {self.at_least}: more than the {self.neighbours} neighbours that are looked for"
            )

    def check_used(self, names: tuple[str, ...]) -> None:
        """See that the methods of a run have the covariates they need, and that none is given in vain."""
        if self.fit == "variogram" and "kriging_with_covariates" in names:
            raise ValueError(
                'method.fit = "variogram" knows one distance only; covariates as coordinates need fit = "likelihood"'
            )
        for name in names:
            if name == "kriging_with_covariates" and not self.covariates:
                raise ValueError(f'method "{name}" needs [[method.covariates]], such as name = "depth"')
            if name == "kriging_with_drift" and not (self.covariates or self.drift):
                raise ValueError(f'method "{name}" needs method.drift = ["x", "y"] or [[method.covariates]]')
        takers = {"kriging_with_covariates", "kriging_with_drift", "forest", "forest_kriging"}
        if self.covariates and not takers & set(names):
            raise ValueError(
                'method.covariates are given, but no method takes them; set method.distance = "with_covariates", or '
                'put "kriging_with_covariates" into validation.compare'
            )
        if self.drift and "kriging_with_drift" not in names:
            raise ValueError('method.drift acts with name = "kriging_with_drift", or with that in validation.compare')

    @property
    def tried_with(self) -> MethodName:
        """The method that treatments of zeros are compared by."""
        return "kriging" if self.name == "best" or self.name == "average" else self.name
