"""`[rim]`: the padded coarse cells along the open boundary."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from texture.recipe.settings import Fraction, Positive, Settings

__all__ = ["SIDES", "Rim"]

SIDES = ("north", "east", "south", "west")


class Rim(Settings):
    """The padded coarse cells along the open boundary."""

    sides: Literal["open"] | tuple[Literal["north", "east", "south", "west"], ...] | Path = Field(
        "open",
        description='"open": found from the mask; compass sides such as ["south", "west"]; or a file of lines, whose cells '
        "are the edge, or of polygons, whose cells are all the rim's own",
    )
    leave_out: tuple[Annotated[int, Field(ge=1)], ...] = Field(
        (), description="numbers of openings, as the draft lists them, that are walls or river inlets and get no rim"
    )
    width_cells: Annotated[int, Field(ge=1)] | None = Field(None, description="width in cells")
    width_m: Positive | None = Field(None, description="width in metres, measured through water")
    profile: Literal["cosine", "linear", "step"] = Field("cosine", description="how the rim fades into the estimate")
    classes: dict[str, Fraction] | None = Field(None, description="rim bed in classes, summing to 1")
    composition: dict[str, Fraction] | None = Field(None, description="rim bed in parts, summing to 1")
    parent: Path | None = Field(
        None,
        description="bed file of the larger model that this one is nested in: the rim takes its bed, class by class",
    )
    parent_names: Path | None = Field(None, description="names file that the parent was written through")

    @field_validator("sides", mode="before")
    @classmethod
    def _word_or_file(cls, given: Any) -> Any:
        words = [given] if isinstance(given, str) and "." not in given and given != "open" else given
        for word in words if isinstance(words, (list, tuple)) else ():
            if word not in SIDES or isinstance(given, str):
                raise ValueError(
                    f'"{word}": expected "open", a list of compass sides such as ["south", "west"], or a file such as '
                    '"edge.geojson"'
                )
        return given

    @model_validator(mode="after")
    def _complete(self) -> Rim:
        if (self.width_cells is None) == (self.width_m is None):
            raise ValueError("give either width_cells or width_m")
        if sum(given is not None for given in (self.classes, self.composition, self.parent)) != 1:
            raise ValueError("give either classes or composition or parent")
        if self.leave_out and isinstance(self.sides, Path):
            raise ValueError("leave_out: strikes openings from those that are found; draw sides without them instead")
        if self.parent_names is not None and self.parent is None:
            raise ValueError("parent_names: is of the file in `parent`, which is missing")
        if self.parent is not None:
            return self
        total = sum((self.classes or self.composition or {}).values())
        if abs(total - 1.0) > 1e-9:  # typed decimals; anything further off is a mistake
            raise ValueError(f"the rim's fractions sum to {total:g}, expected 1")
        return self
