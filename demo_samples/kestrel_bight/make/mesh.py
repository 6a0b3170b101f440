"""A triangular mesh over the same water, and a short list of places: other kinds of target."""

from pathlib import Path
from typing import Final

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from demo_samples.kestrel_bight.make import grid, place

STEP: Final = 3  # a node in every third cell each way: triangles of about 1.5 km


def _lattice() -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    return np.meshgrid(np.arange(1, grid.ROWS, STEP), np.arange(1, grid.COLUMNS, STEP), indexing="ij")


def triangles() -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """Give the nodes as rows and columns of the model grid, and the triangles between them, shape (f, 3).

    A triangle is kept when its nodes and its middle are in the water.
    """
    row, column = _lattice()
    number = np.arange(row.size).reshape(row.shape)
    a, b, c, d = number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1]
    slope = (np.add.outer(np.arange(a.shape[0]), np.arange(a.shape[1])) % 2).astype(bool)[..., None]
    first = np.where(slope, np.stack([a, b, c], -1), np.stack([a, b, d], -1)).reshape(-1, 3)
    second = np.where(slope, np.stack([a, c, d], -1), np.stack([b, c, d], -1)).reshape(-1, 3)
    faces = np.stack([first, second], axis=1).reshape(-1, 3)
    sea = grid.sea_mask()[row, column].ravel()
    s, t = grid.grid_points(row.ravel() + 0.5, column.ravel() + 0.5)
    middle_on_land = place.on_land(s[faces].mean(axis=1), t[faces].mean(axis=1))
    faces = faces[sea[faces].all(axis=1) & ~middle_on_land]
    used, renumbered = np.unique(faces, return_inverse=True)
    return row.ravel()[used], column.ravel()[used], renumbered.reshape(faces.shape)


def write_mesh(path: Path) -> None:
    """Write the mesh as UGRID, its nodes at centres of cells of the model grid."""
    row, column, faces = triangles()
    longitude, latitude = place.to_degrees(*grid.grid_points(row + 0.5, column + 0.5))
    dataset = xr.Dataset(
        {
            "net": (
                (),
                np.int32(0),
                {
                    "cf_role": "mesh_topology",
                    "long_name": "triangles over the bight",
                    "topology_dimension": np.int32(2),
                    "node_coordinates": "net_longitude net_latitude",
                    "face_node_connectivity": "net_triangles",
                },
            ),
            "net_triangles": (
                ("triangle", "three"),
                (faces + 1).astype(np.int32),
                {
                    "cf_role": "face_node_connectivity",
                    "long_name": "nodes of each triangle",
                    "start_index": np.int32(1),
                },
            ),
            "net_longitude": ("net_node", np.round(longitude, 7), _axis("longitude", "degrees_east")),
            "net_latitude": ("net_node", np.round(latitude, 7), _axis("latitude", "degrees_north")),
        },
        attrs={"title": "Kestrel Bight, triangular mesh", **grid.GLOBAL, "Conventions": "CF-1.11 UGRID-1.0"},
    )
    encoding = {name: {"_FillValue": None} for name in ("net_longitude", "net_latitude")}
    dataset.to_netcdf(path, engine="netcdf4", format=grid.FORMAT, encoding=encoding)


def _axis(name: str, units: str) -> dict[str, str]:
    return {"standard_name": name, "long_name": f"{name} of the nodes", "units": units}


def write_places(path: Path) -> None:
    """Write forty places, each the centre of a water cell of the model grid."""
    row, column = np.nonzero(grid.sea_mask())
    chosen = np.linspace(0, row.size - 1, 40).astype(int)
    longitude, latitude = place.to_degrees(*grid.grid_points(row[chosen] + 0.5, column[chosen] + 0.5))
    names = [f"P{i + 1:02d}" for i in range(chosen.size)]
    table = pd.DataFrame({"place": names, "longitude": np.round(longitude, 7), "latitude": np.round(latitude, 7)})
    table.to_csv(path, index=False, lineterminator="\n", float_format="%.7f")
