"""`[inventory]`: how the tonnes are counted out."""

from __future__ import annotations

from pydantic import Field, model_validator

from texture.recipe.settings import Settings

__all__ = ["Inventory"]


class Inventory(Settings):
    """How the tonnes are counted out."""

    depth_bands_m: tuple[float, ...] = Field(
        (10.0, 20.0, 50.0, 100.0, 200.0), description="limits of the depth bands, from shallow to deep"
    )

    @model_validator(mode="after")
    def _ascending(self) -> Inventory:
        if list(self.depth_bands_m) != sorted(set(self.depth_bands_m)):
            raise ValueError(f"depth_bands_m: expected limits from shallow to deep, found {list(self.depth_bands_m)}")
        return self
