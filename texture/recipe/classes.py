"""`[[bed.classes]]`: sediment classes of the model and their properties, grouped by where they act."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Fraction, Positive, Settings

__all__ = ["BedClass", "Erosion", "Grain", "Packing", "WaterColumn"]


class Grain(Settings):
    """The grain itself."""

    diameter_m: Positive | None = Field(None, description="median diameter in metres")
    density_kg_m3: Annotated[float, Field(gt=1000.0, lt=10000.0)] = Field(2650.0, description="grain density")


class WaterColumn(Settings):
    """How the class behaves in the water."""

    settling_velocity_m_s: Positive | None = Field(
        None, description="settling velocity; computed for grains above 63 µm"
    )
    effective_density_kg_m3: Annotated[float, Field(gt=0.0, lt=1700.0)] | None = Field(
        None, description="of flocs: by how much they are denser than the water"
    )


class Erosion(Settings):
    """How the class leaves the bed."""

    critical_stress_pa: Positive | None = Field(None, description="critical stress; computed for grains above 63 µm")
    rate: Positive | None = Field(None, description="erosion rate, in the unit that `form` tells")
    form: Literal["excess_ratio", "excess_stress"] = Field(
        "excess_ratio", description="excess_ratio: kg m-2 s-1; excess_stress: kg m-2 s-1 Pa-1"
    )


class Packing(Settings):
    """How the class lies in the bed."""

    dry_density_kg_m3: Annotated[float, Field(gt=0.0, lt=5000.0)] | None = Field(
        None, description="dry mass in a volume of bed of this class alone; from its diameter if absent"
    )


class BedClass(Settings):
    """One sediment class of the model, a share of one part."""

    name: Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]*$")] = Field(description="name of the class")
    part: str = Field(description="part of the map that it is a share of")
    share: Fraction = Field(
        1.0,
        description="share of that part; the shares of a part sum to 1; flocs have none in the bed unless it is set",
    )
    kind: Literal["grain", "floc"] = Field("grain", description="single grains, or flocs with given properties")
    grain: Grain = Field(default_factory=Grain)
    water_column: WaterColumn = Field(default_factory=WaterColumn)
    erosion: Erosion = Field(default_factory=Erosion)
    packing: Packing = Field(default_factory=Packing)

    @model_validator(mode="before")
    @classmethod
    def _flocs_settle_later(cls, given: Any) -> Any:
        if isinstance(given, dict) and given.get("kind") == "floc":
            return {"share": 0.0, **given}
        return given

    @model_validator(mode="after")
    def _effective_density_of_flocs(self) -> BedClass:
        if self.kind == "grain" and self.water_column.effective_density_kg_m3 is not None:
            raise ValueError('water_column.effective_density_kg_m3: is of flocs; set kind = "floc", or leave it out')
        return self
