"""`[[quantities]]`: a further number of the samples that is mapped by the same machinery."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Positive, Settings

__all__ = ["TAKEN_NAMES", "Quantity"]

TAKEN_NAMES = frozenset((
    "id", "survey", "longitude", "latitude", "mud", "sand", "gravel", "kind", "file", "sheet", "row", "date", "depth_m", "resolution",
    "repeats", "repeat_sd_mud", "repeat_sd_sand", "repeat_sd_gravel", "position_accuracy_m", "description", "described_class", "mud_low",
    "mud_high", "sand_low", "sand_high", "gravel_low", "gravel_high", "median_phi", "mud_below_mm", "gravel_above_mm", "held_out_z",
    "geometry", "x", "y", "column", "face", "node", "layer", "class", "quantile", "evidence", "texture_class", "texture_class_probability",
    "crs", "mesh", "depth", "method", "fold", "nearest_kept_m", "all",
    "sample_distance", "expected_error",
))  # fmt: skip
"""What columns of tables and variables of files are already called."""
TAKEN_ENDS = ("_bounds", "_fraction", "_fraction_quantile", "_half_width")
PERCENT = ("%", "percent")


class Quantity(Settings):
    """One number beside the composition, such as organic carbon; it rides along with the stations and gets a map of its own."""

    name: Annotated[str, Field(pattern=r"^[a-z][a-z0-9_]*$")] = Field(
        description="name of its column in tables, its variable in texture.nc and its GeoTIFF"
    )
    unit: str = Field("1", description='unit of the numbers, such as "percent", "mg kg-1" or "phi"')
    column: str | None = Field(
        None,
        description="its heading in the spreadsheets; where one file says it otherwise, name it in that samples block",
    )
    curve: Literal["median_phi"] | None = Field(
        None,
        description="taken from the size classes instead: the median of each sample's cumulative curve, or the median "
        "that the laboratory gives",
    )
    scale: Literal["plain", "log", "logit"] = Field(
        "plain", description="mapped as it is, as its logarithm (above 0), or as log-odds (between 0 and `upper`)"
    )
    upper: Positive | None = Field(None, description="largest value possible, for logit; 100 for percent, else 1")

    @model_validator(mode="after")
    def _one_source(self) -> Quantity:
        if self.name in TAKEN_NAMES or self.name.startswith("logratio_") or self.name.endswith(TAKEN_ENDS):
            raise ValueError(f'name: "{self.name}" is the name of something else in the tables; choose another')
        if self.column is not None and self.curve is not None:
            raise ValueError(f"{self.name}: give column or curve, not both")
        if self.curve is not None and (self.unit not in ("1", "phi") or self.scale != "plain"):
            raise ValueError(f'{self.name}: a median in phi has unit "phi" and scale "plain"')
        if self.upper is not None and self.scale != "logit":
            raise ValueError(f'{self.name}: upper counts for scale = "logit" alone')
        return self

    @property
    def units(self) -> str:
        """The unit as it is said: phi for a median of curves."""
        return "phi" if self.curve is not None else self.unit

    @property
    def most(self) -> float:
        """Largest value possible on the logit scale."""
        return self.upper if self.upper is not None else 100.0 if self.unit in PERCENT else 1.0
