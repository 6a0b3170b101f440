"""What large jobs take: ten million cells with flat memory, a million stations, ten thousand stations left out in turn.

Each part is measured in this run; a machine that does other work at the same time makes the seconds meaningless.

    python -m benchmarks.scale [--cells 10000000] [--stations 1000000] [--left-out 10000]
"""

from __future__ import annotations

import argparse
import resource
import time

from benchmarks.kernel import MODELS, grid, stations, time_kernel
from texture.predict import Kriging
from texture.predict.leave_out import leave_out
from texture.structure import Covariance


def peak_mib() -> float:
    """Largest memory of this process so far."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def many_cells(most: int) -> None:
    """Seconds for a tenth and for all of the cells, and memory above the arrays of cells and results."""
    points, values = stations(20_000, "uniform")
    rates = []
    for count in (most // 10, most):
        cells = grid(count)
        kriging = Kriging(MODELS).fit(points, values)
        arrays = cells.nbytes + 2 * len(cells) * len(MODELS) * 8
        before, start = peak_mib(), time.perf_counter()
        kriging.predict(cells)
        seconds = time.perf_counter() - start
        rates.append(seconds / len(cells))
        # The process held the cells already when `before` was taken.
        above = peak_mib() - before - (arrays - cells.nbytes) / 2**20
        print(f"{len(cells):>11,} cells: {seconds:.1f} s, {max(above, 0.0):.0f} MiB above the arrays themselves")
    print(f"seconds per cell, all over a tenth: {rates[1] / rates[0]:.2f}")


def many_stations(count: int) -> None:
    """A million stations indexed, fitted and kriged to a million cells."""
    points, values = stations(count, "uniform")
    total = time.perf_counter()
    structure = Covariance.fit(points, values)
    fitted = time.perf_counter() - total
    start = time.perf_counter()
    kriging = Kriging(structure).fit(points, values)
    tiles = len(kriging.systems[0].tiles)
    indexed = time.perf_counter() - start
    start = time.perf_counter()
    cells = grid(1_000_000)
    kriging.predict(cells)
    kriged = time.perf_counter() - start
    print(
        f"{count:,} stations: fitted in {fitted:.0f} s (Vecchia, 3,600 conditionals of each coordinate), indexed in "
        f"{indexed:.0f} s ({tiles:,} tiles), kriged to {len(cells):,} cells in {kriged:.0f} s; together "
        f"{time.perf_counter() - total:.0f} s"
    )


def left_out(count: int) -> None:
    """Each of many stations predicted from the others with given parameters."""
    points, values = stations(count, "uniform")
    kriging = Kriging(MODELS).fit(points, values)
    leave_out(Kriging(MODELS).fit(points[:200], values[:200]))
    start = time.perf_counter()
    leave_out(kriging)
    print(f"{count:,} stations left out one by one, two coordinates: {time.perf_counter() - start:.1f} s")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--cells", type=int, default=10_000_000)
    parser.add_argument("--stations", type=int, default=1_000_000)
    parser.add_argument("--left-out", type=int, default=10_000)
    options = parser.parse_args()
    start = time.perf_counter()
    points, values = stations(1000, "uniform")
    time_kernel(points, values, grid(100))
    print(f"first call, compiling or loading what was compiled: {time.perf_counter() - start:.1f} s")
    many_cells(options.cells)
    left_out(options.left_out)
    many_stations(options.stations)


if __name__ == "__main__":
    main()
