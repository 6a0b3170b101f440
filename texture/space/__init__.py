"""Where distance is taken: in the plane, with covariates beside it, or along the shortest way through water."""

from texture.space.covariates import Covariates, Layer
from texture.space.fields import Field, Grid, Projected, Scatter
from texture.space.space import PLANE, Seen, Space
from texture.space.words import own_ranges, space_line, space_record

__all__ = [
    "PLANE",
    "Covariates",
    "Field",
    "Grid",
    "Layer",
    "Projected",
    "Scatter",
    "Seen",
    "Space",
    "own_ranges",
    "space_line",
    "space_record",
]
