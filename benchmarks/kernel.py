"""Cells per second of the kriging kernel beside PyKrige's compiled moving window, in one run on one machine.

Two log-ratio coordinates, each with its own model and noise, means and variances, 32 neighbours, 20,000 stations, a
million cells. PyKrige does a part of the same cells, both variables one after the other. Compile time stands apart.

    python -m benchmarks.kernel [--cells 1000000] [--stations 20000] [--layout uniform|clusters] [--columns 22]
        [--skip-pykrige]
"""

from __future__ import annotations

import argparse
import resource
import time

import numpy as np

from texture.predict import Kriging
from texture.structure import Covariance, CovarianceSet, Structure

EXTENT_M = 100_000.0
MODELS = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 15_000.0)], small_scale=0.1, noise=0.1),
        Covariance([Structure("matern", 1.0, 12_000.0, 1.5)], small_scale=0.2, noise=0.05),
    ]
)


def stations(count: int, layout: str, seed: int = 1) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    if layout == "uniform":
        points = rng.random((count, 2)) * EXTENT_M
    else:
        centres = rng.random((60, 2)) * EXTENT_M
        points = centres[rng.integers(0, 60, count)] + rng.normal(size=(count, 2)) * 2500.0
    waves = np.sin(points[:, 0] / 9000.0) + np.cos(points[:, 1] / 7000.0)
    values = np.column_stack([waves, -waves]) + rng.normal(size=(count, 2)) * 0.4
    return points, values


def grid(count: int) -> np.ndarray:
    side = int(np.sqrt(count))
    axis = (np.arange(side) + 0.5) * EXTENT_M / side
    x, y = np.meshgrid(axis, axis)
    return np.column_stack([x.ravel(), y.ravel()])


def time_kernel(points: np.ndarray, values: np.ndarray, cells: np.ndarray, neighbours: int = 32) -> float:
    """Seconds for fit (tiles and all) and prediction."""
    start = time.perf_counter()
    kriging = Kriging(MODELS, neighbours).fit(points, values)
    kriging.predict(cells)
    return time.perf_counter() - start


def time_columns(points: np.ndarray, values: np.ndarray, cells: np.ndarray, count: int) -> float:
    """Seconds for a prediction with further value columns, which share the factors of the first."""
    columns = np.random.default_rng(2).normal(size=(*values.shape, count))
    kriging = Kriging(MODELS).fit(points, values, columns=columns)
    start = time.perf_counter()
    kriging.predict_columns(cells)
    return time.perf_counter() - start


def pykrige_rate(points: np.ndarray, values: np.ndarray, cells: np.ndarray, neighbours: int = 32) -> float:
    """Cells per second for both variables by PyKrige's compiled moving window.

    Its compiled window knows no Matérn model: the exponential serves twice. It builds the whole stations-by-stations
    matrix before the first cell; to its favour only the difference between few and many cells counts, not that.
    """
    from pykrige.ok import OrdinaryKriging

    seconds = 0.0
    few = 100
    for column in values.T:
        # An exponential range is three scales there. The constructor's variogram statistics are quadratic in stations;
        # it gets 2,000 of them, and all stations afterwards.
        parameters = {"psill": 1.0, "range": 15_000.0, "nugget": 0.2}
        k = OrdinaryKriging(points[:2000, 0], points[:2000, 1], column[:2000], "exponential", parameters)
        k.X_ADJUSTED, k.Y_ADJUSTED, k.Z = points[:, 0].copy(), points[:, 1].copy(), column.copy()
        for part, sign in ((cells, 1.0), (cells[:few], -1.0)):
            x, y = np.ascontiguousarray(part.T)
            start = time.perf_counter()
            k.execute("points", x, y, backend="C", n_closest_points=neighbours)
            seconds += sign * (time.perf_counter() - start)
    return (len(cells) - few) / seconds


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--cells", type=int, default=1_000_000)
    parser.add_argument("--stations", type=int, default=20_000)
    parser.add_argument("--layout", choices=["uniform", "clusters"], default="uniform")
    parser.add_argument("--columns", type=int, default=22, help="further value columns per coordinate; 0 leaves it out")
    parser.add_argument("--skip-pykrige", action="store_true")
    options = parser.parse_args()
    points, values = stations(options.stations, options.layout)
    cells = grid(options.cells)

    start = time.perf_counter()
    time_kernel(points[:100], values[:100], cells[:100])
    print(f"first call, compiling or loading what was compiled: {time.perf_counter() - start:.1f} s")
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    seconds = min(time_kernel(points, values, cells) for _ in range(3))
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    rate = len(cells) / seconds
    print(f"kernel:  {len(cells):,} cells, two coordinates with variances, {len(points):,} stations: {seconds:.2f} s")
    print(f"         {rate:,.0f} cells/s; memory grew by {(after - before) / 1024:.0f} MiB")
    if options.columns:
        part = cells[:: max(1, len(cells) // 250_000)]
        alone, along = (min(time_columns(points, values, part, c) for _ in range(2)) for c in (0, options.columns))
        print(
            f"columns: {options.columns} further ones per coordinate on {len(part):,} cells: {along / alone - 1:+.0%} time"
        )
    if options.skip_pykrige:
        return
    part = cells[np.linspace(0, len(cells) - 1, 30_000).astype(int)]
    theirs = pykrige_rate(points, values, part)
    print(f"PyKrige: {len(part):,} of the same cells, both variables: {theirs:,.0f} cells/s")
    print(f"ratio:   {rate / theirs:,.0f}")


if __name__ == "__main__":
    main()
