"""Random fields that are plain functions of position."""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# A Matérn 3/2 correlation (1 + x) exp(-x), x = sqrt(3) distance / length, has fallen to 0.05 at x = 4.7439.
_LENGTHS_PER_RANGE = 4.7439 / np.sqrt(3.0)


class RandomField:
    """A stationary Gaussian field of mean 0 and standard deviation 1, frozen by its seed.

    A sum of cosines whose wave numbers are drawn from the spectrum of a Matérn 3/2 covariance, so
    that it can be evaluated anywhere, in any order, and is always the same field.

    Parameters
    ----------
    seed : int
    range_km : float
        Distance at which the correlation has fallen to 0.05.
    waves : int
        Number of cosines.
    """

    def __init__(self, seed: int, range_km: float, waves: int = 256) -> None:
        rng = np.random.default_rng(seed)
        length_km = range_km / _LENGTHS_PER_RANGE
        # The spectrum of a Matérn of smoothness v is a Student t with 2 v degrees of freedom.
        stretch = np.sqrt(3.0 / rng.chisquare(3.0, waves))
        self._wave_numbers = rng.standard_normal((2, waves)) * stretch / length_km
        self._phases = rng.uniform(0.0, 2.0 * np.pi, waves)

    def __call__(self, s_km: Array, t_km: Array) -> Array:
        """Value at each point; arrays of one shape in, the same shape out."""
        s, t = np.ravel(s_km), np.ravel(t_km)
        value = np.empty(s.size)
        kx, ky = self._wave_numbers
        for start in range(0, s.size, 4096):  # bounds memory
            part = slice(start, start + 4096)
            phase = s[part, None] * kx + t[part, None] * ky + self._phases
            value[part] = np.cos(phase).sum(axis=1)
        return value.reshape(np.shape(s_km)) * np.sqrt(2.0 / kx.size)
