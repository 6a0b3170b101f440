"""The model's curvilinear grid, and the truth as means over its cells."""

from pathlib import Path
from typing import Final

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from scipy.ndimage import label

from demo_samples.kestrel_bight.make import place, truth

Array = NDArray[np.float64]

ROWS: Final = 90
COLUMNS: Final = 120
BEND_KM: Final = 150.0  # radius of the middle row: rows bend with the bight
HALF_REACH_KM: Final = 22.5
HALF_FAN: Final = 0.2  # radians either side of the middle column
POINTS_ACROSS: Final = 3  # sub-points each way for cell means

# The classic format has no library version and no compression in it, so its bytes are the same everywhere.
FORMAT: Final = "NETCDF3_64BIT"
GLOBAL: Final = {
    "Conventions": "CF-1.11",
    "institution": "Kestrel Bight is an invented place",
    "source": "demo_samples/kestrel_bight/make_demo.py",
    "history": "2024-01-01 made by make_demo.py",
    "references": "none",
}


def grid_points(rows: Array, columns: Array) -> tuple[Array, Array]:
    """Give the local frame, km, at (possibly fractional) grid positions; 0 is the first cell's outer edge."""
    radius = BEND_KM + HALF_REACH_KM * (2.0 * rows / ROWS - 1.0)
    angle = HALF_FAN * (2.0 * columns / COLUMNS - 1.0)
    return radius * np.sin(angle), radius * np.cos(angle) - BEND_KM


def _mesh(rows: Array, columns: Array) -> tuple[Array, Array]:
    s, t = grid_points(*np.meshgrid(rows, columns, indexing="ij"))
    return s, t


def sea_mask() -> NDArray[np.bool_]:
    """Wet cells: the centre is in water and the cell belongs to the one connected sea. Shape (rows, columns)."""
    s, t = _mesh(np.arange(ROWS) + 0.5, np.arange(COLUMNS) + 0.5)
    bodies, _ = label(~place.on_land(s, t))
    return bodies == bodies[0, COLUMNS // 2]


def write_grid(path: Path) -> None:
    """Write the grid: centres, vertices, sea mask, depth."""
    s, t = _mesh(np.arange(ROWS) + 0.5, np.arange(COLUMNS) + 0.5)
    longitude, latitude = place.to_degrees(s, t)
    corners = [np.round(c, 7) for c in place.to_degrees(*_mesh(np.arange(ROWS + 1.0), np.arange(COLUMNS + 1.0)))]
    # Anticlockwise seen from above: south-west, south-east, north-east, north-west.
    vertices = [np.stack([c[:-1, :-1], c[:-1, 1:], c[1:, 1:], c[1:, :-1]], axis=-1) for c in corners]
    sea = sea_mask()
    depth = np.where(sea, np.round(place.frame_depth_m(s, t), 2), np.nan).astype(np.float32)
    cells = ("row", "column")
    grid = xr.Dataset(
        data_vars={
            "sea": (
                cells,
                sea.astype(np.int8),
                {
                    "standard_name": "sea_binary_mask",
                    "long_name": "sea mask",
                    "units": "1",
                    "flag_values": np.array([0, 1], dtype=np.int8),
                    "flag_meanings": "land sea",
                },
            ),
            "depth": (
                cells,
                depth,
                {
                    "standard_name": "sea_floor_depth_below_mean_sea_level",
                    "long_name": "depth of the bed",
                    "units": "m",
                    "positive": "down",
                },
            ),
            "longitude_vertices": ((*cells, "vertex"), vertices[0]),
            "latitude_vertices": ((*cells, "vertex"), vertices[1]),
        },
        coords={
            "longitude": (cells, np.round(longitude, 7), _axis("longitude", "degrees_east")),
            "latitude": (cells, np.round(latitude, 7), _axis("latitude", "degrees_north")),
        },
        attrs={
            "title": "Kestrel Bight, model grid",
            **GLOBAL,
            "comment": "Rows run from the open sea to the land, columns from west to east along the coast. "
            "Positions are WGS 84.",
        },
    )
    encoding: dict[str, dict[str, object]] = {
        name: {"_FillValue": None}
        for name in ("longitude", "latitude", "longitude_vertices", "latitude_vertices", "sea")
    }
    encoding["depth"] = {"_FillValue": np.float32(-9999.0)}
    grid.to_netcdf(path, engine="netcdf4", format=FORMAT, encoding=encoding)


def _axis(name: str, units: str) -> dict[str, str]:
    return {"standard_name": name, "long_name": f"{name} of cell centres", "units": units, "bounds": f"{name}_vertices"}


def cell_truth() -> tuple[Array, Array]:
    """Average the truth over the water inside each cell.

    Returns
    -------
    fractions : float array, shape (rows, columns, 3)
        Mean mud, sand and gravel; NaN on land. Rounded to 1e-6, closed by sand.
    rock : float array, shape (rows, columns)
        Share of the cell that is bare rock; NaN on land.
    """
    sea = sea_mask()
    row, column = np.nonzero(sea)
    inside = (np.arange(POINTS_ACROSS) + 0.5) / POINTS_ACROSS
    down, across = (g.ravel() for g in np.meshgrid(inside, inside, indexing="ij"))
    longitude, latitude = place.to_degrees(*grid_points(row[:, None] + down, column[:, None] + across))
    points = truth.true_fractions(longitude, latitude).reshape(row.size, -1, 3)
    wet = np.isfinite(points[..., 0])
    rock_points = truth.bare_rock(longitude, latitude).reshape(wet.shape)
    means = np.round(np.nanmean(points, axis=1), 6)
    means[:, 1] = 1.0 - means[:, 0] - means[:, 2]
    fractions = np.full((ROWS, COLUMNS, 3), np.nan)
    fractions[sea] = means
    rock = np.full((ROWS, COLUMNS), np.nan)
    rock[sea] = np.round((rock_points & wet).sum(axis=1) / wet.sum(axis=1), 6)
    return fractions, rock


def write_truth(path: Path) -> None:
    """Write the true cell means, on the cells of the model grid."""
    fractions, rock = cell_truth()
    cells = ("row", "column")
    parts = {
        part: (
            cells,
            fractions[..., i].astype(np.float32),
            {"long_name": f"true mean {part} fraction of the cell", "units": "1"},
        )
        for i, part in enumerate(("mud", "sand", "gravel"))
    }
    rock_attributes = {"long_name": "share of the cell that is bare rock", "units": "1"}
    dataset = xr.Dataset(
        {**parts, "bare_rock": (cells, rock.astype(np.float32), rock_attributes)},
        attrs={
            "title": "Kestrel Bight, the true bed",
            **GLOBAL,
            "comment": "On the cells of model_grid.nc; land is missing. Means over the water inside each cell. "
            "For tests and the accuracy statement only: no build reads it.",
        },
    )
    fill = {name: {"_FillValue": np.float32(-9999.0)} for name in dataset.data_vars}
    dataset.to_netcdf(path, engine="netcdf4", format=FORMAT, encoding=fill)
