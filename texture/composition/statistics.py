"""Graphic and moment measures of a grain-size curve, and the words of their published scales.

References
----------
Folk, R.L. & Ward, W.C. (1957). Brazos River bar: a study in the significance of grain size parameters. Journal of
Sedimentary Petrology 27, 3-26. ("Moderately well sorted" was added by Folk 1966, Sedimentology 6, 73-93.)
"""

from bisect import bisect_right
from dataclasses import dataclass

import numpy as np

from texture.composition.closure import Array
from texture.errors import CompositionError

__all__ = ["FolkWard", "Moments", "kurtosis_words", "moments", "skewness_words", "sorting_words"]

_SORTING = (
    (0.35, 0.50, 0.71, 1.0, 2.0, 4.0),
    (
        "very well sorted",
        "well sorted",
        "moderately well sorted",
        "moderately sorted",
        "poorly sorted",
        "very poorly sorted",
        "extremely poorly sorted",
    ),
)
_SKEWNESS = (
    (-0.3, -0.1, 0.1, 0.3),
    ("strongly coarse skewed", "coarse skewed", "near symmetrical", "fine skewed", "strongly fine skewed"),
)
_KURTOSIS = (
    (0.67, 0.90, 1.11, 1.50, 3.0),
    (
        "very platykurtic",
        "platykurtic",
        "mesokurtic",
        "leptokurtic",
        "very leptokurtic",
        "extremely leptokurtic",
    ),
)


@dataclass(frozen=True)
class FolkWard:
    """Graphic measures of Folk & Ward (1957) in phi.

    Parameters
    ----------
    mean_phi : float
        (P16 + P50 + P84) / 3.
    sorting_phi : float
        (P84 - P16) / 4 + (P95 - P5) / 6.6; 0.9957 times the standard deviation of a normal curve.
    skewness : float
        Positive for a tail of fines.
    kurtosis : float
        (P95 - P5) / (2.44 (P75 - P25)); 0.9995 for a normal curve.
    median_phi : float
        P50.
    """

    mean_phi: float
    sorting_phi: float
    skewness: float
    kurtosis: float
    median_phi: float

    @classmethod
    def from_percentiles(cls, percentiles_phi: Array) -> "FolkWard":
        """From P5, P16, P25, P50, P75, P84, P95, cumulated from the coarse end.

        Raises
        ------
        CompositionError
            If all grains are of one size, which has no skewness.
        """
        p5, p16, p25, p50, p75, p84, p95 = (float(p) for p in percentiles_phi)
        if not (p84 > p16 and p95 > p5 and p75 > p25):
            raise CompositionError(
                "size curve has no spread between its percentiles, expected more than one grain size"
            )
        return cls(
            mean_phi=(p16 + p50 + p84) / 3.0,
            sorting_phi=(p84 - p16) / 4.0 + (p95 - p5) / 6.6,
            skewness=(p16 + p84 - 2 * p50) / (2 * (p84 - p16)) + (p5 + p95 - 2 * p50) / (2 * (p95 - p5)),
            kurtosis=(p95 - p5) / (2.44 * (p75 - p25)),
            median_phi=p50,
        )

    @property
    def mean_m(self) -> float:
        """The graphic mean as a diameter in metres."""
        return float(1e-3 * 2.0**-self.mean_phi)

    @property
    def words(self) -> tuple[str, str, str]:
        """Sorting, skewness and kurtosis in the words of the published scale; a limit belongs to the larger value."""
        return sorting_words(self.sorting_phi), skewness_words(self.skewness), kurtosis_words(self.kurtosis)

    def rows(self) -> list[tuple[str, str, float]]:
        """Statistic, unit, value; in phi and, where it has a meaning, as geometric measures in mm."""
        return [
            ("mean", "phi", self.mean_phi),
            ("mean", "mm", 1e3 * self.mean_m),
            ("median", "phi", self.median_phi),
            ("sorting", "phi", self.sorting_phi),
            ("sorting", "factor", float(2.0**self.sorting_phi)),
            ("skewness", "1", self.skewness),
            ("kurtosis", "1", self.kurtosis),
        ]


@dataclass(frozen=True)
class Moments:
    """Moment measures about class midpoints; `unit` is phi or mm. Kurtosis is 3 for a normal curve."""

    mean: float
    standard_deviation: float
    skewness: float
    kurtosis: float
    unit: str

    def rows(self) -> list[tuple[str, str, float]]:
        """Statistic, unit, value."""
        return [
            ("mean", self.unit, self.mean),
            ("standard deviation", self.unit, self.standard_deviation),
            ("skewness", "1", self.skewness),
            ("kurtosis", "1", self.kurtosis),
        ]


def moments(midpoints: Array, weights: Array, unit: str) -> Moments:
    """Mean, standard deviation, skewness and kurtosis of weights that sum to 1."""
    mean = float(weights @ midpoints)
    away = midpoints - mean
    variance = float(weights @ away**2)
    if variance <= 0:
        raise CompositionError("all of the sample lies in one size class, expected more for moments")
    sd = float(np.sqrt(variance))
    return Moments(mean, sd, float(weights @ away**3) / sd**3, float(weights @ away**4) / sd**4, unit)


def sorting_words(sorting_phi: float) -> str:
    """Sorting in words (Folk & Ward 1957, Folk 1966)."""
    return _SORTING[1][bisect_right(_SORTING[0], sorting_phi)]


def skewness_words(skewness: float) -> str:
    """Graphic skewness in words (Folk & Ward 1957)."""
    return _SKEWNESS[1][bisect_right(_SKEWNESS[0], skewness)]


def kurtosis_words(kurtosis: float) -> str:
    """Graphic kurtosis in words (Folk & Ward 1957)."""
    return _KURTOSIS[1][bisect_right(_KURTOSIS[0], kurtosis)]
