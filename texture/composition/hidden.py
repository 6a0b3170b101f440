"""Compiled steps with the hidden normal of `texture.composition.presence_draws`, one place at a time."""

import math

from texture.compiling import compiled
from texture.composition.closure import Array, Ints
from texture.composition.logistic_normal import normal_pdf, normal_quantile

__all__ = ["along", "loadings", "take_away"]

_MOST_TOLD = 0.9  # share of the hidden normal's variance that the coordinates may tell


@compiled
def loadings(
    probability: float, correlation: Array, covariance: Array, factor: Array, load: Array
) -> tuple[float, float]:
    """Threshold of the hidden normal; its loadings on the coordinates' draws into `load`, and on its own draw."""
    threshold = normal_quantile(probability)
    larger = math.sqrt(probability * (1.0 - probability)) / max(normal_pdf(threshold), 1e-12)
    told = 0.0
    for i in range(load.size):
        left = correlation[i] * larger * math.sqrt(covariance[i, i])
        for j in range(i):
            left -= factor[i, j] * load[j]
        load[i] = left / factor[i, i] if factor[i, i] > 0.0 else 0.0
        told += load[i] ** 2
    if told > _MOST_TOLD:
        for i in range(load.size):
            load[i] *= math.sqrt(_MOST_TOLD / told)
        told = _MOST_TOLD
    return threshold, math.sqrt(1.0 - told)


@compiled
def along(start: float, load: Array, normals: Array) -> float:
    """The hidden normal: `start` and what the first draws, those of the coordinates, add to it."""
    for i in range(load.size):
        start += load[i] * normals[i]
    return start


@compiled
def take_away(x: Array, column: int, sibling: Ints, there: float) -> None:
    """Leave only the share `there` of a part, the rest to its sibling in proportion."""
    freed = x[column] * (1.0 - there)
    x[column] -= freed
    whole = 0.0
    for j in sibling:
        whole += x[j]
    for j in sibling:
        x[j] += freed * (x[j] / whole if whole > 0.0 else 1.0 / sibling.size)
