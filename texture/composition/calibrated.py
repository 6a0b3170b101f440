"""Class words calibrated on measured samples beside them: what a describer here calls sandy mud."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["FEWEST", "Calibrated", "calibrate_words", "usual_spacing_m"]

Array = npt.NDArray[np.float64]
FEWEST = 8
"""Measured samples beside the stations of one class; fewer tell patchiness rather than what a word means."""
PRIOR = 8.0
"""Samples that the table of classes counts for beside them (our choice: it and the fewest pairs weigh the same)."""


@dataclass(frozen=True)
class Calibrated:
    """What was learned of one class in one coordinate: mean and variance, from how many samples, and the table's own."""

    code: str
    coordinate: int
    pairs: int
    mean: float
    variance: float
    table_mean: float
    table_variance: float


def usual_spacing_m(points: Array) -> float:
    """Median distance from a sample to its nearest neighbour elsewhere; 0 for fewer than two places.

    >>> usual_spacing_m(np.array([[0.0, 0.0], [3.0, 4.0], [3.0, 4.0]]))
    5.0
    """
    from scipy.spatial import KDTree

    places = np.unique(points, axis=0)
    return float(np.median(KDTree(places).query(places, k=2)[0][:, 1])) if len(places) > 1 else 0.0


def calibrate_words(
    codes: npt.NDArray[np.str_],
    points: Array,
    mean: Array,
    variance: Array,
    measured_points: Array,
    measured: Array,
) -> tuple[Array, Array, list[Calibrated]]:
    """Move each class towards what was measured beside the stations that were described so.

    A measured sample counts for a class if the described station nearest to it, no further than samples usually stand apart, has
    that class. With at least eight of them their mean and variance are put together with the table's, which counts for eight
    more: the moments of the mixture. The variance of the pairs holds the bed's change between the two places too, so that a word
    is never taken for more than it is worth.

    Parameters
    ----------
    codes : str array, shape (n,)
        Class of each described station.
    points : float array, shape (n, 2), metres
    mean, variance : float arrays, shape (n, d)
        Of the class in each coordinate, from the table.
    measured_points, measured : float arrays, shapes (m, 2) and (m, d)
        Measured samples and their coordinates, NaN where unknown.

    Returns
    -------
    mean, variance : float arrays, shape (n, d)
    calibrated : list of Calibrated
        Every class and coordinate that was moved.
    """
    from scipy.spatial import KDTree

    mean, variance, told = mean.copy(), variance.copy(), []
    within = usual_spacing_m(measured_points) if len(measured_points) else 0.0
    if within == 0.0 or not len(points):
        return mean, variance, []
    distance, nearest = KDTree(points).query(measured_points)
    beside = distance <= within
    for code in np.unique(codes).tolist():
        of_class = np.flatnonzero(codes == code)
        pairs = beside & (codes[nearest] == code)
        for k in range(mean.shape[1]):
            values = measured[pairs, k]
            values = values[np.isfinite(values)]
            if len(values) < FEWEST or np.isnan(mean[of_class[0], k]):
                continue
            table_mean, table_variance = float(mean[of_class[0], k]), float(variance[of_class[0], k])
            share = len(values) / (len(values) + PRIOR)
            centre = share * float(values.mean()) + (1.0 - share) * table_mean
            spread = share * float(((values - centre) ** 2).mean()) + (1.0 - share) * (
                table_variance + (table_mean - centre) ** 2
            )
            mean[of_class, k], variance[of_class, k] = centre, spread
            told.append(Calibrated(code, k, len(values), centre, spread, table_mean, table_variance))
    return mean, variance, told
