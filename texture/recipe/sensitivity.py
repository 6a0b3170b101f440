"""`[sensitivity]`: a set of beds that differ in what a modeller is not sure of."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from texture.recipe.settings import Positive, Settings, nearest_known

__all__ = ["CONTROLS", "MAPS", "OF_CLASSES", "Sensitivity", "Vary", "What"]

What = Literal[
    "settling_velocity", "critical_stress", "erosion_rate", "diameter", "porosity", "thickness", "rim_width", "detection_limit",
    "covariance_range", "shift", "member", "control",
]  # fmt: skip
OF_CLASSES = ("settling_velocity", "critical_stress", "erosion_rate", "diameter")
MAPS = ("shift", "member", "control")
"""Each of these chooses the map itself."""
CONTROLS = ("uniform", "nearest")
NO_FACTORS = ("shift", "member", "control")


class Vary(Settings):
    """One thing that differs between the cases."""

    what: What = Field(description="what differs")
    classes: tuple[str, ...] = Field((), description="of which classes of the bed; all that have a value if absent")
    layers: tuple[Annotated[int, Field(ge=1)], ...] = Field(
        (), description="of which layers, from 1 at the top; all if absent"
    )
    factors: tuple[Positive, ...] | None = Field(
        None,
        min_length=1,
        description="what the recipe's value is multiplied by; sampled in log space between the ends",
    )
    values: tuple[float | str, ...] | None = Field(
        None, min_length=1, description="instead of the recipe's value; sampled designs take them in turn"
    )
    range: tuple[float, float] | None = Field(
        None, description="ends of the values; sampled evenly between them, else taken at the ends"
    )

    @property
    def label(self) -> str:
        """Name of the column in cases.csv and of the attribute in the case's file."""
        return "_".join((self.what, *self.classes, *(f"layer{n}" for n in self.layers)))

    @field_validator("values", mode="before")
    @classmethod
    def _numbers_or_words(cls, given: Any) -> Any:
        for value in given if isinstance(given, (list, tuple)) else ():
            if isinstance(value, bool) or not isinstance(value, (int, float, str)):
                raise ValueError(f"expected numbers, or words for control, found {value!r}")
        return given

    @model_validator(mode="after")
    def _fits_what(self) -> Vary:
        given = [name for name in ("factors", "values", "range") if getattr(self, name) is not None]
        if len(given) != 1:
            raise ValueError(
                f"{self.what}: give one of factors, values and range, found {' and '.join(given) or 'none'}"
            )
        if self.what in NO_FACTORS and self.factors is not None:
            raise ValueError(f"{self.what}: has no value to multiply; give values")
        if self.what == "covariance_range" and self.factors is None:
            raise ValueError("covariance_range: every coordinate has its own; give factors")
        if self.classes and self.what not in OF_CLASSES:
            raise ValueError(f"{self.what}: is not of classes; leave out `classes`")
        if self.layers and self.what != "thickness":
            raise ValueError(f"{self.what}: is not of layers; leave out `layers`")
        if self.range is not None and (self.what == "control" or not self.range[0] < self.range[1]):
            raise ValueError(f"{self.what}: range = {list(self.range)}, expected two numbers, the lower one first")
        self._values_are_sound()
        return self

    def _values_are_sound(self) -> None:
        for value in self.values or self.range or ():
            if self.what == "control":
                if value not in CONTROLS:
                    raise ValueError(f'control: "{value}"; {nearest_known(str(value), CONTROLS)}')
            elif isinstance(value, str):
                raise ValueError(f'{self.what}: "{value}", expected a number')
            elif self.what == "member" and (value != int(value) or value < 1):
                raise ValueError(f"member: {value:g}, expected whole numbers from 1")
            elif self.what not in MAPS and not value > 0:
                raise ValueError(f"{self.what}: {value:g}, expected numbers above 0")
            elif self.what == "porosity" and not value < 1:
                raise ValueError(f"porosity: {value:g}, expected shares below 1")


class Sensitivity(Settings):
    """A set of beds that differ in what a modeller is not sure of."""

    design: Literal["one_at_a_time", "all", "latin_hypercube", "sobol"] = Field(
        "one_at_a_time", description="the recipe's own bed and each change alone; all combinations; or `cases` samples"
    )
    cases: Annotated[int, Field(ge=1)] | None = Field(None, description="number of cases of a sampled design")
    at_most: Annotated[int, Field(ge=1)] = Field(
        500, description="more cases than this are refused; raise it to say yes"
    )
    files: Literal["each", "one"] = Field(
        "each", description='"each" a bed.nc in cases/NN, or "one" cases.nc along a realization dimension'
    )
    vary: tuple[Vary, ...] = Field(min_length=1, description="what differs")

    @model_validator(mode="after")
    def _fits_the_design(self) -> Sensitivity:
        labels = [v.label for v in self.vary]
        for label in labels:
            if labels.count(label) > 1:
                raise ValueError(f"vary: {label} is given twice")
        sampled = self.design in ("latin_hypercube", "sobol")
        if sampled and self.cases is None:
            raise ValueError(f'cases: design = "{self.design}" needs their number')
        if not sampled and self.cases is not None:
            raise ValueError(f'cases: is of sampled designs; design = "{self.design}" has as many as it needs')
        maps = [v.what for v in self.vary if v.what in MAPS]
        if self.design != "one_at_a_time" and len(maps) > 1:
            raise ValueError(
                f'{" and ".join(maps)} each choose the map; only one of them with design = "{self.design}"'
            )
        fitted = [v.what for v in self.vary if v.what in ("detection_limit", "covariance_range")]
        if self.design != "one_at_a_time" and fitted and "control" in maps:
            raise ValueError(f"{fitted[0]} does nothing to a control; vary one of them only")
        return self
