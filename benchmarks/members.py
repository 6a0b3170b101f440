"""What members cost beside the kriging alone: 22 members of two coordinates on a million cells, and memory as they grow.

Two log-ratio coordinates, each with its own model, 20,000 stations, 32 neighbours, a raster of a million cells in the plane. Parts
are timed in one run: kriging alone (fit and prediction of mean and variance), prior fields (circulant embedding, and for
comparison the spectral method on a part of the cells), and kriging with all members as further value columns.

    python -m benchmarks.members [--cells 1000000] [--stations 20000] [--members 22] [--memory]
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import time

import numpy as np

from benchmarks.kernel import EXTENT_M, grid, stations
from texture.predict import Kriging, Members
from texture.predict.circulant import CirculantPrior, find_lattice, pairs_of
from texture.predict.spectral import SpectralPrior
from texture.structure import Covariance, CovarianceSet, Structure

MODELS = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 15_000.0)], small_scale=0.1, noise=0.1),
        Covariance([Structure("matern", 1.0, 12_000.0, 1.5)], small_scale=0.2, noise=0.05),
    ],
    [[1.0, -0.3], [-0.3, 1.0]],
)
AT_ONCE = 100_000


def run(cells: np.ndarray, points: np.ndarray, values: np.ndarray, count: int, spectral: bool) -> dict[str, float]:
    """Seconds of each part; fields are reduced to their sum, as a build writes them to disk."""
    seconds: dict[str, float] = {}
    start = time.perf_counter()
    kriging = Kriging(MODELS).fit(points, values)
    for first in range(0, len(cells), AT_ONCE):
        kriging.predict(cells[first : first + AT_ONCE])
    seconds["kriging alone"] = time.perf_counter() - start
    numbers = range(1, count + 1)
    start = time.perf_counter()
    lattice = find_lattice(cells, points)
    prior = CirculantPrior.make(MODELS, lattice, points) if lattice is not None else None
    assert prior is not None
    at = lattice.nodes_of(cells)
    at_stations, fields = np.empty((len(points), 2, count)), np.empty((len(cells), 2, count), dtype=np.float32)
    for pair in pairs_of(numbers):
        both = prior.pair(pair)
        for half, number in enumerate((2 * pair + 1, 2 * pair + 2)):
            if number <= count:
                at_stations[:, :, number - 1] = prior.at_stations(both[half], number)
                fields[:, :, number - 1] = both[half].reshape(2, -1)[:, at].T
    seconds["prior fields"] = time.perf_counter() - start
    start = time.perf_counter()
    members = Members(kriging, numbers, prior=at_stations)
    total = 0.0
    for first in range(0, len(cells), AT_ONCE):
        some = slice(first, first + AT_ONCE)
        total += float(members.predict(cells[some], fields[some].astype(np.float64), small_scale=False).sum())
    seconds["kriging with members"] = time.perf_counter() - start
    if spectral:
        start = time.perf_counter()
        SpectralPrior(MODELS, 2).at(cells[: len(cells) // 20], numbers)
        seconds["prior fields by the spectral method (20 times a twentieth)"] = 20.0 * (time.perf_counter() - start)
    return seconds


MEMORY = """
import resource, sys, tempfile
from contextlib import ExitStack
from pathlib import Path
import numpy as np
from benchmarks.members import MODELS, memory_case
memory_case(int(sys.argv[1]), int(sys.argv[2]))
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)
"""


def memory_case(count: int, side: int) -> None:
    """Draw members on a square raster as a build does, from 500 stations, and go through them once."""
    import tempfile
    from contextlib import ExitStack
    from pathlib import Path

    from texture.composition import LogRatio
    from texture.mapping import Mapper
    from texture.member_summary import summarise_members
    from texture.members import draw_members
    from texture.recipe import TargetSettings
    from texture.structure.plane import Plane
    from texture.targets.raster import make_raster
    from texture.treatments import Replace

    size = EXTENT_M / side
    target = make_raster(
        TargetSettings(bounds=(500_000.0, 4_900_000.0, 600_000.0, 5_000_000.0), cell_size=size, crs="EPSG:32626")
    )
    points, values = stations(500, "uniform")
    predictor = Kriging(MODELS).fit(points + np.array([500_000.0, 4_900_000.0]), values)
    parts = ("mud", "sand", "gravel")
    mapper = Mapper("kriging", Replace(LogRatio(parts)), MODELS, predictor)
    with tempfile.TemporaryDirectory() as folder, ExitStack() as stack:
        maps = draw_members(
            target, mapper, Plane("projected", "EPSG:32626"), 1, range(1, count + 1), 1, Path(folder), stack
        )
        summarise_members(maps, parts, (0.05, 0.5, 0.95), {"mud": (0.5,)}, 0.01)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--cells", type=int, default=1_000_000)
    parser.add_argument("--stations", type=int, default=20_000)
    parser.add_argument("--members", type=int, default=22)
    parser.add_argument(
        "--memory", action="store_true", help="peak memory of 5 and of 100 members on 90,000 cells instead"
    )
    options = parser.parse_args()
    if options.memory:
        peaks = {}
        for count in (5, 100):
            command = [sys.executable, "-c", MEMORY, str(count), "300"]
            done = subprocess.run(command, capture_output=True, text=True, check=True)
            peaks[count] = float(done.stdout.split()[-1])
            print(f"peak memory with {count} members on 90,000 cells: {peaks[count]:,.0f} MB")
        print(f"100 members take {peaks[100] / peaks[5]:.2f} times the memory of 5")
        return
    points, values = stations(options.stations, "uniform")
    cells = grid(options.cells)
    run(grid(10_000), points[:500], values[:500], 3, True)  # compiles
    seconds = run(cells, points, values, options.members, True)
    print(f"{len(cells):,} cells, {len(points):,} stations, 2 coordinates, {options.members} members")
    for name, value in seconds.items():
        print(f"{name}: {value:.1f} s")
    print(f"kriging with members over kriging alone: {seconds['kriging with members'] / seconds['kriging alone']:.2f}")
    print(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:,.0f} MB (all fields held at once)")


if __name__ == "__main__":
    main()
