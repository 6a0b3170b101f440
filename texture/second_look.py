"""Doubt the map before it is written: a second opinion on a handful of cells, and wider neighbourhoods on a hundred."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import StructureError

if TYPE_CHECKING:
    from texture.mapping import Mapper
    from texture.predict.honesty import Honesty
    from texture.predict.second_opinion import SecondOpinion

__all__ = ["SecondLook", "second_look"]


@dataclass(frozen=True)
class SecondLook:
    """What came of solving some cells again.

    Attributes
    ----------
    opinion : SecondOpinion
        The same stations, another solver.
    honesty : Honesty
        Thousands of stations instead of a neighbourhood.
    """

    opinion: SecondOpinion
    honesty: Honesty

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers and strings for JSON."""
        return {"second_opinion": self.opinion.to_dict(), "neighbourhood": self.honesty.to_dict()}


def second_look(mapper: Mapper, places: NDArray[np.float64], seed: int) -> SecondLook | None:
    """Solve a seeded choice of cells again; None for methods that solve nothing.

    Raises
    ------
    StructureError
        If another solver gets another answer from the same stations and a dense solve sides with it.
    """
    if not mapper.solves:
        return None
    from texture.predict.honesty import neighbourhood_honesty
    from texture.predict.second_opinion import second_opinion

    seen = mapper.space.at(places)
    opinion = second_opinion(mapper.predictor, seen.points, seed=seed, drift=seen.drift)
    if not opinion.agrees:
        raise StructureError(f"{opinion}; the map was not written, please report this")
    return SecondLook(opinion, neighbourhood_honesty(mapper.predictor, seen.points, seed=seed, drift=seen.drift))
