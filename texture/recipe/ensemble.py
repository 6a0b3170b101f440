"""`[ensemble]`: members, beds that are all as likely as one another."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from texture.recipe.settings import Fraction, Settings, check_names

__all__ = ["Ensemble"]

MOST_MEMBERS = 1000
"""A tail of one in a hundred is known to a tenth of itself from so many; more is a slip of the finger."""


class Ensemble(Settings):
    """Members, beds that are all as likely as one another, and what they say together."""

    members: Annotated[int, Field(ge=0, le=MOST_MEMBERS)] = Field(0, description="number of members")
    files: Literal["one", "each"] = Field(
        "one", description='"one" members.nc along a realization dimension, or "each" a bed.nc of its own in members/NN'
    )
    quantiles: tuple[Annotated[float, Field(gt=0.0, lt=1.0)], ...] = Field(
        (0.05, 0.5, 0.95), min_length=1, description="quantiles of each part over the members"
    )
    above: dict[str, tuple[Fraction, ...]] = Field(
        {"mud": (0.5,)}, description="fractions of parts whose probability to be exceeded is mapped"
    )

    @field_validator("quantiles")
    @classmethod
    def _ascending(cls, given: tuple[float, ...]) -> tuple[float, ...]:
        if list(given) != sorted(set(given)):
            raise ValueError(f"expected ascending numbers between 0 and 1, found {list(given)}")
        return given

    @model_validator(mode="after")
    def _parts_we_know(self) -> Ensemble:
        check_names("above", dict.fromkeys(self.above, 0.0), ("mud", "sand", "gravel"))
        return self
