"""Are positions where they claim to be? Tested against the grid's extent and, where depths are reported, the grid's depths.

Nothing is moved here: what would bring positions right is put into words, for the draft to propose.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = [
    "DepthAt", "Extent", "depth_doubts", "extent_doubts", "extent_of", "look_like_minutes", "mistakes", "overlap",
]  # fmt: skip

FloatArray = npt.NDArray[np.float64]
Extent = tuple[float, float, float, float]
DepthAt = Callable[[FloatArray, FloatArray], FloatArray]

MARGIN = 0.25  # of an extent's own size; surveys reach beyond a model's edge
FEWEST = 8  # reported depths; fewer agree with any sea now and then
AGREES = 0.35  # misfit of depths, in which 0 is perfect and about 0.6 what places drawn at random give
BETTER = 0.6  # a proposal must bring the misfit below this share of what it is
ROWS_NAMED = 8


def mistakes(lon: FloatArray, lat: FloatArray, metres: bool = False) -> dict[str, tuple[FloatArray, FloatArray]]:
    """Where positions would be without the usual mistakes, by the words that propose the cure.

    Parameters
    ----------
    lon, lat : float array, shape (n,), degrees
    metres : bool
        Whether they come from easting and northing, in which another zone shifts all by six degrees.
    """
    swapped = np.abs(lon) <= 90.0
    found = {
        "latitude and longitude may be swapped: exchange them under columns": (
            np.where(swapped, lat, np.nan),
            np.where(swapped, lon, np.nan),
        ),
        'longitudes may be west: hemisphere = "W"': (-lon, lat),
        'latitudes may be south: hemisphere = "S"': (lon, -lat),
        'positions may be south and west: hemisphere = "SW"': (-lon, -lat),
        'they may be degrees and minutes typed as decimals: degrees = "minutes"': (_minutes(lon), _minutes(lat)),
    }
    if metres:
        found = {
            "they may lie one zone further east: correct crs or the zone": (lon + 6.0, lat),
            "they may lie one zone further west: correct crs or the zone": (lon - 6.0, lat),
        }
    return found


def _minutes(value: FloatArray) -> FloatArray:
    whole = np.trunc(value)
    part = (value - whole) / 0.6
    return np.where(np.abs(part) < 1.0, whole + part, np.nan)


def look_like_minutes(lon: FloatArray, lat: FloatArray) -> bool:
    """Whether all decimals stay below .60, which thirty positions in decimal degrees do by chance once in 10^13.

    Tested only where the positions span a degree; within less they may well share their decimals.
    """
    both = np.concatenate([lon, lat])
    both = np.abs(both[np.isfinite(both)])
    if len(both) < 60 or min(np.ptp(lon[np.isfinite(lon)]), np.ptp(lat[np.isfinite(lat)])) < 1.0:
        return False
    return bool((both % 1.0 < 0.6).all())


def overlap(one: Extent, other: Extent) -> bool:
    """Whether the middle of one extent lies in the other or within a quarter of its size."""
    dx, dy = MARGIN * (other[2] - other[0]) + 1e-3, MARGIN * (other[3] - other[1]) + 1e-3
    x, y = (one[0] + one[2]) / 2, (one[1] + one[3]) / 2
    return other[0] - dx <= x <= other[2] + dx and other[1] - dy <= y <= other[3] + dy


def extent_of(lon: FloatArray, lat: FloatArray) -> Extent | None:
    """Extent of most positions: one lost sign must not stretch it."""
    keep = np.isfinite(lon) & np.isfinite(lat)
    if not keep.any():
        return None
    west, east = np.percentile(lon[keep], [2, 98])
    south, north = np.percentile(lat[keep], [2, 98])
    return float(west), float(south), float(east), float(north)


def extent_doubts(lon: FloatArray, lat: FloatArray, grid: Extent, metres: bool) -> list[str]:
    """Say what would bring positions that miss the grid onto it."""
    found = extent_of(lon, lat)
    if found is None or overlap(found, grid):
        return []
    cures = []
    for words, (x, y) in mistakes(lon, lat, metres).items():
        moved = extent_of(x, y)
        if moved is not None and overlap(moved, grid):
            cures.append(words)
    place = f"{found[0]:.3f} to {found[2]:.3f}, {found[1]:.3f} to {found[3]:.3f}"
    return [f"DOUBT: positions ({place}) miss the grid" + ("; " + "; ".join(cures) if cures else "")]


@dataclass(frozen=True)
class _Fit:
    """How reported depths agree with the grid's at some places."""

    misfit: float
    error_m: FloatArray

    @property
    def median_m(self) -> float:
        known = np.abs(self.error_m[np.isfinite(self.error_m)])
        return float(np.median(known)) if len(known) else float("nan")


