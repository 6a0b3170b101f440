"""Every variable of `bed.nc` with its CF attributes: one table for writing, renaming and reading back."""

from __future__ import annotations

from typing import Any

from texture.bed.bed import EVIDENCE
from texture.output.cf import flags

__all__ = ["BED_VARIABLES", "FORMS", "KINDS", "SOURCES"]

FORMS = {1: "excess_ratio", 2: "excess_stress"}
KINDS = {1: "grain", 2: "floc"}
SOURCES = {0: "not given", 1: "given", 2: "computed"}

BED_VARIABLES: dict[str, dict[str, Any]] = {
    # on (class, layer, cells)
    "class_fraction": {
        "long_name": "fraction of the dry mass of the bed in each sediment class",
        "units": "1",
        "cell_methods": "area: mean",
        "ancillary_variables": "evidence rim_weight",
    },
    "class_mass_content": {
        "long_name": "dry mass of each sediment class in the layer, by area",
        "units": "kg m-2",
    },
    "hiding_exposure_factor": {
        "long_name": "factor on the critical stress of the class in the mixture",
        "units": "1",
    },
    # on (layer, cells)
    "erodible_thickness": {"long_name": "thickness of the layer that can erode", "units": "m"},
    "dry_density": {"long_name": "dry mass in a volume of bed", "units": "kg m-3"},
    "porosity": {
        "long_name": "share of pores in the volume of the bed",
        "units": "1",
    },
    "mixture_median_diameter": {
        "standard_name": "sea_floor_sediment_grain_size",
        "long_name": "median grain diameter of the mixture",
        "units": "m",
    },
    "mixture_geometric_mean_diameter": {
        "long_name": "geometric mean grain diameter of the mixture, by mass",
        "units": "m",
    },
    "critical_stress_for_erosion": {
        "long_name": "critical bed shear stress for erosion of the mixture",
        "units": "Pa",
    },
    "evidence": {"long_name": "where the bed of the cell comes from", **flags(EVIDENCE)},
    # on the cells
    "skin_roughness_length": {
        "long_name": "roughness length of the grains at the surface",
        "units": "m",
        "comment": "z0 = d50 / 12; roughness of the grains, not total drag; it does not hold on hard ground",
    },
    "rim_weight": {
        "long_name": "weight of the padded rim in the cell, 1 at the open boundary and 0 outside the rim",
        "units": "1",
    },
    "hard_ground_probability": {
        "long_name": "probability that the ground is hard, so that nothing can erode",
        "units": "1",
        "comment": "indicator kriging of stations that found hard ground, 1 inside the user's polygons; 0 where neither tells of any",
    },
    "water": {
        "standard_name": "sea_binary_mask",
        "long_name": "1 where the cell is water, 0 where it is land",
        "units": "1",
    },
    # on (condition, cells)
    "skin_friction_stress": {
        "long_name": "largest stress of waves and current on the grains of the surface",
        "units": "Pa",
        "comment": "Soulsby (1997), from the roughness of the grains; not total drag",
    },
    "flushed_mud": {
        "long_name": "mud under a fair-weather stress far beyond its critical stress",
        **flags({0: "no", 1: "yes"}),
    },
    # on (class, condition) and (condition)
    "moving_area_share": {
        "long_name": "share of the water area where the class lies at the surface and moves",
        "units": "1",
    },
    "condition_name": {"long_name": "name of the condition of waves and current"},
    # on (class)
    "class_name": {"long_name": "name of the sediment class"},
    "class_part": {"long_name": "part of the map that the class is a share of"},
    "class_share": {"long_name": "share of that part", "units": "1"},
    "class_kind": {"long_name": "single grains or flocs", **flags(KINDS)},
    "grain_diameter": {"long_name": "median grain diameter", "units": "m"},
    "grain_density": {"long_name": "density of the grains", "units": "kg m-3"},
    "settling_velocity": {"long_name": "settling velocity, positive downward", "units": "m s-1"},
    "settling_velocity_source": {"long_name": "where the settling velocity comes from", **flags(SOURCES)},
    "critical_stress": {"long_name": "critical bed shear stress of the class alone", "units": "Pa"},
    "critical_stress_in_layer": {
        "long_name": "critical bed shear stress of the class alone, in the layer",
        "units": "Pa",
    },
    "critical_stress_source": {"long_name": "where the critical stress comes from", **flags(SOURCES)},
    "class_dry_density": {"long_name": "dry density of a bed of the class alone", "units": "kg m-3"},
    "effective_density": {"long_name": "density of flocs above that of the water", "units": "kg m-3"},
    "erosion_form": {"long_name": "form of the erosion law", **flags(FORMS)},
    "erosion_rate": {
        "long_name": "erosion rate, to be multiplied by excess stress over critical stress",
        "units": "kg m-2 s-1",
    },
    "erosion_rate_per_stress": {
        "long_name": "erosion rate for each pascal of excess stress",
        "units": "kg m-2 s-1 Pa-1",
    },
    # on (layer)
    "layer": {"long_name": "layer of the bed, 1 at the top"},
}
