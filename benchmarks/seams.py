"""Seams between tiles: jumps of the map where tiles meet against those inside them, and a picture of both.

Layouts of stations that are hard on local neighbourhoods: a lattice with a gap, transects, two scales of survey, isolated
clusters. The field is smooth; what jumps is the method. The all-station map stands beside it.

    python -m benchmarks.seams [--picture seams.png]
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from itertools import pairwise

import numpy as np

from texture.predict import Kriging
from texture.structure import Covariance, Structure

MODEL = Covariance([Structure("exponential", 1.0, 600.0)], noise=0.05)


def _uniform() -> np.ndarray:
    return np.random.default_rng(9).random((2990, 2)) * 1000.0


def _gap() -> np.ndarray:
    points = _uniform()
    return points[np.abs(points - 500.0).max(axis=1) > 200.0]


def _transects() -> np.ndarray:
    return np.column_stack([np.repeat(np.arange(10) * 100.0, 299), np.tile(np.arange(299) / 0.3, 10)])


def _two_scales() -> np.ndarray:
    points = _uniform()
    points[1500:] = points[1500:] * 0.15 + 400.0
    return points


def _clusters() -> np.ndarray:
    rng = np.random.default_rng(9)
    return rng.random((20, 2))[rng.integers(0, 20, 2990)] * 1000.0 + rng.normal(size=(2990, 2)) * 8.0


LAYOUTS: dict[str, Callable[[], np.ndarray]] = {
    "uniform": _uniform,
    "gap": _gap,
    "transects": _transects,
    "two scales": _two_scales,
    "clusters": _clusters,
}


def field(points: np.ndarray) -> np.ndarray:
    """A smooth field of 440 m and 565 m waves."""
    return np.sin(points[:, 0] / 70.0) + np.cos(points[:, 1] / 90.0)


def lines(step_m: float, count: int) -> tuple[np.ndarray, tuple[int, int]]:
    """Cells along `count` lines from west to east, and their shape (lines, cells)."""
    x = np.arange(50.0, 950.0, step_m)
    cells = np.concatenate([np.column_stack([x, np.full(x.size, y)]) for y in np.linspace(60.0, 940.0, count)])
    return cells, (count, x.size)


def jumps(
    kriging: Kriging, cells: np.ndarray, shape: tuple[int, int], tiled: Kriging | None = None
) -> tuple[float, float]:
    """Rms step between neighbouring cells across edges of tiles and inside them; `tiled` gives the tiles if not itself."""
    begin, tile, weight = (tiled or kriging).systems[0].tiles.serving(cells)
    first = [tile[a + np.argmax(weight[a:b])] for a, b in pairwise(begin)]
    crossing = np.diff(np.reshape(first, shape), axis=1) != 0
    step = np.diff(kriging.predict(cells)[0][:, 0].reshape(shape), axis=1)
    return float(np.sqrt(np.mean(step[crossing] ** 2))), float(np.sqrt(np.mean(step[~crossing] ** 2)))


def draw(path: str) -> None:
    """The slope of the map among clusters: from tiles, from exactly 32 nearest stations, from all stations."""
    import matplotlib

    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    points = LAYOUTS["clusters"]()
    axis = np.arange(0.0, 1000.0, 5.0)
    x, y = np.meshgrid(axis, axis)
    cells = np.column_stack([x.ravel(), y.ravel()])
    ways = {"tiles": (32, "tile"), "32 nearest": (32, "nearest"), "all stations": (None, "tile")}
    figure, axes = plt.subplots(1, 3, figsize=(10.0, 3.6), layout="constrained")
    for ax, (name, (neighbours, mode)) in zip(axes, ways.items(), strict=True):
        mean = Kriging(MODEL, neighbours, mode).fit(points, field(points)).predict(cells)[0].reshape(x.shape)
        slope = np.hypot(*np.gradient(mean, 5.0))
        ax.imshow(slope, origin="lower", extent=(0.0, 1000.0, 0.0, 1000.0), vmin=0.0, vmax=0.02, cmap="viridis")
        ax.plot(*points[::10].T, ",", color="white")
        ax.set_title(f"slope of the map, {name}", fontsize=9)
    figure.savefig(path, dpi=80)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--picture", help="also draw the slope of the map among clusters to this file")
    options = parser.parse_args()
    print("rms step across tile edges over rms step inside tiles; cells of 4 m and 1 m on 1,000 m")
    for name, layout in LAYOUTS.items():
        points = layout()
        local = Kriging(MODEL, 32).fit(points, field(points))
        whole = Kriging(MODEL, None).fit(points, field(points))
        ratios = []
        for step in (4.0, 1.0):
            cells, shape = lines(step, 20)
            edge, inside = jumps(local, cells, shape)
            ratios.append(edge / inside)
        edge, inside = jumps(whole, *lines(4.0, 20), local)
        print(f"{name:12s} {ratios[0]:.2f} {ratios[1]:.2f}; from all stations, at 4 m {edge / inside:.2f}")
    if options.picture:
        draw(options.picture)
        print(f"drew {options.picture}")


if __name__ == "__main__":
    main()
