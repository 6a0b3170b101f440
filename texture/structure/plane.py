"""From longitude and latitude to metres: one plane for stations and targets, chosen from the data."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from texture.errors import StructureError

__all__ = ["LARGEST_PLANE_M", "Plane", "check_metres"]

Array = NDArray[np.float64]

# An azimuthal equidistant plane stretches lengths across the radius by 0.23 % at 750 km from its centre; beyond that
# the chord through the ellipsoid is the better distance (0.3 % short at 1,500 km).
LARGEST_PLANE_M = 1_500_000.0

_GEOGRAPHIC = "EPSG:4326"
_GEOCENTRIC = "EPSG:4978"


@lru_cache(maxsize=32)
def _transformer(source: str, target: str) -> Any:
    from pyproj import Transformer

    return Transformer.from_crs(source, target, always_xy=True)


def check_metres(points: ArrayLike) -> None:
    """Refuse plane coordinates that can only be degrees where metres are expected.

    Parameters
    ----------
    points : float array, shape (n, d)
        Looked at where d is 2 and n at least 2.

    Raises
    ------
    StructureError
        If all points lie within 360 and 90 of the origin and their middle is more than twice as far from it as they are
        spread. Numbers alone cannot prove degrees, and small coordinates are legitimate in metres (a local grid, a flume, a worked
        example): those surround their origin or touch it, while the degrees of a survey stand well off theirs.
        A region of degrees that is wide against its distance from 0° N 0° E passes; metres that are refused pass once their mean is
        taken away, which changes no result.

    Examples
    --------
    >>> check_metres([[0.0, 0.0], [10.0, 3.0]])
    """
    array = np.asarray(points, dtype=np.float64)
    if len(array) < 2 or array.shape[1] != 2:
        return
    low, high = array.min(axis=0), array.max(axis=0)
    if max(-low[0], high[0]) > 360.0 or max(-low[1], high[1]) > 90.0:
        return
    if np.linalg.norm(0.5 * (low + high)) > 2.0 * np.linalg.norm(high - low):
        raise StructureError(
            f"points: found x {low[0]:g} to {high[0]:g}, y {low[1]:g} to {high[1]:g}, which look like degrees, expected metres; "
            "convert them with Plane.choose, or take their mean away if they are metres"
        )


@dataclass(frozen=True)
class Plane:
    """A space in which plain distance is distance in metres.

    Parameters
    ----------
    kind : {"projected", "local", "chord"}
        The projected CRS that the data came in; an azimuthal equidistant plane centred on the data; or, for data
        that span more than 1,500 km, geocentric coordinates, where distance is the chord through the ellipsoid.
    crs : str
        Its definition, as pyproj reads it.

    Examples
    --------
    >>> plane = Plane.choose([3.0, 3.2], [55.0, 55.1])
    >>> plane.kind, plane.dimensions
    ('local', 2)
    >>> points = plane.to_metres([3.0, 3.2], [55.0, 55.1])
    >>> float(np.hypot(*(points[1] - points[0])).round(1))
    16950.9
    """

    kind: str
    crs: str

    @property
    def dimensions(self) -> int:
        """Coordinates of a point: 2, or 3 for chord distance."""
        return 3 if self.kind == "chord" else 2

    @classmethod
    def choose(cls, longitude: ArrayLike, latitude: ArrayLike, crs: Any = None) -> Plane:
        """Choose the space for data at given longitudes and latitudes (degrees, WGS 84).

        Parameters
        ----------
        longitude, latitude : float arrays, shape (n,)
        crs : anything pyproj reads, optional
            The CRS the work is done in. A projected one in metres is used as it is; a geographic one is as good as
            none.

        Raises
        ------
        StructureError
            Positions that are not finite or not on the globe; a projected CRS that is not in metres.
        """
        if crs is not None:
            from pyproj import CRS

            given = CRS.from_user_input(crs)
            if given.is_projected:
                units = {axis.unit_name for axis in given.axis_info[:2]}
                if units != {"metre"}:
                    raise StructureError(
                        f"CRS {given.name}: its unit is {' and '.join(sorted(units))}, expected metre; "
                        "choose a projected CRS in metres"
                    )
                return cls("projected", given.to_string())
        lon, lat = _check_degrees(longitude, latitude)
        # The mean of unit vectors is a centre that the date line and the poles do not disturb.
        phi, lam = np.radians(lat), np.radians(lon)
        vectors = np.column_stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)])
        low, high = vectors.min(axis=0), vectors.max(axis=0)
        x, y, z = 0.5 * (low + high)
        if float(np.linalg.norm(high - low)) * 6_371_000.0 > LARGEST_PLANE_M:
            return cls("chord", _GEOCENTRIC)
        # Rounded to a hundredth of a degree, so that a few stations more or less seldom move the plane.
        lon0, lat0 = (
            round(float(np.degrees(np.arctan2(y, x))), 2),
            round(float(np.degrees(np.arctan2(z, np.hypot(x, y)))), 2),
        )
        return cls("local", f"+proj=aeqd +lat_0={lat0} +lon_0={lon0} +datum=WGS84 +units=m +type=crs")

    def to_metres(self, x: ArrayLike, y: ArrayLike, crs: Any = _GEOGRAPHIC) -> Array:
        """Points in the plane, shape (n, 2) or (n, 3), from coordinates x before y (longitude first) in a CRS."""
        a, b = np.atleast_1d(np.asarray(x, dtype=np.float64)), np.atleast_1d(np.asarray(y, dtype=np.float64))
        source = _definition(crs)
        if source == _GEOGRAPHIC:
            a, b = _check_degrees(a, b)
        if self.kind == "chord":
            if source != _GEOGRAPHIC:
                a, b = _transformer(source, _GEOGRAPHIC).transform(a, b)
            result = np.column_stack(_transformer("EPSG:4979", _GEOCENTRIC).transform(a, b, np.zeros_like(a)))
        else:
            result = np.column_stack(_transformer(source, self.crs).transform(a, b))
        if not np.isfinite(result).all():
            row = int(np.argmax(~np.isfinite(result).all(axis=1)))
            raise StructureError(f"position {row} ({a[row]:g}, {b[row]:g}) cannot be expressed in {self.crs}")
        return np.ascontiguousarray(result)

    def to_degrees(self, points: ArrayLike) -> tuple[Array, Array]:
        """Longitude and latitude in degrees (WGS 84) of points (n, d) of the plane."""
        array = np.asarray(points, dtype=np.float64)
        if self.kind == "chord":
            lon, lat, _ = _transformer(_GEOCENTRIC, "EPSG:4979").transform(*array.T)
        else:
            lon, lat = _transformer(self.crs, _GEOGRAPHIC).transform(*array.T)
        return np.asarray(lon), np.asarray(lat)


def _definition(crs: Any) -> str:
    if isinstance(crs, str):
        return crs
    from pyproj import CRS

    return str(CRS.from_user_input(crs).to_string())


def _check_degrees(longitude: ArrayLike, latitude: ArrayLike) -> tuple[Array, Array]:
    lon, lat = np.asarray(longitude, dtype=np.float64), np.asarray(latitude, dtype=np.float64)
    if lon.shape != lat.shape or lon.ndim != 1 or len(lon) == 0:
        raise StructureError(f"longitude and latitude: found shapes {lon.shape} and {lat.shape}, expected (n,) twice")
    bad = ~(np.isfinite(lon) & np.isfinite(lat) & (np.abs(lat) <= 90.0) & (np.abs(lon) <= 360.0))
    if bad.any():
        row = int(np.argmax(bad))
        raise StructureError(
            f"position {row}: found longitude {lon[row]:g}, latitude {lat[row]:g}, expected degrees on the globe; "
            "if these are metres, give their CRS"
        )
    return lon, lat
