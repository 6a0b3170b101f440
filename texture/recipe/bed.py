"""`[bed]`: layers and classes of the model's bed."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from texture.recipe.classes import BedClass, Grain
from texture.recipe.settings import Fraction, Positive, Settings, check_names

__all__ = ["Bed", "Layer", "WaterSettings"]


class Layer(Settings):
    """One layer of the bed, from the top."""

    thickness_m: Positive = Field(description="thickness where the bed is erodible")
    fill: Literal["same", "cores"] | dict[str, Fraction] = Field(
        "same",
        description='"same" as the map; from "cores" within their reach and the same as the map away from them; or a composition in parts or in classes, such as { sand = 0.9, mud = 0.1 }',
    )
    critical_stress_pa: dict[str, Positive] = Field(
        default_factory=dict,
        description="of classes in this layer instead of their own: soft above, consolidated below",
    )
    dry_density_kg_m3: Annotated[float, Field(gt=0.0, lt=5000.0)] | None = Field(
        None, description='dry density of the layer, for packing = "layer"'
    )


class WaterSettings(Settings):
    """The water that grains settle in."""

    temperature_c: Annotated[float, Field(ge=-2.0, le=40.0)] = Field(10.0, description="temperature")
    salinity: Annotated[float, Field(ge=0.0, le=42.0)] = Field(35.0, description="practical salinity")


def _default_classes() -> tuple[BedClass, ...]:
    return (
        BedClass(name="mud", part="mud", grain=Grain(diameter_m=20e-6)),
        BedClass(name="sand", part="sand", grain=Grain(diameter_m=250e-6)),
        BedClass(name="gravel", part="gravel", grain=Grain(diameter_m=8e-3)),
    )


class Bed(Settings):
    """Layers and classes of the model's bed."""

    least_fraction: Annotated[float, Field(ge=0.0, lt=0.2)] = Field(
        0.005, description="smaller class fractions become zero and the cell is closed again"
    )
    land_thickness_m: Annotated[float, Field(ge=0.0)] = Field(
        0.0, description="erodible thickness given to each layer of land cells"
    )
    land_fill: Literal["nearest"] | dict[str, Fraction] = Field(
        "nearest", description='bed of land cells: of the "nearest" water, or a composition in parts or in classes'
    )
    minimum_thickness_m: Annotated[float, Field(ge=0.0)] = Field(
        0.0, description="no layer is thinner than this, on land neither: for models that divide by it"
    )
    hard_ground: Path | None = Field(
        None, description="polygons of rock and other ground that cannot erode (GeoJSON, GeoPackage, Shapefile)"
    )
    hard_ground_threshold: Annotated[float, Field(gt=0.0, le=1.0)] = Field(
        0.5,
        description="probability of hard ground, from polygons and from stations that found it, above which nothing can erode",
    )
    packing: Literal["mixture", "class", "layer"] = Field(
        "mixture",
        description="dry density: from the mixture's median diameter (Wu & Wang 2006), from the classes' own (volumes add "
        "up, Colby 1963), or given for each layer",
    )
    hiding: Literal["none", "wu"] = Field(
        "none", description="small grains shelter behind large ones: not at all, or by Wu, Wang & Jia (2000)"
    )
    water: WaterSettings = Field(default_factory=WaterSettings)
    layers: tuple[Layer, ...] = Field((Layer(thickness_m=0.10),), min_length=1, description="layers from the top")
    classes: tuple[BedClass, ...] = Field(
        default_factory=_default_classes,
        min_length=1,
        description="sediment classes of the model; one a part if absent",
    )

    @model_validator(mode="after")
    def _shares_close(self) -> Bed:
        names = [c.name for c in self.classes]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f'classes: the name "{name}" is given twice')
        sums: dict[str, float] = {}
        for c in self.classes:
            sums[c.part] = sums.get(c.part, 0.0) + c.share
        for part, total in sums.items():
            if abs(total - 1.0) > 1e-9:  # shares are typed decimals; anything further off is a mistake
                raise ValueError(f'classes: the shares of part "{part}" sum to {total:g}, expected 1')
        self._check_packing()
        for i, layer in enumerate(self.layers):
            check_names(f"layers[{i}].critical_stress_pa", layer.critical_stress_pa, tuple(names))
            if layer.thickness_m < self.minimum_thickness_m:
                raise ValueError(
                    f"layers[{i}].thickness_m = {layer.thickness_m:g} is less than minimum_thickness_m = {self.minimum_thickness_m:g}"
                )
        if self.layers[0].fill != "same":
            raise ValueError('layers: the first layer is the map, so its fill is "same"')
        return self

    def _check_packing(self) -> None:
        for c in self.classes:
            if c.packing.dry_density_kg_m3 is None:
                continue
            if self.packing != "class":
                raise ValueError(f'classes "{c.name}": packing.dry_density_kg_m3 acts with packing = "class" only')
            if c.packing.dry_density_kg_m3 >= c.grain.density_kg_m3:
                raise ValueError(
                    f'classes "{c.name}": packing.dry_density_kg_m3 = {c.packing.dry_density_kg_m3:g} leaves no pores '
                    f"between grains of {c.grain.density_kg_m3:g}"
                )
        for i, layer in enumerate(self.layers):
            if (layer.dry_density_kg_m3 is None) == (self.packing == "layer"):
                raise ValueError(
                    f'layers[{i}].dry_density_kg_m3: packing = "layer" needs it'
                    if layer.dry_density_kg_m3 is None
                    else f'layers[{i}].dry_density_kg_m3 acts with packing = "layer" only'
                )
