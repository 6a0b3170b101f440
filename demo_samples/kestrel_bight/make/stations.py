"""Where the four surveys took their samples, and what a laboratory makes of them."""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import expit, logit

from demo_samples.kestrel_bight.make import place, truth
from demo_samples.kestrel_bight.make.grid import BEND_KM, HALF_FAN, HALF_REACH_KM

Array = NDArray[np.float64]

NEAREST_SHORE_KM: Final = 0.4  # a survey ship comes no closer


@dataclass(frozen=True)
class Samples:
    """Samples of one survey, in the order they were taken.

    Attributes
    ----------
    s_km, t_km : float array, shape (n,)
        Where they were taken, in the local frame.
    depth_m : float array, shape (n,)
        Sounding: the true depth with half a metre of tide and swell in it.
    true : float array, shape (n, 3)
        True mud, sand and gravel.
    measured : float array, shape (n, 3)
        What the laboratory found; rows sum to 1.
    rock : bool array, shape (n,)
        Bare rock: nothing came up.
    """

    s_km: Array
    t_km: Array
    depth_m: Array
    true: Array
    measured: Array
    rock: NDArray[np.bool_]


def sample(s_km: Array, t_km: Array, rng: np.random.Generator, mud_offset: float = 0.0) -> Samples:
    """Take samples at places and measure them.

    Parameters
    ----------
    mud_offset : float
        Added to ln(mud / (sand + gravel)): a laboratory's habit, the same for a whole survey.
    """
    true = truth.true_fractions(*place.to_degrees(s_km, t_km))
    mud = expit(logit(true[:, 0]) + mud_offset + rng.normal(0.0, 0.10, s_km.size))
    share = true[:, 2] / (true[:, 1] + true[:, 2])
    noise = rng.normal(0.0, 0.15, s_km.size)
    with np.errstate(divide="ignore"):
        share = expit(logit(share) + noise)  # none stays none
    gravel = (1.0 - mud) * share
    depth = place.frame_depth_m(s_km, t_km) + rng.normal(0.0, 0.5, s_km.size)
    return Samples(
        s_km,
        t_km,
        np.maximum(depth, 0.5),
        true,
        np.column_stack([mud, 1.0 - mud - gravel, gravel]),
        place.frame_bare_rock(s_km, t_km),
    )


def in_reach(s_km: Array, t_km: Array, margin: float = 0.0) -> NDArray[np.bool_]:
    """Whether a ship would sample there: off the shore, and on the grid or `margin` of its half width beyond."""
    radius, angle = np.hypot(s_km, t_km + BEND_KM) - BEND_KM, np.arctan2(s_km, t_km + BEND_KM)
    on_grid = (np.abs(radius) < HALF_REACH_KM * (1.0 + margin)) & (np.abs(angle) < HALF_FAN * (1.0 + margin))
    off_shore = place.shore_distance_km(s_km, t_km) > NEAREST_SHORE_KM
    return on_grid & off_shore & ~place.on_land(s_km, t_km) & (t_km < 19.0)


def transects(rng: np.random.Generator) -> tuple[Array, Array]:
    """Lines from the shore seaward, as a ship steams them; the ends lie a little outside the grid."""
    s, t = np.meshgrid(np.arange(-30.0, 31.1, 4.35), np.arange(17.0, -26.0, -3.6), indexing="ij")
    s, t = s.ravel() + rng.normal(0.0, 0.25, s.size), t.ravel() + rng.normal(0.0, 0.35, t.size)
    keep = in_reach(s, t, margin=0.05)
    return s[keep], t[keep]


def scattered(rng: np.random.Generator, count: int, apart_km: float, window: tuple[float, ...]) -> tuple[Array, Array]:
    """Random places at least `apart_km` from each other inside `window` (west, south, east, north), km."""
    chosen = np.empty((0, 2))
    while len(chosen) < count:
        point = rng.uniform(window[:2], window[2:])
        far = np.all(np.hypot(*(chosen - point).T) > apart_km)
        if far and in_reach(*point[:, None])[0]:
            chosen = np.vstack([chosen, point])
    return chosen[:, 0], chosen[:, 1]


def near(rng: np.random.Generator, s: Array, t: Array, least_km: float, most_km: float) -> tuple[Array, Array]:
    """One further place near each given one."""
    angle, away = rng.uniform(0.0, 2.0 * np.pi, s.size), rng.uniform(least_km, most_km, s.size)
    return s + away * np.cos(angle), t + away * np.sin(angle)
