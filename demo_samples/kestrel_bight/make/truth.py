"""The true bed of Kestrel Bight, as functions of position.

These are what the samples were drawn from. Nothing that builds a bed may import them; tests and the
accuracy statement do.

>>> import numpy as np
>>> bool(np.allclose(true_fractions([-26.60], [44.30]).sum(axis=1), 1.0))
True
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import expit

from demo_samples.kestrel_bight.make import place
from demo_samples.kestrel_bight.make.fields import RandomField

Array = NDArray[np.float64]

__all__ = ["bare_rock", "depth_m", "is_land", "true_fractions"]

_MUD_WIDE = RandomField(seed=1, range_km=8.0)
_MUD_PATCHY = RandomField(seed=2, range_km=1.2)
_GRAVEL_WIDE = RandomField(seed=3, range_km=7.0)
_GRAVEL_PATCHY = RandomField(seed=4, range_km=1.2)
_MOST_MUD = 0.965  # even the softest mud holds some fine sand
_NO_GRAVEL_BELOW = 0.035  # gravel's share of the coarse part that the bed is too quiet, or too far from stone, to hold


def true_fractions(longitude: ArrayLike, latitude: ArrayLike) -> Array:
    """Give the true mud, sand and gravel fractions of the bed at points.

    Parameters
    ----------
    longitude, latitude : array-like of n numbers, degrees, WGS 84
        Longitude is negative (west).

    Returns
    -------
    float array, shape (n, 3)
        Fractions of 1 in the order mud, sand, gravel; rows sum to 1 within 1e-12. Gravel is exactly 0
        over large patches. A point on land gives a NaN row; on bare rock (see `bare_rock`) the
        fractions are those of the thin cover that lies in its hollows.
    """
    s, t = place.to_frame(np.ravel(longitude), np.ravel(latitude))
    fractions = _frame_fractions(s, t)
    fractions[place.on_land(s, t)] = np.nan
    return fractions


def depth_m(longitude: ArrayLike, latitude: ArrayLike) -> Array:
    """Give the true depth below mean sea level at points, m, positive down; NaN on land. Shape (n,)."""
    s, t = place.to_frame(np.ravel(longitude), np.ravel(latitude))
    return np.where(place.on_land(s, t), np.nan, place.frame_depth_m(s, t))


def bare_rock(longitude: ArrayLike, latitude: ArrayLike) -> NDArray[np.bool_]:
    """Tell whether the bed at points is bare rock; False on land. Shape (n,)."""
    s, t = place.to_frame(np.ravel(longitude), np.ravel(latitude))
    return place.frame_bare_rock(s, t) & ~place.on_land(s, t)


def is_land(longitude: ArrayLike, latitude: ArrayLike) -> NDArray[np.bool_]:
    """Tell whether points lie on the mainland or the island. Shape (n,)."""
    return place.on_land(*place.to_frame(np.ravel(longitude), np.ravel(latitude)))


def _frame_fractions(s: Array, t: Array) -> Array:
    depth = place.frame_depth_m(s, t)
    mud_field = 0.70 * _MUD_WIDE(s, t) + 0.35 * _MUD_PATCHY(s, t)
    gravel_field = 1.1 * _GRAVEL_WIDE(s, t) + 0.45 * _GRAVEL_PATCHY(s, t) - 0.3 * mud_field
    shoals, headland = place.shoals(s, t), place.headland(s, t)
    reef_halo = place.hump(s, t, (22.0, -3.5), (6.8, 3.6), -25.0)
    island_halo = place.hump(s, t, place.ISLAND_KM, (4.6, 3.2), 0.0)

    # The river's mud drifts west (to the right of the outflow) and settles in a belt of middle depths.
    along = s - place.RIVER_MOUTH_KM[0]
    reach = np.exp(-np.where(along < 0.0, -along / 30.0, along / 11.0))
    belt = np.exp(-((np.log(depth / 33.0) / 0.55) ** 2)) * reach
    mouth = place.hump(s, t, (place.RIVER_MOUTH_KM[0] - 1.0, place.RIVER_MOUTH_KM[1] - 3.5), (4.5, 3.0), 0.0)
    swash = np.exp(-depth / 7.0)
    mud_logit = (
        -1.9
        + 4.0 * np.maximum(belt, 0.9 * mouth)
        + 1.1 * expit((depth - 76.0) / 5.0)
        - 1.6 * swash * (1.0 - mouth)
        - 2.2 * shoals
        - 1.7 * headland
        - 0.9 * np.maximum(reef_halo, island_halo)
        + mud_field
    )
    mud = _MOST_MUD * expit(mud_logit)

    # Gravel's share of what is not mud; below the threshold there is none at all.
    gravel_logit = (
        -3.2
        + 4.6 * np.maximum(headland, reef_halo)
        + 2.6 * island_halo
        + 0.5 * expit((depth - 60.0) / 6.0)
        - 1.4 * shoals
        - 1.2 * np.maximum(belt, mouth)
        + gravel_field
    )
    share = np.maximum(expit(gravel_logit) - _NO_GRAVEL_BELOW, 0.0) / (1.0 - _NO_GRAVEL_BELOW)
    gravel = (1.0 - mud) * share
    return np.column_stack([mud, 1.0 - mud - gravel, gravel])
