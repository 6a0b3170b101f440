"""Seconds and peak memory of every stage of a build on a large raster given by its bounds.

The samples are those of the demo; the cells cover the same place, as fine as the number of cells asks for. With `--land` the
demo's coast cuts land out, with `--rim` there is a rim six cells wide.

    python -m benchmarks.build [--cells 10000000] [--precision float64] [--land] [--rim] [--layers 1]
"""

from __future__ import annotations

import argparse
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

DEMO = Path(__file__).parents[1] / "demo_samples" / "kestrel_bight"
CORNER, WIDE, HIGH = (503_000.0, 4_880_000.0), 32_000.0, 24_000.0  # of the demo's place, in EPSG:32626
LIMIT_GIB = 3.0


class Watch:
    """A progress that prints each stage's seconds and its own peak of resident memory (Linux)."""

    def __init__(self) -> None:
        self.peak = 0.0
        self.since = time.perf_counter()
        self._fresh()

    def _fresh(self) -> None:
        Path("/proc/self/clear_refs").write_text("5")  # the peak counts from here
        self.since = time.perf_counter()

    def told(self, name: str) -> None:
        """Print what passed since the last line."""
        lines = Path("/proc/self/status").read_text().splitlines()
        now, peak = (next(int(s.split()[1]) / 2**20 for s in lines if s.startswith(k)) for k in ("VmRSS:", "VmHWM:"))
        self.peak = max(self.peak, peak)
        print(
            f"{name:<28} {time.perf_counter() - self.since:7.1f} s   peak {peak:5.2f} GiB, after it {now:5.2f} GiB",
            flush=True,
        )
        self._fresh()

    @contextmanager
    def stage(self, name: str, total: int | None = None) -> Iterator[Callable[[int], None]]:
        """See `texture.progress.Progress`."""
        self.told("  between")
        yield lambda steps: None
        self.told(name)


def recipe(options: argparse.Namespace, folder: Path) -> Path:
    """Write the recipe of the demo for a raster of as many cells."""
    columns = round((options.cells * WIDE / HIGH) ** 0.5)
    rows, size = round(options.cells / columns), WIDE / columns
    text = (DEMO / "recipe.toml").read_text(encoding="utf-8")
    samples = text[text.index("[[samples]]") : text.index("[target]")].replace('file = "', f'file = "{DEMO}/')
    west, south = CORNER
    lines = [
        samples.replace("[composition]", '[composition]\nzeros = "replace"'),
        "[target]",
        f"bounds = [{west}, {south}, {west + columns * size!r}, {south + rows * size!r}]",
        f'cell_size = {size!r}\ncrs = "EPSG:32626"',
        f'land = "{DEMO}/coast.geojson"' if options.land else "",
        '[validation]\ncompare = ["nearest"]\ncount = 3',
        f'[outputs]\nprecision = "{options.precision}"\ngeotiff = {"false" if options.no_geotiff else "true"}',
        '[rim]\nwidth_cells = 6\ncomposition = { sand = 1.0 }' if options.rim else "",
        *(f"[[bed.layers]]\nthickness_m = {0.1 + i}" for i in range(options.layers)),
    ]  # fmt: skip
    path = folder / "recipe.toml"
    path.write_text("\n".join(lines), encoding="utf-8")
    return path


def main() -> int:
    from texture import build

    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--cells", type=int, default=10_000_000)
    parser.add_argument("--precision", choices=["float32", "float64"], default="float64")
    parser.add_argument("--layers", type=int, default=1)
    parser.add_argument("--land", action="store_true")
    parser.add_argument("--rim", action="store_true")
    parser.add_argument("--no-geotiff", action="store_true")
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as place:
        watch, start = Watch(), time.perf_counter()
        result = build(recipe(options, Path(place)), output=Path(place) / "out", progress=watch)
        watch.told("  after")
        print(
            f"{result.found.target.n_cells:,} cells in {time.perf_counter() - start:.0f} s; peak {watch.peak:.2f} GiB (limit {LIMIT_GIB:g})"
        )
        print(", ".join(f"{name} {seconds:.0f} s" for name, seconds in result.clock.seconds.items()))
    return int(watch.peak > LIMIT_GIB)


if __name__ == "__main__":
    raise SystemExit(main())
