"""`bed.nc`: the bed as a CF NetCDF file."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from texture.bed import HIDING_WORDS, PACKING_WORDS, single_fractions
from texture.bed.mixture_packing import class_dry_density
from texture.output.bed_variables import BED_VARIABLES, FORMS, KINDS, SOURCES
from texture.output.cf import global_attributes, on_cells, on_cells_later
from texture.output.on_demand import on_demand

if TYPE_CHECKING:
    import xarray as xr

    from texture.bed import Bed, ClassProperties, Moved
    from texture.recipe import Bed as BedSettings
    from texture.recipe import Recipe
    from texture.targets import Target

__all__ = ["bed_dataset"]

REFERENCES = (
    "Settling velocity: Soulsby (1997), Dynamics of Marine Sands. Critical stress of single grains: Soulsby and "
    "Whitehouse (1997). Porosity: Wu and Wang (2006), J. Hydraul. Eng. 132, 858-862, or as its comment says. Sea water: UNESCO (1983), "
    "Sharqawy et al. (2010)."
)
COMMENT = (
    "Interpolated from grab samples: smoother than any real bed. Settling, erosion and strength of mud are not in "
    "grain size; values of classes finer than 63 micrometres and of flocs are the user's own or missing. Cells "
    "flagged as rim in evidence are numerical padding, not observed. Not for navigation, foundations or permits."
)


def bed_dataset(bed: Bed, target: Target, recipe: Recipe, moved: Sequence[Moved] = ()) -> xr.Dataset:
    """Lay the bed out as a CF dataset on the target's dimensions.

    Parameters
    ----------
    bed : Bed
    target : Target
    recipe : Recipe
        Title, method and surveys for the attributes, and `outputs.precision`: in single precision the class
        fractions are rounded so that they sum to 1 exactly as stored; positions stay in double precision.
    moved : sequence of Moved
        Results of the mobility screen, on (condition, …).

    Returns
    -------
    xarray.Dataset
        `class_fraction` and `class_mass_content` on (class, layer, …), the mixture's properties and
        `evidence` on (layer, …), `rim_weight`, `skin_roughness_length` and `water` on the cells, and the
        classes' properties on (class). No value of a cell is missing; `critical_stress_for_erosion` is left
        out when a class has no critical stress.
    """
    import xarray as xr

    layers = bed.erodible_thickness.shape[0]
    along_class = {
        name: xr.Variable(("class",), values, {**BED_VARIABLES[name], "coordinates": "class_name"})
        for name, values in _class_values(bed.classes, recipe).items()
    }
    if any(layer.critical_stress_pa for layer in recipe.bed.layers):
        along_class["critical_stress_in_layer"] = xr.Variable(
            ("class", "layer"),
            bed.class_critical_stress,
            {**BED_VARIABLES["critical_stress_in_layer"], "coordinates": "class_name"},
        )
    dataset = target.coordinates().assign({**along_class, **_cell_variables(bed, target, recipe.bed)})
    dataset = dataset.assign_coords(
        class_name=("class", _strings(bed.classes.names), BED_VARIABLES["class_name"]),
        layer=("layer", np.arange(1, layers + 1, dtype=np.int32), BED_VARIABLES["layer"]),
    )
    if moved:
        dataset = dataset.assign(_mobility(moved, target, bed.classes)).assign_coords(
            condition_name=("condition", _strings(tuple(m.name for m in moved)), BED_VARIABLES["condition_name"])
        )
    samples = ", ".join(s.survey or s.file.stem for s in recipe.samples)
    method = recipe.method.name.replace("_", " ")
    source = f"{method} of grab samples ({samples}) on {target.name}"
    dataset.attrs = {
        **global_attributes(recipe.title, source, COMMENT, REFERENCES, (s.credit for s in recipe.samples)),
        **dataset.attrs,
    }
    return _single(dataset) if recipe.outputs.precision == "float32" else dataset


def _single(dataset: xr.Dataset) -> xr.Dataset:
    """Measured values in single precision; coordinates and their bounds keep theirs."""
    for name in BED_VARIABLES:
        if name in dataset and dataset[name].dtype == np.float64:
            dataset[name] = _rounded(name, dataset.variables[name])
    return dataset


def _rounded(name: str, variable: xr.Variable) -> xr.Variable:
    round_all = single_fractions if name == "class_fraction" else lambda values: values.astype(np.float32)
    made = on_demand(variable.dims, lambda: round_all(variable.values), variable.shape, np.float32, variable.attrs)  # type: ignore[arg-type]
    made.encoding = dict(variable.encoding)
    return made


def _cell_variables(bed: Bed, target: Target, settings: BedSettings) -> dict[str, xr.Variable]:
    k, layers, _ = bed.class_fraction.shape
    each, both = {"layer": layers}, {"class": k, "layer": layers}
    variables = {}
    for name in ("class_fraction", "class_mass_content", *(["hiding_exposure_factor"] if bed.hidden else [])):
        variables[name] = _later(bed, name, target, both, "class_name")
    for name in ("erodible_thickness", "dry_density", "porosity", "mixture_median_diameter", "mixture_geometric_mean_diameter",
                 *(["critical_stress_for_erosion"] if bed.strong else [])):  # fmt: skip
        variables[name] = _later(bed, name, target, each)
    variables["evidence"] = on_cells(target, ("layer",), bed.evidence, **BED_VARIABLES["evidence"])
    variables["porosity"].attrs["comment"] = PACKING_WORDS[settings.packing]
    if bed.strong:
        variables["critical_stress_for_erosion"].attrs["comment"] = (
            f"mass-weighted mean of the critical stresses of the classes, {HIDING_WORDS[settings.hiding]}"
        )
    for name in ("skin_roughness_length", "rim_weight"):
        variables[name] = _later(bed, name, target, {})
    hard = np.broadcast_to(0.0, target.n_cells) if bed.hard_ground_probability is None else bed.hard_ground_probability
    variables["hard_ground_probability"] = on_cells_later(
        target, {}, lambda: hard, **BED_VARIABLES["hard_ground_probability"]
    )
    variables["water"] = on_cells(target, (), target.active.astype(np.int8), **BED_VARIABLES["water"])
    return variables


def _later(bed: Bed, name: str, target: Target, leading: dict[str, int], labels: str = "") -> xr.Variable:
    return on_cells_later(target, leading, lambda: getattr(bed, name), labels, **BED_VARIABLES[name])


def _mobility(moved: Sequence[Moved], target: Target, classes: ClassProperties) -> dict[str, xr.Variable]:
    import xarray as xr

    share = np.array([[m.moving_share[name] for m in moved] for name in classes.names])
    labels = {"coordinates": "class_name condition_name"}

    def on(name: str, values: Any) -> xr.Variable:
        return on_cells(target, ("condition",), values, "condition_name", **BED_VARIABLES[name])

    return {
        "skin_friction_stress": on("skin_friction_stress", np.stack([m.stress_pa for m in moved])),
        "flushed_mud": on("flushed_mud", np.stack([m.flushed for m in moved]).astype(np.int8)),
        "moving_area_share": xr.Variable(("class", "condition"), share, BED_VARIABLES["moving_area_share"] | labels),
    }


def _class_values(classes: ClassProperties, recipe: Recipe) -> dict[str, Any]:
    parts = recipe.composition.parts
    ratio = np.array([form == "excess_ratio" for form in classes.form])
    values = {
        "class_part": _strings(tuple(parts[i] for i in classes.part)),
        "class_share": classes.share,
        "class_kind": _codes(classes.kind, KINDS),
        "grain_diameter": classes.diameter_m,
        "grain_density": classes.density_kg_m3,
        "settling_velocity": classes.settling_velocity_m_s,
        "settling_velocity_source": _codes(classes.settling_source, SOURCES),
        "critical_stress": classes.critical_stress_pa,
        "critical_stress_source": _codes(classes.stress_source, SOURCES),
        "erosion_form": _codes(classes.form, FORMS),
        "erosion_rate": np.where(ratio, classes.erosion_rate, np.nan),
    }
    if not ratio.all():
        values["erosion_rate_per_stress"] = np.where(ratio, np.nan, classes.erosion_rate)
    if recipe.bed.packing == "class":
        values["class_dry_density"] = class_dry_density(classes)
    if "floc" in classes.kind:
        values["effective_density"] = classes.effective_density_kg_m3
    return values


def _strings(words: tuple[str, ...]) -> Any:
    return np.array(words, dtype=object)


def _codes(words: tuple[str, ...], meanings: dict[int, str]) -> Any:
    code = {word: value for value, word in meanings.items()}
    return np.array([code[word] for word in words], dtype=np.int8)
