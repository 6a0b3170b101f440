"""`Target`: the cells to fill, whatever kind of grid they come from.

Everything is flat, in the order of the file. Neighbours, areas and open boundary are properties worked out once when
asked for, the same for all kinds.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.targets.corners import Corners, OwnCorners
from texture.targets.openings import COMPASS, Opening

if TYPE_CHECKING:
    import pyproj
    import xarray as xr

__all__ = ["Target", "Topology"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Ints = NDArray[np.int64]
PIECES_AT_ONCE = 500_000  # bounds the memory of areas to some tens of megabytes


class Topology(Protocol):
    """How cells hang together; see `Structured` and `Mesh`."""

    def edges(self) -> NDArray[np.integer]:
        """Pairs of neighbouring cells, shape (m, 2)."""
        ...

    def sides(self, target: Target) -> dict[str, Bools]:
        """Cells on the outer edge by compass side."""
        ...

    def openings(self, target: Target) -> tuple[Opening, ...]:
        """Runs of water along the outer edge, widest first."""
        ...


@dataclass(frozen=True, eq=False, repr=False)
class Target:
    """Cells to fill.

    Parameters
    ----------
    kind : {"raster", "curvilinear", "mesh", "points"}
        Regular in its own projection; with two-dimensional longitude and latitude; unstructured; a list of places.
    name : str
        File name or a description, for messages.
    dims, shape : tuple
        Names and lengths of the dimensions: rows and columns, or one for meshes and points.
    crs : pyproj.CRS
        Of `x` and `y`; geographic for other kinds.
    longitude, latitude : float array, shape (n,)
        Cell centres in degrees.
    active : bool array, shape (n,)
        True where the cell is water and wants a bed.
    topology : Structured, Mesh or None
        How cells hang together; None for points.
    corners : Corners or None
        The polygons that cells are made of, counter-clockwise; None for points.
    piece_cell : int array, shape (m,), or None
        Cell of each polygon; None where polygon i is cell i.
    x, y : float arrays or None
        Axes of a raster in `crs`, in the order of the file; without a file y descends (rows run north to south).
    depth_m : float array, shape (n,), or None
        Water depth, positive down; NaN where unknown.
    land : shapely geometry or None
        Land polygons in longitude and latitude.
    inlet_width_m : float or None
        Openings of the outer edge narrower than this are river inlets; None: a tenth of the widest.
    notes : tuple of str
        What was deduced while reading, to be shown.
    """

    kind: Literal["raster", "curvilinear", "mesh", "points"]
    name: str
    dims: tuple[str, ...]
    shape: tuple[int, ...]
    crs: pyproj.CRS
    longitude: Floats
    latitude: Floats
    active: Bools
    topology: Topology | None
    corners: Corners | None
    piece_cell: Ints | None = None
    x: Floats | None = None
    y: Floats | None = None
    depth_m: Floats | None = None
    land: Any = None
    inlet_width_m: float | None = None
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        n = self.n_cells
        for label, array in (("longitude", self.longitude), ("latitude", self.latitude), ("mask", self.active)):
            if array.shape != (n,):
                raise TargetError(f"{self.name}: {label} has {array.size} cells, expected {n} for shape {self.shape}")
        if not self.active.any():
            raise TargetError(f"{self.name}: no cell is water; check the mask's meaning and the land polygons")
        located = np.isfinite(self.longitude) & np.isfinite(self.latitude)
        lost = int((self.active & ~located).sum())
        if lost:
            raise TargetError(
                f"{self.name}: {lost} water cells have no position (NaN longitude or latitude); "
                "mask them out or give them coordinates"
            )

    @property
    def n_cells(self) -> int:
        """Number of cells, land included."""
        return math.prod(self.shape)

    @property
    def size_text(self) -> str:
        """Size in words, such as "90 × 120 cells"."""
        word = {"mesh": f"{self.dims[0]}s".replace("_", " "), "points": "points"}.get(self.kind, "cells")
        return " × ".join(f"{n:,}" for n in self.shape) + f" {word}"

    @cached_property
    def cell_of_piece(self) -> Ints:
        """Cell that each polygon of `corners` belongs to, shape (m,)."""
        if self.piece_cell is not None:
            return self.piece_cell
        return np.arange(0 if self.corners is None else self.corners.count, dtype=np.int64)

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """West, south, east and north of the cells in degrees."""
        return (self.corners or OwnCorners(self.longitude, self.latitude)).bounds

    @cached_property
    def area_m2(self) -> Floats:
        """Area of each cell on the ellipsoid, shape (n,), from a local equal-area projection; 1 for points."""
        if self.corners is None:
            return np.ones(self.n_cells)
        import pyproj

        centre = float(np.nanmean(self.latitude)), _middle_longitude(self.longitude)
        local = pyproj.CRS.from_proj4(f"+proj=laea +lat_0={centre[0]:.6f} +lon_0={centre[1]:.6f} +datum=WGS84")
        to_local = pyproj.Transformer.from_crs(4326, local, always_xy=True)
        area = np.empty(self.corners.count)
        for start in range(0, area.size, PIECES_AT_ONCE):
            some = slice(start, min(start + PIECES_AT_ONCE, area.size))
            x, y = to_local.transform(*self.corners.of(some))
            area[some] = np.abs((x * np.roll(y, -1, axis=1) - np.roll(x, -1, axis=1) * y).sum(axis=1)) / 2.0
        if self.piece_cell is None:
            return area
        return np.asarray(np.bincount(self.piece_cell, area, minlength=self.n_cells), dtype=np.float64)

    @cached_property
    def edges(self) -> NDArray[np.integer]:
        """Pairs of neighbouring cells, shape (m, 2), land cells included; none for points."""
        return np.empty((0, 2), dtype=np.int64) if self.topology is None else self.topology.edges()

    def distance_m(self, pairs: NDArray[np.integer]) -> Floats:
        """Distance on the ellipsoid between the centres of pairs of cells (m, 2), shape (m,); NaN where a place is unknown."""
        import pyproj

        a, b = pairs.T
        located = np.isfinite(self.longitude) & np.isfinite(self.latitude)
        good = located[a] & located[b]
        length = np.full(a.size, np.nan)
        a, b = a[good], b[good]
        geod = pyproj.Geod(ellps="WGS84")
        length[good] = geod.inv(self.longitude[a], self.latitude[a], self.longitude[b], self.latitude[b])[2]
        return length

    @cached_property
    def openings(self) -> tuple[Opening, ...]:
        """Runs of water along the outer edge, widest first; narrow ones are river inlets."""
        return () if self.topology is None else self.topology.openings(self)

    @cached_property
    def open_cells(self) -> Bools:
        """Water cells on the outer edge that lie in an opening to the sea, shape (n,)."""
        cells = np.zeros(self.n_cells, dtype=bool)
        for opening in self.openings:
            if not opening.inlet:
                cells[opening.cells] = True
        return cells

    @cached_property
    def side_cells(self) -> dict[str, Bools]:
        """Cells on the outer edge by compass side, land included; a corner cell belongs to two."""
        if self.topology is None:
            return {name: np.zeros(self.n_cells, dtype=bool) for name in COMPASS}
        return self.topology.sides(self)

    @property
    def data_attributes(self) -> dict[str, str]:
        """CF (and UGRID) attributes that every data variable on this target needs."""
        if self.kind == "raster":
            return {"grid_mapping": "crs"}
        attributes = {"grid_mapping": "crs", "coordinates": "longitude latitude"}
        if self.kind == "mesh":
            attributes |= {"mesh": "mesh", "location": self.dims[0].removeprefix("mesh_")}
        return attributes

    def coordinates(self) -> xr.Dataset:
        """CF coordinate variables, bounds, mesh and grid mapping, ready for data variables on `dims`."""
        from texture.targets.cf import coordinate_dataset

        return coordinate_dataset(self)

    def plot(self, values: Any = None, ax: Any = None, label: str = "") -> Any:
        """Draw the cells, or values on them, on matplotlib axes; see `texture.targets.drawing.plot_target`."""
        from texture.targets.drawing import plot_target

        return plot_target(self, values, ax, label)

    def __repr__(self) -> str:
        wet = int(self.active.sum())
        west, south, east, north = self.bounds
        where = f"longitude {west:.3f}…{east:.3f}, latitude {south:.3f}…{north:.3f}"
        if self.kind == "points":
            return f"<Target {self.name}: {self.size_text} ({wet:,} in water), {where}>"
        side = float(np.sqrt(np.median(self.area_m2[self.active])))
        sea_m = sum(o.length_m for o in self.openings if not o.inlet)
        return (
            f"<Target {self.name}: {self.kind}, {self.size_text} ({wet:,} water), about {side:,.0f} m, {where}, "
            f"open boundary {sea_m / 1000:,.1f} km>"
        )


def _middle_longitude(longitude: Floats) -> float:
    """Return the mean direction, so that a grid across the date line keeps its middle."""
    angle = np.radians(longitude[np.isfinite(longitude)])
    return float(np.degrees(np.arctan2(np.sin(angle).mean(), np.cos(angle).mean())))
