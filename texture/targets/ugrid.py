"""An unstructured mesh from a UGRID file."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np
import pyproj
from numpy.typing import NDArray

from texture.errors import TargetError
from texture.recipe import TargetSettings
from texture.targets.corners import OwnCorners
from texture.targets.crs import read_crs, to_degrees, unwrapped
from texture.targets.land import on_land, read_land
from texture.targets.mask import find_depth, find_mask
from texture.targets.mesh import Mesh
from texture.targets.target import Target

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["mesh_variable", "read_mesh"]

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]


def mesh_variable(dataset: xr.Dataset) -> str | None:
    """Name of the variable that describes a two-dimensional mesh, None where the file has none."""
    for name, variable in dataset.variables.items():
        if variable.attrs.get("cf_role") == "mesh_topology" and int(variable.attrs.get("topology_dimension", 2)) == 2:
            return str(name)
    return None


def read_mesh(dataset: xr.Dataset, settings: TargetSettings, name: str) -> Target:
    """Read a mesh; the bed is made on its faces, or on its nodes where `target.location` says so.

    Raises
    ------
    TargetError
        For a mesh without nodes or connectivity, with nodes that do not exist, or with folded faces.
    """
    key = mesh_variable(dataset)
    assert key is not None  # the caller has looked
    topology = dataset.variables[key].attrs
    lon, lat, crs = _nodes(dataset, topology, settings, name)
    faces = _faces(dataset, topology, lon.size, name)
    location: Literal["face", "node"] = "node" if settings.location == "node" else "face"
    mesh = _counter_clockwise(Mesh(faces, lon, lat, location), name)
    dim = "mesh_node" if location == "node" else "mesh_face"
    their_dim = _their_dimension(dataset, topology, location)
    notes: list[str] = []
    mask = find_mask(dataset, settings.mask, (their_dim,), name, notes)
    longitude, latitude = (lon, lat) if location == "node" else _face_centres(mesh)
    land = read_land(settings.land) if settings.land is not None else None
    if mask is not None:
        active = mask.ravel()
    elif land is not None:
        active = ~on_land(land, longitude, latitude)
    else:
        active = np.ones(longitude.size, dtype=bool)
    if land is None:
        notes.append("no land polygons given: the whole edge of the mesh is taken as open boundary")
    corner_lon, corner_lat, cell = mesh.pieces()
    return Target(
        kind="mesh",
        name=name,
        dims=(dim,),
        shape=(longitude.size,),
        crs=crs,
        longitude=longitude,
        latitude=latitude,
        active=active,
        topology=mesh,
        corners=OwnCorners(corner_lon, corner_lat),
        piece_cell=cell if location == "node" else None,
        depth_m=find_depth(dataset, settings.depth, (their_dim,), name),
        land=land,
        inlet_width_m=None if settings.inlet_width_m == "auto" else settings.inlet_width_m,
        notes=tuple(notes),
    )


def _nodes(
    dataset: xr.Dataset, topology: dict[str, object], settings: TargetSettings, name: str
) -> tuple[Floats, Floats, pyproj.CRS]:
    """Longitude and latitude of the nodes, from whatever system they are in."""
    names = str(topology.get("node_coordinates", "")).split()
    if len(names) != 2 or any(n not in dataset.variables for n in names):
        raise TargetError(
            f'{name}: the mesh names node_coordinates "{" ".join(names)}", expected two variables of the file'
        )
    first, second = (dataset.variables[n] for n in names)
    if "north" in str(first.attrs.get("units", "")) or first.attrs.get("standard_name") in (
        "latitude",
        "projection_y_coordinate",
    ):
        first, second = second, first
    x, y = (np.asarray(v.to_numpy(), dtype=np.float64) for v in (first, second))
    geographic = "degree" in str(first.attrs.get("units", "")) or first.attrs.get("standard_name") == "longitude"
    if geographic:
        return unwrapped(x), y, read_crs("EPSG:4326", "target.crs")
    if settings.crs is None:
        raise TargetError(
            f'{name}: nodes are in "{first.attrs.get("units", "no unit")}", not degrees; give target.crs, such as "EPSG:32626"'
        )
    crs = read_crs(settings.crs, "target.crs")
    lon, lat = to_degrees(x, y, crs)
    return unwrapped(lon), lat, read_crs("EPSG:4326", "target.crs")


def _faces(dataset: xr.Dataset, topology: dict[str, object], nodes: int, name: str) -> Ints:
    """Nodes of each face from 0, −1 where a face has fewer."""
    key = str(topology.get("face_node_connectivity", ""))
    if key not in dataset.variables:
        raise TargetError(f'{name}: the mesh names face_node_connectivity "{key}", which the file does not have')
    variable = dataset.variables[key]
    if variable.ndim != 2:
        raise TargetError(f'{name}: "{key}" has dimensions {variable.dims}, expected faces and their nodes')
    values = np.asarray(variable.to_numpy(), dtype=np.float64)
    if variable.dims[0] != topology.get("face_dimension", variable.dims[0]):
        values = values.T
    fill = variable.attrs.get("_FillValue", variable.encoding.get("_FillValue"))
    missing = ~np.isfinite(values) if fill is None else ~np.isfinite(values) | (values == float(fill))
    faces = np.where(missing, -1, np.nan_to_num(values) - float(variable.attrs.get("start_index", 0))).astype(np.int64)
    wrong = (~missing) & ((faces < 0) | (faces >= nodes))
    if wrong.any():
        face, corner = np.argwhere(wrong)[0]
        raise TargetError(
            f"{name}: face {face} (counted from 0) has node {int(values[face, corner])}, expected one of {nodes} "
            f"from start_index {variable.attrs.get('start_index', 0)}"
        )
    if ((faces >= 0).sum(axis=1) < 3).any():
        face = int(np.argmax((faces >= 0).sum(axis=1) < 3))
        raise TargetError(f"{name}: face {face} (counted from 0) has fewer than 3 nodes")
    # Real nodes first, in their order: some files put the fill values before or between them.
    order = np.argsort(faces < 0, axis=1, kind="stable")
    return np.take_along_axis(faces, order, axis=1)


def _their_dimension(dataset: xr.Dataset, topology: dict[str, object], location: str) -> str:
    if location == "node":
        return str(dataset.variables[str(topology["node_coordinates"]).split()[0]].dims[0])
    dims = dataset.variables[str(topology["face_node_connectivity"])].dims
    return str(topology.get("face_dimension", dims[0]))


def _counter_clockwise(mesh: Mesh, name: str) -> Mesh:
    """Turn faces that are wound clockwise; refuse those without area."""
    lon, lat = mesh.node_longitude[mesh.padded], mesh.node_latitude[mesh.padded]
    lon, lat = lon - lon[:, :1], lat - lat[:, :1]
    area = (lon * np.roll(lat, -1, axis=1) - np.roll(lon, -1, axis=1) * lat).sum(axis=1)
    # Rounding in degrees leaves 1e-12 of a face's extent; less than a billionth of it is no area.
    empty = ~(np.abs(area) > 1e-9 * (np.ptp(lon, axis=1) ** 2 + np.ptp(lat, axis=1) ** 2))
    if empty.any():
        face = int(np.argmax(empty))
        raise TargetError(f"{name}: face {face} (counted from 0) has no area; check its nodes")
    if (area > 0.0).all():
        return mesh
    faces = mesh.faces.copy()
    for face in np.flatnonzero(area < 0.0).tolist():
        count = int((faces[face] >= 0).sum())
        faces[face, :count] = faces[face, :count][::-1]
    return Mesh(faces, mesh.node_longitude, mesh.node_latitude, mesh.location)


def _face_centres(mesh: Mesh) -> tuple[Floats, Floats]:
    """Mean of the corners of each face."""
    real = mesh.faces >= 0
    lon, lat = (np.where(real, x[mesh.padded], 0.0).sum(axis=1) for x in (mesh.node_longitude, mesh.node_latitude))
    return lon / mesh.corner_counts, lat / mesh.corner_counts
