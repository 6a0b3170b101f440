"""Figures of how wrong the map is: all that cross-validation alone can draw."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.report.charts import draw_calibration, draw_pit, draw_scatter, draw_variograms
from texture.report.maps import draw_residuals

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from texture.result import Validated

__all__ = ["calibration", "error_figures", "pit", "residuals", "scatter", "station_places", "variograms"]

Floats = NDArray[np.float64]


def error_figures(found: Validated) -> Iterator[tuple[str, Figure]]:
    """Names and figures; no residuals where positions are hidden, no calibration without a variance."""
    yield "held_out", scatter(found)
    yield "variograms", variograms(found)
    if found.validation.judged.factors is not None:
        yield "calibration", calibration(found)
    yield "pit", pit(found)
    if station_places(found) is not None:
        yield "residuals", residuals(found)


def station_places(found: Validated) -> tuple[Floats, Floats] | None:
    """Longitude and latitude of the stations, None where the recipe hides them."""
    if found.recipe.report.stations == "hidden":
        return None
    table = found.stations.samples
    return table["longitude"].to_numpy(), table["latitude"].to_numpy()


def scatter(found: Validated) -> Figure:
    """Measured against held-out fractions."""
    return draw_scatter(found.recipe.composition.parts, found.observations.fractions, found.validation.chosen)


def calibration(found: Validated) -> Figure:
    """Shares below predicted quantiles before and after calibration."""
    validation = found.validation
    return draw_calibration(found.recipe.composition.parts, validation.judged.before, validation.chosen.draws)


def pit(found: Validated) -> Figure:
    """Histogram of the probability integral transform, after calibration."""
    return draw_pit(found.recipe.composition.parts, found.validation.chosen.draws)


def variograms(found: Validated) -> Figure:
    """Empirical and fitted variograms."""
    return draw_variograms(found.mapper.structure, found.mapper.column_names)


def residuals(found: Validated) -> Figure:
    """Held-out error where it lies."""
    table = found.stations.table.iloc[found.observations.rows]
    place = table["longitude"].to_numpy(), table["latitude"].to_numpy()
    measured = np.where(found.observations.measured[:, None], found.observations.fractions, np.nan)
    return draw_residuals(
        found.target, place, found.validation.chosen.predicted - measured, found.recipe.composition.parts
    )
