"""Read a `bed.nc` back, also one that was written through a names file."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from texture.bed.readiness import BedArrays
from texture.errors import BedError
from texture.output.names import Names, read_names
from texture.output.renaming import undo_names

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["bed_arrays", "open_bed"]


def open_bed(path: str | Path, names: Names | str | Path | None = None) -> xr.Dataset:
    """Open a bed with our own names and units, layers from the top.

    Parameters
    ----------
    path : path
    names : Names or path, optional
        The names file that the bed was written through.

    Returns
    -------
    xarray.Dataset
        In memory; the file is closed again.

    Raises
    ------
    BedError
        If the file is missing, no NetCDF, or holds no class fractions under these names.
    """
    import xarray as xr

    path = Path(path)
    if not path.is_file():
        raise BedError(f"{path}: no such file; expected a bed.nc")
    if isinstance(names, str | Path):
        names = read_names(Path(names))
    try:
        with xr.open_dataset(path, engine="netcdf4", decode_coords="all") as opened:
            dataset = opened.load()
    except (OSError, ValueError) as error:
        raise BedError(f"{path.name}: cannot be read as NetCDF ({error})") from error
    if names is not None:
        dataset = undo_names(dataset, names)
    if "class_fraction" not in dataset:
        known = ", ".join(str(name) for name in list(dataset.data_vars)[:6])
        raise BedError(
            f"{path.name}: has no variable class_fraction, found {known}; expected a bed of ours, or give the names "
            "file that it was written through"
        )
    return dataset


def bed_arrays(dataset: xr.Dataset) -> BedArrays:
    """Take the arrays that `texture.bed.readiness.check_bed` looks at out of an opened bed.

    Raises
    ------
    BedError
        If the class fractions do not lie on classes, layers and one or two dimensions of cells.
    """
    fraction = dataset["class_fraction"]
    cells = [str(d) for d in fraction.dims if d not in ("class", "layer")]
    if not 1 <= len(cells) <= 2 or fraction.ndim != len(cells) + 2:
        raise BedError(
            f"class_fraction lies on ({', '.join(map(str, fraction.dims))}), expected class, layer and one or two "
            "dimensions of cells"
        )

    def take(name: str, *leading: str) -> Any:
        if name not in dataset:
            return None
        return dataset[name].transpose(*leading, *(cells if leading != ("class",) else ())).values

    names = dataset["class_name"].values if "class_name" in dataset else np.arange(1, dataset.sizes["class"] + 1)
    water = take("water")
    return BedArrays(
        names=tuple(str(name) for name in names),
        class_fraction=take("class_fraction", "class", "layer"),
        water=None if water is None else water == 1,
        erodible_thickness=take("erodible_thickness", "layer"),
        dry_density=take("dry_density", "layer"),
        porosity=take("porosity", "layer"),
        class_mass_content=take("class_mass_content", "class", "layer"),
        evidence=take("evidence", "layer"),
        rim_weight=take("rim_weight"),
        diameter_m=take("grain_diameter", "class"),
        settling_velocity_m_s=take("settling_velocity", "class"),
        critical_stress_pa=take("critical_stress", "class"),
        pairs=_mesh_pairs(dataset, cells[0]) if len(cells) == 1 else None,
    )


def _mesh_pairs(dataset: xr.Dataset, cell: str) -> Any:
    """Neighbours on a UGRID mesh: faces that share a side, or nodes that a side joins; None without a mesh."""
    found = [v for v in dataset.variables.values() if v.attrs.get("cf_role") == "face_node_connectivity"]
    if not found:
        return None
    faces = np.nan_to_num(found[0].values, nan=-1.0).astype(np.int64) - int(found[0].attrs.get("start_index", 0))
    sides = _sides(faces)
    if found[0].dims[0] != cell:
        return np.unique(sides[:, :2], axis=0)
    order = np.lexsort((sides[:, 1], sides[:, 0]))
    ordered = sides[order]
    same = (ordered[1:, :2] == ordered[:-1, :2]).all(axis=1)
    return np.column_stack([ordered[:-1, 2][same], ordered[1:, 2][same]])


def _sides(faces: Any) -> Any:
    """Every side of every face, shape (sides, 3): its two nodes, the smaller first, and the face."""
    count = (faces >= 0).sum(axis=1)
    sides = []
    for k in range(faces.shape[1]):
        some = np.flatnonzero(count > k)
        ends = np.column_stack([faces[some, k], faces[some, (k + 1) % count[some]]])
        sides.append(np.column_stack([np.sort(ends, axis=1), some]))
    return np.concatenate(sides)
