"""Fractions and log-ratio coordinates, size curves, texture classes and words for them."""

from texture.composition.closure import (
    centre,
    close,
    clr,
    distance,
    perturb,
    power,
    total_variance,
    variation_matrix,
)
from texture.composition.logratio import LogRatio
from texture.composition.partition import Partition, default_tree
from texture.composition.zeros import replace

__all__ = [
    "LogRatio",
    "Partition",
    "centre",
    "close",
    "clr",
    "default_tree",
    "distance",
    "perturb",
    "power",
    "replace",
    "total_variance",
    "variation_matrix",
]
