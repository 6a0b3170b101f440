"""`Target`: the cells to fill, whatever kind of grid they come from.

Everything is flat, in row-major order of the file. Neighbours, areas and open boundary are properties
worked out once when asked for, the same for all kinds.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.targets.openings import Opening, find_openings, perimeter

if TYPE_CHECKING:
    import pyproj
    import xarray as xr

__all__ = ["Target"]

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Ints = NDArray[np.int64]


@dataclass(frozen=True, eq=False, repr=False)
class Target:
    """A structured grid of cells.

    Parameters
    ----------
    kind : {"raster", "curvilinear"}
        Regular in its own projection, or with two-dimensional longitude and latitude.
    name : str
        File name or a description, for messages.
    dims, shape : tuple
        Names and lengths of the two dimensions, rows first.
    crs : pyproj.CRS
        Of `x` and `y`; geographic for a curvilinear grid.
    longitude, latitude : float array, shape (n,)
        Cell centres in degrees.
    corners : pair of float arrays, shape (n, 4)
        Longitude and latitude of the corners, counter-clockwise.
    active : bool array, shape (n,)
        True where the cell is water and wants a bed.
    x, y : float arrays or None
        Axes of a raster in `crs`: x ascending, y descending (rows run north to south).
    depth_m : float array, shape (n,), or None
        Water depth, positive down; NaN where unknown.
    land : shapely geometry or None
        Land polygons in longitude and latitude.
    inlet_width_m : float or None
        Openings of the outer edge narrower than this are river inlets; None: a tenth of the widest.
    notes : tuple of str
        What was deduced while reading, to be shown.
    """

    kind: Literal["raster", "curvilinear"]
    name: str
    dims: tuple[str, str]
    shape: tuple[int, int]
    crs: pyproj.CRS
    longitude: Floats
    latitude: Floats
    corners: tuple[Floats, Floats]
    active: Bools
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
        return self.shape[0] * self.shape[1]

    @property
    def corner_longitude(self) -> Floats:
        """Longitude of the four corners, shape (n, 4), counter-clockwise."""
        return self.corners[0]

    @property
    def corner_latitude(self) -> Floats:
        """Latitude of the four corners, shape (n, 4), counter-clockwise."""
        return self.corners[1]

    @cached_property
    def area_m2(self) -> Floats:
        """Area of each cell on the ellipsoid, shape (n,), from a local equal-area projection."""
        import pyproj

        centre = float(np.nanmean(self.latitude)), _middle_longitude(self.longitude)
        local = pyproj.CRS.from_proj4(f"+proj=laea +lat_0={centre[0]:.6f} +lon_0={centre[1]:.6f} +datum=WGS84")
        to_local = pyproj.Transformer.from_crs(4326, local, always_xy=True)
        x, y = to_local.transform(*self.corners)
        doubled = sum(x[:, i] * y[:, (i + 1) % 4] - x[:, (i + 1) % 4] * y[:, i] for i in range(4))
        return np.asarray(np.abs(doubled) / 2.0)

    @cached_property
    def edges(self) -> Ints:
        """Pairs of cells that share a side, shape (m, 2), land cells included."""
        index = np.arange(self.n_cells, dtype=np.int64).reshape(self.shape)
        across = np.column_stack([index[:, :-1].ravel(), index[:, 1:].ravel()])
        down = np.column_stack([index[:-1].ravel(), index[1:].ravel()])
        return np.concatenate([across, down])

    @cached_property
    def edge_length_m(self) -> Floats:
        """Distance on the ellipsoid between the centres of each pair in `edges`, shape (m,)."""
        import pyproj

        a, b = self.edges.T
        geod = pyproj.Geod(ellps="WGS84")
        located = np.isfinite(self.longitude) & np.isfinite(self.latitude)
        good = located[a] & located[b]
        length = np.full(a.size, np.nan)
        a, b = a[good], b[good]
        length[good] = geod.inv(self.longitude[a], self.latitude[a], self.longitude[b], self.latitude[b])[2]
        return length

    @cached_property
    def openings(self) -> tuple[Opening, ...]:
        """Runs of water along the outer edge, widest first; narrow ones are river inlets."""
        return find_openings(self.active, self.longitude, self.latitude, self.shape, self.inlet_width_m)

    @cached_property
    def open_cells(self) -> Bools:
        """Water cells on the outer edge that lie in an opening to the sea, shape (n,)."""
        cells = np.zeros(self.n_cells, dtype=bool)
        for opening in self.openings:
            if not opening.inlet:
                cells[opening.cells] = True
        return cells

    @cached_property
    def outer_cells(self) -> Bools:
        """Cells on the outer edge of the grid, land included, shape (n,)."""
        cells = np.zeros(self.n_cells, dtype=bool)
        cells[perimeter(self.shape)] = True
        return cells

    @property
    def data_attributes(self) -> dict[str, str]:
        """CF attributes that every data variable on this target needs."""
        if self.kind == "raster":
            return {"grid_mapping": "crs"}
        return {"grid_mapping": "crs", "coordinates": "longitude latitude"}

    def coordinates(self) -> xr.Dataset:
        """CF coordinate variables, bounds and grid mapping, ready for data variables on `dims`."""
        from texture.targets.cf import coordinate_dataset

        return coordinate_dataset(self)

    def __repr__(self) -> str:
        rows, columns = self.shape
        wet = int(self.active.sum())
        side = float(np.sqrt(np.median(self.area_m2[self.active])))
        sea = [o for o in self.openings if not o.inlet]
        return (
            f"<Target {self.name}: {self.kind}, {rows} × {columns} cells ({wet:,} water), about {side:,.0f} m, "
            f"longitude {np.nanmin(self.longitude):.3f}…{np.nanmax(self.longitude):.3f}, latitude "
            f"{np.nanmin(self.latitude):.3f}…{np.nanmax(self.latitude):.3f}, open boundary {sum(o.length_m for o in sea) / 1000:,.1f} km>"
        )


def _middle_longitude(longitude: Floats) -> float:
    """Return the mean direction, so that a grid across the date line keeps its middle."""
    angle = np.radians(longitude[np.isfinite(longitude)])
    return float(np.degrees(np.arctan2(np.sin(angle).mean(), np.cos(angle).mean())))
