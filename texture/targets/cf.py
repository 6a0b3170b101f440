"""CF coordinate variables of a target: centres, bounds and grid mapping."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.targets.mesh import Mesh

if TYPE_CHECKING:
    import xarray as xr

    from texture.targets.target import Target

__all__ = ["coordinate_dataset"]


def coordinate_dataset(target: Target) -> xr.Dataset:
    """Return the coordinate variables alone; data variables on `target.dims` are added by the writer."""
    import xarray as xr

    grid_mapping = xr.DataArray(np.int32(0), attrs=target.crs.to_cf())
    if target.kind == "raster":
        return _raster(target).assign(crs=grid_mapping)
    if target.kind == "mesh":
        return _mesh(target).assign(crs=grid_mapping)
    if target.kind == "points":
        return _points(target).assign(crs=grid_mapping)
    assert target.corners is not None  # a structured grid has them
    longitude, latitude = (a.reshape(target.shape) for a in (target.longitude, target.latitude))
    bounds = [a.reshape(*target.shape, 4) for a in target.corners]
    return xr.Dataset(
        {
            "longitude_bounds": ((*target.dims, "corner"), bounds[0]),
            "latitude_bounds": ((*target.dims, "corner"), bounds[1]),
        },
        coords={
            "longitude": (target.dims, longitude, {**_LONGITUDE, "bounds": "longitude_bounds"}),
            "latitude": (target.dims, latitude, {**_LATITUDE, "bounds": "latitude_bounds"}),
        },
    ).assign(crs=grid_mapping)


_LONGITUDE = {"standard_name": "longitude", "long_name": "longitude of the cell centre", "units": "degrees_east"}
_LATITUDE = {"standard_name": "latitude", "long_name": "latitude of the cell centre", "units": "degrees_north"}


def _raster(target: Target) -> xr.Dataset:
    import xarray as xr

    assert target.x is not None  # a raster has its axes
    assert target.y is not None
    if target.crs.is_geographic:
        x_attrs, y_attrs = {**_LONGITUDE, "axis": "X"}, {**_LATITUDE, "axis": "Y"}
    else:
        units = target.crs.axis_info[0].unit_name.replace("metre", "m")
        x_attrs = {"standard_name": "projection_x_coordinate", "long_name": "easting", "units": units, "axis": "X"}
        y_attrs = {"standard_name": "projection_y_coordinate", "long_name": "northing", "units": units, "axis": "Y"}
    y_name, x_name = target.dims
    x_half, y_half = _half_steps(target.x, target.y)
    x_bounds = np.column_stack([target.x - x_half, target.x + x_half])
    y_bounds = np.column_stack([target.y - y_half, target.y + y_half])
    return xr.Dataset(
        {f"{x_name}_bounds": ((x_name, "corner"), x_bounds), f"{y_name}_bounds": ((y_name, "corner"), y_bounds)},
        coords={
            x_name: (x_name, target.x, {**x_attrs, "bounds": f"{x_name}_bounds"}),
            y_name: (y_name, target.y, {**y_attrs, "bounds": f"{y_name}_bounds"}),
        },
    )


def _half_steps(x: NDArray[np.float64], y: NDArray[np.float64]) -> tuple[float, float]:
    """Half a step along each axis, with its sign; an axis of one cell has the other's length."""
    steps = [float(axis[1] - axis[0]) if axis.size > 1 else None for axis in (x, y)]
    length = abs(next((s for s in steps if s is not None), 1.0))
    return (steps[0] or length) / 2.0, (steps[1] or -length) / 2.0


def _points(target: Target) -> xr.Dataset:
    import xarray as xr

    (dim,) = target.dims
    return xr.Dataset(
        coords={"longitude": (dim, target.longitude, _LONGITUDE), "latitude": (dim, target.latitude, _LATITUDE)},
        attrs={"featureType": "point"},
    )


def _mesh(target: Target) -> xr.Dataset:
    """UGRID 1.0: nodes, faces and the variable that names them."""
    import xarray as xr

    mesh = target.topology
    assert isinstance(mesh, Mesh)  # a mesh target has one
    topology = {
        "cf_role": "mesh_topology",
        "long_name": "topology of the mesh",
        "topology_dimension": np.int32(2),
        "node_coordinates": "mesh_node_longitude mesh_node_latitude",
        "face_node_connectivity": "mesh_face_nodes",
        "face_dimension": "mesh_face",
    }
    connectivity = {
        "cf_role": "face_node_connectivity",
        "long_name": "nodes of each face, counter-clockwise",
        "start_index": np.int32(0),
        "_FillValue": np.int32(-1),
    }
    node = {"long_name": "of the mesh node"}
    variables = {
        "mesh": ((), np.int32(0), topology),
        "mesh_face_nodes": (("mesh_face", "mesh_corner"), mesh.faces.astype(np.int32), connectivity),
        "mesh_node_longitude": ("mesh_node", mesh.node_longitude, _LONGITUDE | node),
        "mesh_node_latitude": ("mesh_node", mesh.node_latitude, _LATITUDE | node),
    }
    coords = {
        "longitude": (target.dims, target.longitude, _LONGITUDE),
        "latitude": (target.dims, target.latitude, _LATITUDE),
    }
    if mesh.location == "face":
        topology["face_coordinates"] = "longitude latitude"
    return xr.Dataset(variables, coords=coords, attrs={"Conventions": "CF-1.11 UGRID-1.0"})
