"""`[composition]`: the parts of the bed, and the coordinates they are mapped in."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from texture.recipe.settings import Settings

__all__ = ["Composition"]


class Composition(Settings):
    """The parts of the bed and the coordinates they are mapped in."""

    parts: tuple[str, ...] = Field(("mud", "sand", "gravel"), description="parts, finest first")
    logratio: Literal["tree", "ilr", "alr", "shares"] = Field("tree", description="kind of coordinates")
    tree: Any = Field(None, description='nested pairs, who is split from whom, e.g. ["mud", ["gravel", "sand"]]')
    zeros: Literal["auto", "replace", "censor", "presence"] = Field(
        "auto", description="treatment of parts below the detection limit; held-out error picks if `auto`"
    )
    detection_limit: Annotated[float, Field(gt=0.0, lt=1.0 / 3.0)] = Field(
        0.005, description="fractions below this are taken as below detection; replacement may take a higher limit"
    )

    @model_validator(mode="after")
    def _parts_we_can_read(self) -> Composition:
        if self.parts != ("mud", "sand", "gravel"):
            raise ValueError('parts: only ["mud", "sand", "gravel"] can be read from sample tables')
        return self

    @model_validator(mode="after")
    def _zeros_fit_the_coordinates(self) -> Composition:
        kinds = {"auto": None, "replace": ("tree", "ilr", "alr"), "censor": ("tree", "alr"), "presence": ("tree",)}
        allowed = kinds[self.zeros]
        if allowed is not None and self.logratio not in allowed:
            raise ValueError(
                f'zeros: "{self.zeros}" works with logratio = {" or ".join(allowed)}, found "{self.logratio}"'
            )
        return self
