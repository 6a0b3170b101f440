"""Covariates at places: sampled, transformed, and standardised by figures that are frozen before any fold."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from texture.errors import StructureError
from texture.space.fields import MISSING, Field

__all__ = ["Covariates", "Layer"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]

TRANSFORMS: dict[str, Callable[[Floats], Floats]] = {
    "none": lambda values: values,
    "log": lambda values: np.log1p(np.maximum(values, 0.0)),
    "sqrt": lambda values: np.sqrt(np.maximum(values, 0.0)),
}


@dataclass(frozen=True, eq=False)
class Layer:
    """One covariate.

    Parameters
    ----------
    name : str
    field : Field
        Values at points of the working plane.
    transform : {"none", "log", "sqrt"}
        ln(1 + value) or the square root, values below 0 taken as 0.
    centre, scale : float
        What is taken away and divided by; see `Covariates.frozen_at`.
    """

    name: str
    field: Field
    transform: str = "none"
    centre: float = 0.0
    scale: float = 1.0

    def at(self, points: Floats) -> tuple[Floats, Bools]:
        """Standardised values at points (m, 2), and where they are guesses; shapes (m,)."""
        values, state = self.field.at(points)
        return (TRANSFORMS[self.transform](values) - self.centre) / self.scale, state == MISSING


@dataclass(frozen=True, eq=False)
class Covariates:
    """Several covariates, in order.

    Examples
    --------
    >>> from texture.space.fields import Grid
    >>> axis = np.array([0.0, 1000.0])
    >>> depth = Layer("depth", Grid(axis, axis, np.array([[10.0, 20.0], [10.0, 20.0]])))
    >>> covariates = Covariates([depth]).frozen_at(np.array([[0.0, 0.0], [1000.0, 0.0]]))
    >>> covariates.at(np.array([[0.0, 0.0], [500.0, 500.0], [9000.0, 0.0]]))[0].tolist()
    [[-1.0], [0.0], [1.0]]
    """

    layers: tuple[Layer, ...]

    def __init__(self, layers: Sequence[Layer]) -> None:
        object.__setattr__(self, "layers", tuple(layers))

    @property
    def names(self) -> tuple[str, ...]:
        """Their names."""
        return tuple(layer.name for layer in self.layers)

    def frozen_at(self, points: Floats) -> Covariates:
        """The same covariates, standardised to mean 0 and standard deviation 1 over points (n, 2) that have a value.

        Raises
        ------
        StructureError
            If a covariate has fewer than three values there, or one and the same everywhere.
        """
        frozen = []
        for layer in self.layers:
            values, missing = replace(layer, centre=0.0, scale=1.0).at(points)
            known = values[~missing]
            if known.size < min(3, len(points)):
                raise StructureError(
                    f'covariate "{layer.name}": {known.size} of {len(points)} stations have a value, expected at least 3; '
                    "does it cover the stations, and is its CRS right?"
                )
            centre, scale = float(known.mean()), float(known.std())
            if scale <= 1e-9 * max(abs(centre), 1e-300):
                raise StructureError(
                    f'covariate "{layer.name}": it is {centre:g} at all stations and tells nothing; leave it out'
                )
            frozen.append(replace(layer, centre=centre, scale=scale))
        return Covariates(frozen)

    def take(self, names: Sequence[str]) -> Covariates:
        """Some of them, in the order of `names`."""
        by_name = {layer.name: layer for layer in self.layers}
        return Covariates([by_name[name] for name in names])

    def at(self, points: Floats) -> tuple[Floats, Bools]:
        """Standardised values at points, shape (m, c), and where any of them is a guess, shape (m,)."""
        values, missing = np.empty((len(points), len(self.layers))), np.zeros(len(points), dtype=bool)
        for k, layer in enumerate(self.layers):
            values[:, k], guessed = layer.at(points)
            missing |= guessed
        return values, missing
