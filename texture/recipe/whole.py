"""The whole recipe, and what its blocks must agree on."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, get_args

from pydantic import Field, model_validator

from texture.recipe.bed import Bed
from texture.recipe.composition import Composition
from texture.recipe.ensemble import Ensemble
from texture.recipe.further import FurtherTarget
from texture.recipe.intake import Intake
from texture.recipe.inventory import Inventory
from texture.recipe.method import Method, MethodName
from texture.recipe.mobility import Mobility
from texture.recipe.outputs import Outputs
from texture.recipe.quantities import Quantity
from texture.recipe.report import Report
from texture.recipe.rim import Rim
from texture.recipe.samples import Samples
from texture.recipe.sensitivity import Sensitivity
from texture.recipe.settings import Settings, check_composition, check_names, nearest_known
from texture.recipe.target import TargetSettings
from texture.recipe.validation import Validation
from texture.recipe.zones import Zone

__all__ = ["Recipe", "further_recipes", "with_method"]


class Recipe(Settings):
    """The whole recipe."""

    title: str = Field("Untitled bed", description="stands on the page and in the files")
    output: Path = Field(Path("out"), description="output folder, relative to the recipe")
    seed: Annotated[int, Field(ge=0, lt=2**32)] = Field(1, description="seed of everything that is drawn")
    samples: tuple[Samples, ...] = Field(min_length=1)
    intake: Intake = Field(default_factory=Intake)
    composition: Composition = Field(default_factory=Composition)
    target: TargetSettings
    further_targets: tuple[FurtherTarget, ...] = Field(
        (), description="more grids, such as nested ones, that the same fit is mapped on by `texture build`"
    )
    zones: tuple[Zone, ...] = Field((), description="places with a bed of their own")
    method: Method = Field(default_factory=Method)
    validation: Validation = Field(default_factory=Validation)
    bed: Bed = Field(default_factory=Bed)
    rim: Rim | None = Field(None, description="coarse cells along the open boundary; none if absent")
    mobility: tuple[Mobility, ...] = Field((), description="waves and currents, to see what they would move")
    inventory: Inventory = Field(default_factory=Inventory)
    quantities: tuple[Quantity, ...] = Field(
        (), description="further numbers of the samples, each with a map of its own"
    )
    ensemble: Ensemble = Field(default_factory=Ensemble)
    sensitivity: Sensitivity | None = Field(
        None, description="a set of beds that differ in what is not sure; none if absent"
    )
    outputs: Outputs = Field(default_factory=Outputs)
    report: Report = Field(default_factory=Report)

    @model_validator(mode="after")
    def _names_agree(self) -> Recipe:
        parts, classes = self.composition.parts, tuple(c.name for c in self.bed.classes)
        for c in self.bed.classes:
            if c.part not in parts:
                raise ValueError(f'bed.classes "{c.name}": part "{c.part}" is not one of {list(parts)}')
        for part in parts:
            if part not in {c.part for c in self.bed.classes}:
                raise ValueError(f'bed.classes: no class takes part "{part}"; its mass would be lost')
        for i, layer in enumerate(self.bed.layers):
            if isinstance(layer.fill, dict):
                check_composition(f"bed.layers[{i}].fill", layer.fill, parts, classes)
        if self.bed.land_fill != "nearest":
            check_composition("bed.land_fill", self.bed.land_fill, parts, classes)
        self._check_zones()
        self._check_further(classes)
        conditions = [m.name for m in self.mobility]
        for name in conditions:
            if conditions.count(name) > 1:
                raise ValueError(f'mobility: the name "{name}" is given twice')
        self._check_quantities()
        self.method.check_used(self.methods)
        self._check_rim("rim", self.rim, classes)
        return self

    def _check_rim(self, key: str, rim: Rim | None, classes: tuple[str, ...]) -> None:
        if rim is not None and rim.classes is not None:
            check_names(f"{key}.classes", rim.classes, classes)
        if rim is not None and rim.composition is not None:
            check_names(f"{key}.composition", rim.composition, self.composition.parts)

    def _check_further(self, classes: tuple[str, ...]) -> None:
        names = [t.name.lower() for t in self.further_targets]
        for target in self.further_targets:
            if names.count(target.name.lower()) > 1:
                raise ValueError(f'further_targets: the name "{target.name}" is given twice')
            self._check_rim(f'further_targets "{target.name}", rim', target.rim, classes)

    def _check_quantities(self) -> None:
        names = [q.name for q in self.quantities]
        for name in names:
            if names.count(name) > 1:
                raise ValueError(f'quantities: the name "{name}" is given twice')
        for i, block in enumerate(self.samples):
            for name in block.quantities:
                if name not in names:
                    known = nearest_known(name, tuple(names)) if names else "no [[quantities]] block names any"
                    raise ValueError(f'samples[{i}].quantities: "{name}" is not among the quantities; {known}')
        for quantity in self.quantities:
            if (
                quantity.column is None
                and quantity.curve is None
                and not any(quantity.name in s.quantities for s in self.samples)
            ):
                raise ValueError(f'quantities "{quantity.name}": give column, the heading where it stands, or curve')

    @property
    def methods(self) -> tuple[MethodName, ...]:
        """Every method of a run: what treatments of zeros are tried with, the map's own, and those compared, the simplest first.

        With `name = "best"` these are all whose covariates are given; ways through water only where they are asked for.
        """
        method, every = self.method, get_args(MethodName)
        asked = {method.tried_with, *self.validation.compare}
        if method.name != "best":
            asked.add(method.name)
        else:
            asked |= set(every) - {"kriging_in_water", "kriging_with_covariates", "kriging_with_drift"}
            asked |= {"kriging_with_covariates"} if method.covariates and method.fit == "likelihood" else set()
            asked |= {"kriging_with_drift"} if method.covariates or method.drift else set()
        return tuple(name for name in every if name in asked)

    def _check_zones(self) -> None:
        names = [z.name for z in self.zones]
        for zone in self.zones:
            if names.count(zone.name) > 1 or zone.name == "all":
                raise ValueError(
                    f'zones: the name "{zone.name}" is {"kept for all cells" if zone.name == "all" else "given twice"}'
                )
            if zone.composition is not None:
                check_composition(f'zones "{zone.name}", composition', zone.composition, self.composition.parts, ())
        if self.zones and self.ensemble.members:
            raise ValueError("ensemble.members: members are drawn without zones; leave one of the two out")
        if self.zones and self.sensitivity is not None:
            raise ValueError("sensitivity: its cases are mapped without zones; leave one of the two out")
        hard = any(z.soft_edge_m == 0.0 for z in self.zones)
        if hard and self.composition.zeros == "censor":
            raise ValueError(
                'composition.zeros = "censor" fills in each station from its neighbours, across the hard edges of zones too; '
                'choose "auto", "replace" or "presence", or give the zones a soft_edge_m'
            )


def with_method(recipe: Recipe, name: str) -> Recipe:
    """The same recipe with the method that was found best, or already named."""
    return recipe.model_copy(update={"method": recipe.method.model_copy(update={"name": name})})


def further_recipes(recipe: Recipe) -> tuple[Recipe, ...]:
    """One recipe for each further target, with it in the place of the run's own: nothing in it is of the run's own cells."""
    return tuple(
        recipe.model_copy(
            update={
                "title": f"{recipe.title}: {further.name}",
                "target": further.target,
                "rim": further.rim,
                "further_targets": (),
                "mobility": (),
                "outputs": recipe.outputs.model_copy(
                    update={"into": None, "into_record": None, "names": further.names or recipe.outputs.names}
                ),
            }
        )
        for further in recipe.further_targets
    )
