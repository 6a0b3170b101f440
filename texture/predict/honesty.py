"""How far a local neighbourhood's answer is from that of thousands of stations, on a seeded sample of places."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.predict.dense import Problem
from texture.predict.kriging import Kriging
from texture.structure.covariance import check_points

__all__ = ["Honesty", "neighbourhood_honesty"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Honesty:
    """Differences between local and wide answers in kriging standard deviations.

    Parameters
    ----------
    places, stations : int
        Places compared, and the stations each was solved with again.
    rms, largest : float
        Of the differences of means over the wide answer's standard deviation, over all columns.
    variance_ratio : float
        Mean of local over wide variance: above 1 where the neighbourhood misses information.
    """

    places: int
    stations: int
    rms: float
    largest: float
    variance_ratio: float

    def __str__(self) -> str:
        return (
            f"local answers against {self.stations} stations on {self.places} places: rms {self.rms:.3f}, largest "
            f"{self.largest:.2f} kriging standard deviations, variance {100.0 * (self.variance_ratio - 1.0):+.1f} %"
        )

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers for JSON."""
        return asdict(self)


def neighbourhood_honesty(
    kriging: Kriging,
    points: ArrayLike,
    seed: int,
    count: int = 100,
    stations: int = 2000,
    drift: ArrayLike | None = None,
) -> Honesty:
    """Compare local answers with those of the nearest `stations` on a seeded sample of places.

    Parameters
    ----------
    kriging : Kriging
        Fitted.
    points : float array, shape (m, d)
        Where the map is made; `count` of them are drawn.
    seed, count, stations : int
        Two columns, 100 places and 2,000 stations take about ten seconds on two cores.
    drift : float array, shape (m, p), optional

    Notes
    -----
    Places on top of a station without noise have variance 0 in both answers and are left out.
    """
    from scipy.spatial import cKDTree

    from texture.structure.fit import one_blas_thread

    places = check_points(points)
    picked = np.sort(np.random.default_rng(seed).choice(len(places), min(count, len(places)), replace=False))
    places = places[picked]
    columns = (
        None if drift is None else np.asarray(drift, dtype=np.float64).reshape(len(np.asarray(points)), -1)[picked]
    )
    mean, variance = kriging.predict(places, columns)
    off: list[float] = []
    ratio: list[float] = []
    used = 0
    for system in kriging.systems:
        local, wide = system.cell_columns(len(places), columns)
        metric = system.covariances[0].metric(places)
        used = max(used, min(stations, len(system.rows)))
        near = cKDTree(system.models.points).query(metric, k=np.arange(1, min(stations, len(system.rows)) + 1))[1]
        for k, column in enumerate(system.columns):
            base = system.centre[k, 0] + wide @ system.coefficients[k, 0]

            def again(
                i: int, k: int = k, system: Any = system, near: Any = near, metric: Any = metric
            ) -> tuple[float, float]:
                return Problem(system, k, near[i], metric[i], local[i], wide[i]).dense()  # noqa: B023

            with one_blas_thread(), ThreadPoolExecutor() as pool:
                answers = np.array(list(pool.map(again, range(len(places)))))
            told = answers[:, 1] > 1e-9 * system.covariances[k].sill
            spread = np.sqrt(answers[told, 1])
            off += ((mean[told, column] - base[told] - answers[told, 0]) / spread).tolist()
            ratio += (variance[told, column] / answers[told, 1]).tolist()
    if not off:
        return Honesty(0, used, 0.0, 0.0, 1.0)
    gaps = np.array(off)
    return Honesty(
        len(places), used, float(np.sqrt(np.mean(gaps**2))), float(np.abs(gaps).max()), float(np.mean(ratio))
    )
