"""Coordinate systems of targets."""

from __future__ import annotations

import numpy as np
import pyproj
from numpy.typing import NDArray

from texture.errors import TargetError

__all__ = ["beside", "read_crs", "to_degrees", "unwrapped"]

Floats = NDArray[np.float64]


def read_crs(text: str, key: str) -> pyproj.CRS:
    """Read a CRS from an EPSG code or WKT; `key` names the setting in the error."""
    try:
        return pyproj.CRS.from_user_input(text)
    except pyproj.exceptions.CRSError as error:
        raise TargetError(f'{key} = "{text}": not a known coordinate system; expected such as "EPSG:32633"') from error


def to_degrees(x: Floats, y: Floats, crs: pyproj.CRS) -> tuple[Floats, Floats]:
    """Longitude and latitude (WGS 84) of flat coordinates."""
    longitude, latitude = pyproj.Transformer.from_crs(crs, 4326, always_xy=True).transform(x, y)
    return np.asarray(longitude), np.asarray(latitude)


def beside(longitude: Floats, middle: float) -> Floats:
    """Longitudes by whole turns within half a turn of a middle.

    >>> beside(np.array([359.0, -181.0]), -10.0).tolist()
    [-1.0, -181.0]
    """
    return np.asarray(longitude - 360.0 * np.round((longitude - middle) / 360.0))


def unwrapped(longitude: Floats) -> Floats:
    """Make longitudes continuous around their middle, in -180…180 unless they cross the date line.

    Only whole turns are added, so that other values stay exact.

    >>> unwrapped(np.array([179.0, -179.0])).tolist()
    [179.0, 181.0]
    """
    angle = np.radians(longitude[np.isfinite(longitude)])
    middle = np.degrees(np.arctan2(np.sin(angle).mean(), np.cos(angle).mean()))
    return np.asarray(longitude + 360.0 * np.round((middle - longitude) / 360.0))
