"""`[[further_targets]]`: more grids that get a bed from the same fit."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from pydantic import Field, model_validator

from texture.recipe.rim import Rim
from texture.recipe.target import TargetSettings

__all__ = ["FurtherTarget"]

TAKEN = ("geotiff", "figures", "members", "cases")
"""Folders that a run may make beside those of its further targets."""


class FurtherTarget(TargetSettings):
    """A further grid, such as a nested one, that the same fit is mapped on: the settings of `[target]`, its name and its rim."""

    name: Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_-]*$")] = Field(
        description="folder of its files in the output folder"
    )
    rim: Rim | None = Field(None, description="coarse cells along its own open boundary; none if absent")
    names: Path | None = Field(
        None, description="names file of its own, where its dimensions differ; that of `outputs` if absent"
    )

    @model_validator(mode="after")
    def _name_is_free(self) -> FurtherTarget:
        if self.name.lower() in TAKEN:
            raise ValueError(f'the name "{self.name}" is a folder of the run itself; choose another')
        return self

    @property
    def target(self) -> TargetSettings:
        """Its settings as those of a `[target]`."""
        own = {name: getattr(self, name) for name in TargetSettings.model_fields}
        return TargetSettings.model_construct(_fields_set=self.model_fields_set - {"name", "rim", "names"}, **own)
