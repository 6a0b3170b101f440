"""The bed of a larger model at places of a smaller one that is nested in it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from texture.errors import BedError
from texture.output.open_bed import open_bed

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["parent_bed"]

Floats = NDArray[np.float64]

FARTHEST = 2.0
"""A place further from the parent's water than this many of its cells has no parent there."""


def parent_bed(
    path: Path, names: Path | None, classes: tuple[str, ...], layers: int, longitude: Floats, latitude: Floats
) -> Floats:
    """Class fractions of the parent's nearest water cell.

    Parameters
    ----------
    path : path
        A bed of ours.
    names : path or None
        Names file that it was written through.
    classes : tuple of str
        Names of the classes wanted; the parent has to have these and no others, in any order.
    layers : int
        Layers wanted. Below the parent's lowest, that one goes on.
    longitude, latitude : float arrays, shape (n,)

    Returns
    -------
    float array, shape (k, layers, n)

    Raises
    ------
    BedError
        If it is no bed, has other classes, no positions, or does not reach the places.
    """
    from scipy.spatial import KDTree

    dataset = open_bed(path, names)
    theirs = [str(name) for name in dataset["class_name"].values] if "class_name" in dataset else []
    if sorted(theirs) != sorted(classes):
        raise BedError(
            f"{path.name}: has the classes {', '.join(theirs) or 'without names'}; expected {', '.join(classes)}"
        )
    lon, lat = _places(dataset, path.name)
    fraction = dataset["class_fraction"]
    cells = [d for d in fraction.dims if d not in ("class", "layer")]
    values = fraction.transpose("class", "layer", *cells).values.reshape(len(theirs), fraction.sizes["layer"], -1)
    values = values[[theirs.index(name) for name in classes]]
    wet = np.isfinite(values).all(axis=(0, 1)) & np.isfinite(lon) & np.isfinite(lat)
    if "water" in dataset:
        wet &= dataset["water"].transpose(*cells).values.ravel() == 1
    if int(wet.sum()) < 2:
        raise BedError(f"{path.name}: has no two water cells with a bed")
    points = _on_sphere(lon[wet], lat[wet])
    tree = KDTree(points)
    spacing = float(np.median(tree.query(points, k=2)[0][:, 1]))
    distance, nearest = tree.query(_on_sphere(longitude, latitude))
    far = distance > FARTHEST * spacing
    if far.any():
        i = int(distance.argmax())
        raise BedError(
            f"{path.name}: {int(far.sum())} rim cells lie further than {FARTHEST:g} of its cells from its water, the farthest at "
            f"longitude {longitude[i]:.3f}, latitude {latitude[i]:.3f}; the parent has to cover the rim"
        )
    level = np.minimum(np.arange(layers), values.shape[1] - 1)
    taken = values[:, level][:, :, np.flatnonzero(wet)[nearest]].astype(np.float64)
    return np.asarray(taken / taken.sum(axis=0))


def _places(dataset: xr.Dataset, name: str) -> tuple[Floats, Floats]:
    """Longitude and latitude of every cell, flat; worked out for a raster in a projection of its own."""
    if "longitude" in dataset and "latitude" in dataset:
        return tuple(dataset[k].values.astype(np.float64).ravel() for k in ("longitude", "latitude"))  # type: ignore[return-value]
    if "x" in dataset and "y" in dataset and "crs" in dataset.variables:
        import pyproj

        crs = pyproj.CRS.from_cf(dataset["crs"].attrs)
        x, y = np.meshgrid(dataset["x"].values, dataset["y"].values)
        lon, lat = pyproj.Transformer.from_crs(crs, 4326, always_xy=True).transform(x.ravel(), y.ravel())
        return np.asarray(lon), np.asarray(lat)
    raise BedError(
        f"{name}: has no positions (longitude and latitude, or x and y with crs); the rim cannot be taken from it"
    )


def _on_sphere(longitude: Floats, latitude: Floats) -> Floats:
    lon, lat = np.radians(longitude), np.radians(latitude)
    return np.column_stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)])
