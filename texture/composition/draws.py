"""Normal draws that are the same at every call, for what has no integral."""

from functools import cache

import numpy as np

from texture.composition.closure import Array

__all__ = ["normal_draws"]

DRAWS = 4096
_SOBOL_SEED = 20240229


@cache
def normal_draws(dimension: int, count: int = DRAWS) -> Array:
    """Scrambled Sobol points of fixed seed as standard normal draws, shape (count, dimension)."""
    # SciPy's statistics take half a second to import: only where draws are needed.
    from scipy.stats import norm, qmc

    points = qmc.Sobol(dimension, scramble=True, seed=_SOBOL_SEED).random(count)
    draws = np.asarray(norm.ppf(np.clip(points, 1e-12, 1 - 1e-12)), dtype=np.float64)
    draws.flags.writeable = False
    return draws
