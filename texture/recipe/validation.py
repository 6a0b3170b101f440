"""`[validation]`: how the map's error is found out."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from texture.recipe.method import MethodName
from texture.recipe.settings import Settings

__all__ = ["Validation"]


class Validation(Settings):
    """How the map's error is found out."""

    folds: Literal["matched", "random", "blocks", "each"] = Field("matched", description="how stations are held out")
    count: Annotated[int, Field(ge=2, le=100)] = Field(10, description="number of folds")
    group_by: Literal["nothing", "survey"] = Field(
        "nothing", description="hold whole surveys out, to see what the map knows where no survey of its own has been"
    )
    compare: tuple[MethodName, ...] = Field(
        ("nearest", "inverse_distance", "kriging"), description="methods validated beside the chosen one"
    )
