"""Seconds of a cross-validation: 10,000 stations, ten matched folds, five methods; and of leaving each station out in turn.

The bed is simulated: two log-ratio coordinates of waves and noise, everything measured. Each method is fitted anew in every fold, scored with
intervals by resampled blocks, and compared. Leave-one-out is that of kriging with its covariance fixed.

    python -m benchmarks.validation [--stations 10000] [--folds 10]
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np

from texture.choosing import fit_candidates
from texture.composition import LogRatio
from texture.observations import Observations
from texture.predict import Kriging
from texture.predict.leave_out import leave_out
from texture.progress import Silent
from texture.recipe import Recipe
from texture.structure.plane import Plane
from texture.targets import read_target
from texture.validate import validate_methods

SIDE_M = 100_000.0
METHODS = ("mean", "nearest", "triangulation", "inverse_distance", "kriging")
RECIPE = {
    "title": "benchmark",
    "samples": [{"file": __file__, "crs": "EPSG:32631"}],
    "target": {"bounds": [400_000.0, 0.0, 500_000.0, 100_000.0], "cell_size": 1000.0, "crs": "EPSG:32631"},
    "composition": {"zeros": "replace", "detection_limit": 1e-6},
    "validation": {"compare": list(METHODS)},
    "bed": {"classes": [{"name": p, "part": p, "share": 1.0, "grain": {"diameter_m": d}, **(
        {"water_column": {"settling_velocity_m_s": 1e-4}, "erosion": {"critical_stress_pa": 0.1, "rate": 5e-5}} if p == "mud" else {})}
        for p, d in (("mud", 15e-6), ("sand", 3e-4), ("gravel", 5e-3))]},
}  # fmt: skip


def simulated(count: int, seed: int = 1) -> Observations:
    rng = np.random.default_rng(seed)
    points = np.array([400_000.0, 0.0]) + rng.uniform(0, SIDE_M, (count, 2))
    wave = np.sin(points[:, 0] / 7000.0) + np.cos(points[:, 1] / 9000.0)
    coordinates = np.column_stack([wave, 0.5 * wave - 1.5]) + 0.5 * rng.standard_normal((count, 2))
    fractions = LogRatio(("mud", "sand", "gravel")).inverse(coordinates)
    nothing, nan = np.full((count, 3), np.nan), np.full(count, np.nan)
    return Observations(
        points=points, fractions=fractions, step=np.zeros(count), low=nothing, high=nothing,
        described=np.full(count, "", dtype="<U8"), mud_of_fines=nan, survey=np.zeros(count, dtype=np.int64),
        accuracy_m=np.zeros(count), measured=np.ones(count, dtype=bool), rows=np.arange(count), median_phi=nan,
        repeats=np.ones(count, dtype=np.int64), repeat_sd=nothing,
    )  # fmt: skip


@contextmanager
def timed(what: str) -> Iterator[None]:
    start = time.perf_counter()
    yield
    print(f"{what}: {time.perf_counter() - start:.1f} s", flush=True)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--stations", type=int, default=10_000)
    parser.add_argument("--folds", type=int, default=10)
    options = parser.parse_args()
    recipe = Recipe(**{**RECIPE, "validation": {"compare": list(METHODS), "count": options.folds}})
    target = read_target(recipe.target)
    plane = Plane.choose(target.longitude, target.latitude, target.crs)
    small = simulated(300)
    fit_candidates(small, recipe)  # compiles
    observations = simulated(options.stations)
    with timed(f"fit to {options.stations:,} stations"):
        plain, treated = fit_candidates(observations, recipe)
    with timed(f"validate {len(METHODS)} methods on {options.folds} folds"):
        found = validate_methods(observations, target, plane, plain, treated, recipe, Silent())
    for held in found.methods:
        print(f"  {held!r}, energy score {held.score('all', 'energy_score'):.4f}")
    kriging = Kriging(plain.structure).fit(observations.points, plain.values, noise_variance=plain.noise)
    with timed(f"leave each of {options.stations:,} stations out, two coordinates"):
        leave_out(kriging)


if __name__ == "__main__":
    main()
