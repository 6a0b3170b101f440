"""A seeded handful of places solved again by a library that shares no code with the kernel."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.predict.dense import ORDINARY, Problem
from texture.predict.kriging import Kriging
from texture.structure.compiled import COINCIDENT_M
from texture.structure.covariance import check_points

__all__ = ["SecondOpinion", "second_opinion"]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class SecondOpinion:
    """What came out.

    Parameters
    ----------
    places : int
        Places that were solved again, each in every column.
    solver : str
        "PyKrige", "dense solve (why)", or both.
    mean_difference : float
        Largest difference of means over the root of the sill.
    variance_difference : float
        Largest difference of variances over the sill.
    tolerance : float
        1e-6, or more where the condition number of a neighbourhood costs more digits than that.
    agrees : bool
        Whether the kernel stands: within tolerance, or a dense solve sides with it.
    """

    places: int
    solver: str
    mean_difference: float
    variance_difference: float
    tolerance: float
    agrees: bool

    def __str__(self) -> str:
        verdict = "agrees" if self.agrees else "DISAGREES"
        return (
            f"second opinion by {self.solver} on {self.places} places {verdict}: largest difference "
            f"{self.mean_difference:.1e} of the standard deviation, {self.variance_difference:.1e} of the sill"
        )

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers and strings for JSON."""
        return asdict(self)


def second_opinion(
    kriging: Kriging, points: ArrayLike, seed: int, count: int = 8, drift: ArrayLike | None = None
) -> SecondOpinion:
    """Solve a seeded handful of points again on exactly the stations that served them.

    Parameters
    ----------
    kriging : Kriging
        Fitted.
    points : float array, shape (m, d)
        Where the map was made; `count` of them are drawn.
    seed : int
    count : int
    drift : float array, shape (m, p), optional
        Drift columns at the points, where the stations had them.

    Returns
    -------
    SecondOpinion
        PyKrige (ordinary kriging and specified drift, two and three dimensions) does it where it can express the
        case; a dense scipy solve does it for known means, noise that differs between stations, survey offsets,
        global drift, places on top of noisy stations and more than three dimensions.
    """
    places = check_points(points)
    rng = np.random.default_rng(seed)
    picked = np.sort(rng.choice(len(places), min(count, len(places)), replace=False))
    places = places[picked]
    columns = (
        None if drift is None else np.asarray(drift, dtype=np.float64).reshape(len(np.asarray(points)), -1)[picked]
    )
    mean, variance = kriging.predict(places, columns)
    solvers: set[str] = set()
    worst_mean = worst_variance = 0.0
    tolerance, agrees = ORDINARY, True
    for system in kriging.systems:
        local, wide = system.cell_columns(len(places), columns)
        for i, place in enumerate(places):
            sets = kriging.neighbourhoods_of(place, system.columns[0])
            metric = system.covariances[0].metric(place[None])[0]
            for k, column in enumerate(system.columns):
                base = system.centre[k, 0] + wide[i] @ system.coefficients[k, 0]
                ours = (mean[i, column] - base, variance[i, column])
                problems = [
                    (Problem(system, k, np.searchsorted(system.rows, rows), metric, local[i], wide[i]), weight)
                    for rows, weight in sets
                ]
                why = next((reason for reason in (_beyond_pykrige(p) for p, _ in problems) if reason), "")
                solvers.add(f"dense solve ({why})" if why else "PyKrige")
                allowed = max(p.tolerance() for p, _ in problems)
                gap = _gap(ours, problems, Problem.dense if why else _by_pykrige)
                if max(gap) > allowed:
                    agrees = agrees and not why and max(_gap(ours, problems, Problem.dense)) <= allowed
                worst_mean, worst_variance = max(worst_mean, gap[0]), max(worst_variance, gap[1])
                tolerance = max(tolerance, allowed)
    return SecondOpinion(
        len(places), " and ".join(sorted(solvers)), worst_mean, worst_variance, tolerance, bool(agrees)
    )


def _gap(
    ours: tuple[float, float], problems: list[tuple[Problem, float]], solve: Callable[[Problem], tuple[float, float]]
) -> tuple[float, float]:
    """How far our answer is from the weighted average over the neighbourhoods that served the place."""
    solved = [(*solve(p), weight) for p, weight in problems]
    theirs = (sum(weight * mean for mean, _, weight in solved), sum(weight * spread for _, spread, weight in solved))
    return problems[0][0].gap(ours, theirs)


def _beyond_pykrige(problem: Problem) -> str:
    """Why PyKrige cannot express the case; empty when it can."""
    if problem.drift.shape[1] == 0:
        return "known mean"
    if len(problem.points) < 3:
        return "fewer than three stations"
    if problem.points.shape[1] > 3:
        return f"{problem.points.shape[1]} dimensions"
    if np.ptp(problem.noise) > 0.0:
        return "noise differs between stations"
    if problem.covariance.survey > 0.0:
        return "survey offsets"
    if problem.wide.size:
        return "global drift"
    nearest = np.sqrt(((problem.points - problem.place) ** 2).sum(axis=1)).min()
    if nearest <= 1e-3 and problem.noise[0] > 0.0:
        return "place on a noisy station"
    return ""


def _by_pykrige(problem: Problem) -> tuple[float, float]:
    """PyKrige on the same stations, in the covariance's own metric, with the covariance as a custom variogram."""
    from pykrige.ok import OrdinaryKriging
    from pykrige.ok3d import OrdinaryKriging3D
    from pykrige.uk import UniversalKriging
    from pykrige.uk3d import UniversalKriging3D

    noise = float(problem.noise[0])
    total = problem.covariance.sill + noise
    plain = problem.covariance.packed
    d = problem.points.shape[1]

    def gamma(_: Any, h: Any) -> Any:
        from texture.structure.compiled import covariance_matrix

        flat = np.ascontiguousarray(np.atleast_1d(h).reshape(1, -1))
        return (total - covariance_matrix(plain, 0.0, flat)).reshape(np.shape(h))

    # PyKrige has no one-dimensional class; a constant second coordinate changes no distance.
    points = problem.points if d > 1 else np.column_stack([problem.points, np.zeros(len(problem.points))])
    place = problem.place if d > 1 else np.array([problem.place[0], 0.0])
    settings = {
        "variogram_model": "custom",
        "variogram_parameters": [],
        "variogram_function": gamma,
        "exact_values": True,
    }
    extra, at = {}, {}
    if problem.drift.shape[1] > 1:
        settings["drift_terms"] = ["specified"]
        extra["specified_drift"] = list(problem.drift[:, 1:].T)
        at["specified_drift_arrays"] = [np.array([x]) for x in problem.local[1:]]
    coordinates = [np.ascontiguousarray(column) for column in points.T]
    three = points.shape[1] == 3
    if problem.drift.shape[1] > 1:
        solver = UniversalKriging3D if three else UniversalKriging
    else:
        solver = OrdinaryKriging3D if three else OrdinaryKriging
    fitted = solver(*coordinates, problem.values, **settings, **extra)
    mean, variance = fitted.execute("points", *[np.array([x]) for x in place], **at)
    at_station = bool(np.sqrt(((problem.points - problem.place) ** 2).sum(axis=1)).min() <= COINCIDENT_M)
    # PyKrige's nugget is part of what it predicts away from stations; our noise is not.
    return float(mean[0]), float(variance[0]) - (0.0 if at_station else noise)