def _fit(lon: FloatArray, lat: FloatArray, depth: FloatArray, depth_at: DepthAt, spread: float) -> _Fit:
    there = np.isfinite(lon) & np.isfinite(lat)
    found = np.full(len(lon), np.nan)
    found[there] = depth_at(lon[there], lat[there])
    error = depth - found
    # a place off the grid or on land counts like a depth that is off by the whole spread
    return _Fit(float(np.where(np.isfinite(error), np.minimum(np.abs(error) / spread, 1.0), 1.0).mean()), error)


def depth_doubts(
    lon: FloatArray,
    lat: FloatArray,
    depth_m: FloatArray,
    rows: npt.NDArray[np.int64],
    depth_at: DepthAt,
    metres: bool = False,
) -> list[str]:
    """Compare reported depths with the grid's, where the positions are and where they would be without a mistake.

    Parameters
    ----------
    lon, lat, depth_m : float array, shape (n,)
        Degrees; metres, positive down; NaN where unknown.
    rows : int array, shape (n,)
        Row numbers, for the words.
    depth_at : callable (longitude, latitude) → depth in metres
        The grid's depth at the nearest cell; NaN off the grid and on land.
    metres : bool
        Whether positions come from easting and northing.

    Returns
    -------
    lines : list of str
        Empty where fewer than eight rows report a depth. A doubt begins with DOUBT.
    """
    use = np.isfinite(lon) & np.isfinite(lat) & np.isfinite(depth_m)
    if use.sum() < FEWEST:
        return []
    lon, lat, depth, rows = lon[use], lat[use], depth_m[use], rows[use]
    spread = max(float(np.subtract(*np.percentile(depth, [84, 16]))) / 2.0, 1.0)
    here = _fit(lon, lat, depth, depth_at, spread)
    tries = {words: _fit(x, y, depth, depth_at, spread) for words, (x, y) in mistakes(lon, lat, metres).items()}
    best = min(tries, key=lambda words: tries[words].misfit)
    if here.misfit > AGREES:
        if tries[best].misfit < AGREES and tries[best].misfit < BETTER * here.misfit:
            return [
                f"DOUBT: reported depths do not agree with the grid's ({_words(here)}); they would "
                f"({_words(tries[best])}) if this is cured: {best}"
            ]
        return [
            f"DOUBT: reported depths do not agree with the grid's ({_words(here)}); check positions, crs and the unit of depth"
        ]
    lines = [f"reported depths agree with the grid's: {_words(here)}"]
    lines += _single_rows(here, tries, rows)
    return lines


def _words(fit: _Fit) -> str:
    n = int(np.isfinite(fit.error_m).sum())
    off = len(fit.error_m) - n
    text = f"median difference {fit.median_m:.1f} m over {n} rows" if n else "no row on water"
    return text + (f", {off} off the grid or on land" if off and n else "")


def _single_rows(here: _Fit, tries: dict[str, _Fit], rows: npt.NDArray[np.int64]) -> list[str]:
    """Rows that stand out among agreeing ones, and that one mistake would explain."""
    known = np.abs(here.error_m[np.isfinite(here.error_m)])
    usual = max(3.0 * 1.4826 * float(np.median(known)), 1.0)
    off = ~(np.abs(here.error_m) <= 3.0 * usual)
    cured = {words: off & (np.abs(fit.error_m) <= usual) for words, fit in tries.items()}
    lines = []
    for words, hit in cured.items():
        if hit.any():
            named = ", ".join(str(r) for r in rows[hit][:ROWS_NAMED]) + (" …" if hit.sum() > ROWS_NAMED else "")
            lines.append(
                f"DOUBT: rows {named} disagree with the grid's depth where they are: {words} (in these rows alone)"
            )
    return lines
