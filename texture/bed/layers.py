"""From fractions of parts to fractions of classes, layer by layer."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from texture.bed.cells import Bools, Floats
from texture.bed.classes import ClassProperties
from texture.composition.closure import close
from texture.recipe import Layer

__all__ = [
    "close_classes",
    "composition_in_classes",
    "drop_small",
    "layer_fractions",
    "layer_stress",
    "layer_thickness",
    "to_classes",
]


def close_classes(fraction: Floats) -> Floats:
    """Close fractions along the first axis, so that every sum is 1 to rounding."""
    return np.ascontiguousarray(np.moveaxis(close(np.moveaxis(fraction, 0, -1)), -1, 0))


def to_classes(parts: Floats, classes: ClassProperties) -> Floats:
    """Split parts into classes by their shares.

    Parameters
    ----------
    parts : float array, shape (n, n_parts)
        Without NaN, summing to 1.
    classes : ClassProperties

    Returns
    -------
    float array, shape (k, n)
        Sums to 1 along the first axis within 1e-12.
    """
    return close_classes(parts[:, classes.part].T * classes.share[:, None])


def composition_in_classes(
    composition: Mapping[str, float], classes: ClassProperties, parts: Sequence[str] = ("mud", "sand", "gravel")
) -> Floats:
    """Fractions of the classes, shape (k,), for a composition given in parts, or in classes; what is not named is absent.

    >>> from texture.bed import Water
    >>> from texture.bed.classes import class_properties
    >>> from texture.recipe import Bed
    >>> composition_in_classes({"sand": 0.9, "gravel": 0.1}, class_properties(Bed().classes, Water()))
    array([0. , 0.9, 0.1])
    """
    if not set(composition) <= set(parts):
        return close_classes(np.array([composition.get(name, 0.0) for name in classes.names]))
    given = np.array([[composition.get(part, 0.0) for part in parts]])
    return to_classes(given, classes)[:, 0]


def layer_fractions(
    surface: Floats,
    layers: Sequence[Layer],
    classes: ClassProperties,
    parts: Sequence[str] = ("mud", "sand", "gravel"),
    from_cores: Mapping[int, Floats] | None = None,
) -> Floats:
    """Fractions of all layers, shape (k, layer, n): the map on top, below it what the recipe says.

    Parameters
    ----------
    surface : float array, shape (k, n)
        Class fractions of the map.
    layers : sequence of Layer
        `fill = "same"` repeats the map; a composition is the same in every cell.
    from_cores : mapping of layer from 0 to float array, shape (k, n)
        Class fractions of the layers that are filled from cores.
    """
    fraction = np.empty((surface.shape[0], len(layers), surface.shape[1]))
    for i, layer in enumerate(layers):
        if layer.fill == "same":
            fraction[:, i] = surface
        elif layer.fill == "cores":
            fraction[:, i] = (from_cores or {})[i]
        else:
            fraction[:, i] = composition_in_classes(layer.fill, classes, parts)[:, None]
    return fraction


def layer_thickness(
    layers: Sequence[Layer], active: Bools, land_thickness_m: float, minimum_thickness_m: float = 0.0
) -> Floats:
    """Erodible thickness, shape (layer, n): the recipe's in water, `land_thickness_m` on land, nowhere below the minimum."""
    wet = np.array([layer.thickness_m for layer in layers])
    return np.maximum(np.where(active[None, :], wet[:, None], land_thickness_m), minimum_thickness_m)


def layer_stress(layers: Sequence[Layer], classes: ClassProperties) -> Floats:
    """Critical stress of each class in each layer, shape (k, layer): the layer's own where it has one, else the class's.

    NaN where neither is known.
    """
    own = classes.critical_stress_pa[:, None].repeat(len(layers), axis=1)
    for i, layer in enumerate(layers):
        for name, value in layer.critical_stress_pa.items():
            own[classes.names.index(name), i] = value
    return own


def drop_small(fraction: Floats, least_fraction: float) -> tuple[Floats, Floats]:
    """Set smaller class fractions to zero and close each cell again.

    A cell in which every class is smaller keeps its largest.

    Parameters
    ----------
    fraction : float array, shape (k, …)
    least_fraction : float
        0 changes nothing.

    Returns
    -------
    kept, dropped : float arrays, shape (k, …)
        The new fractions, and what each class lost before closing.
    """
    small = (fraction < least_fraction) & (fraction > 0.0) & (fraction < fraction.max(axis=0))
    dropped = np.where(small, fraction, 0.0)
    return close_classes(fraction - dropped), dropped
