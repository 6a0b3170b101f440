"""The invented place: its frame, coast, depth and rock.

Everything is drawn in a local frame in kilometres, `s` along the coast (roughly east) and `t` across
it (roughly north), so that the coast can be written as a curve t(s). The frame lies in UTM zone 26N,
in the middle of an ocean where there is no land.
"""

from functools import cache
from typing import Final

import numpy as np
import shapely
from numpy.typing import ArrayLike, NDArray
from pyproj import Transformer
from scipy.spatial import cKDTree

from demo_samples.kestrel_bight.make.fields import RandomField

Array = NDArray[np.float64]

UTM: Final = "EPSG:32626"
ORIGIN_EASTING_M: Final = 540_000.0
ORIGIN_NORTHING_M: Final = 4_900_000.0
ROTATION_DEG: Final = 6.0  # of the s axis, anticlockwise from grid east
RIVER_MOUTH_KM: Final = (-8.0, 17.0)
HEADLAND_KM: Final = (16.0, 6.5)
ISLAND_KM: Final = (-21.0, 1.5)

_COS, _SIN = np.cos(np.deg2rad(ROTATION_DEG)), np.sin(np.deg2rad(ROTATION_DEG))
_UNDULATION = RandomField(seed=101, range_km=7.0)
_ROUGH_ROCK = RandomField(seed=102, range_km=2.0)


@cache
def _transformer(source: str, target: str) -> Transformer:
    return Transformer.from_crs(source, target, always_xy=True)


def to_frame(longitude: ArrayLike, latitude: ArrayLike) -> tuple[Array, Array]:
    """Turn degrees (WGS 84) into the local frame, km."""
    return utm_to_frame(*_transformer("EPSG:4326", UTM).transform(longitude, latitude))


def utm_to_frame(easting: ArrayLike, northing: ArrayLike) -> tuple[Array, Array]:
    """Turn easting and northing in metres into the local frame, km."""
    x = (np.asarray(easting, dtype=float) - ORIGIN_EASTING_M) / 1000.0
    y = (np.asarray(northing, dtype=float) - ORIGIN_NORTHING_M) / 1000.0
    return _COS * x + _SIN * y, _COS * y - _SIN * x


def to_utm(s_km: ArrayLike, t_km: ArrayLike) -> tuple[Array, Array]:
    """Turn the local frame, km, into easting and northing in metres."""
    s, t = np.asarray(s_km, dtype=float), np.asarray(t_km, dtype=float)
    easting = ORIGIN_EASTING_M + 1000.0 * (_COS * s - _SIN * t)
    northing = ORIGIN_NORTHING_M + 1000.0 * (_SIN * s + _COS * t)
    return easting, northing


def to_degrees(s_km: ArrayLike, t_km: ArrayLike) -> tuple[Array, Array]:
    """Turn the local frame, km, into longitude and latitude (WGS 84)."""
    longitude, latitude = _transformer(UTM, "EPSG:4326").transform(*to_utm(s_km, t_km))
    return np.asarray(longitude), np.asarray(latitude)


def hump(s_km: Array, t_km: Array, centre: tuple[float, float], half_km: tuple[float, float], turn_deg: float) -> Array:
    """Gaussian hump of height 1: `half_km` are its e-folding half lengths along and across `turn_deg`."""
    c, n = np.cos(np.deg2rad(turn_deg)), np.sin(np.deg2rad(turn_deg))
    ds, dt = s_km - centre[0], t_km - centre[1]
    return np.exp(-(((c * ds + n * dt) / half_km[0]) ** 2) - ((c * dt - n * ds) / half_km[1]) ** 2)


@cache
def land() -> shapely.MultiPolygon:
    """Mainland (with the river cut into it) and island, in the local frame."""
    s = np.arange(-60.0, 60.01, 0.1)
    coast = (
        13.0
        + 4.5 * np.exp(-(((s + 8.0) / 9.0) ** 2))  # the bight
        - 7.0 * np.exp(-(((s - 16.0) / 3.4) ** 2))  # the headland
        + 0.6 * np.sin(s / 3.1 + 0.6)
        + 0.22 * np.sin(s / 0.93 + 1.9)
    )
    mainland = shapely.Polygon(np.column_stack([np.append(s, [60.0, -60.0]), np.append(coast, [60.0, 60.0])]))
    up = np.arange(12.0, 28.01, 0.1)
    middle = RIVER_MOUTH_KM[0] + 0.6 * np.sin((up - 17.0) / 1.7)
    half_width = 0.5 + 0.9 * np.exp(-(up - 16.0) / 1.0 * (up > 16.0))
    banks = np.column_stack([np.append(middle - half_width, (middle + half_width)[::-1]), np.append(up, up[::-1])])
    mainland = mainland.difference(shapely.Polygon(banks))
    if mainland.geom_type != "Polygon":  # slivers the river cut off a bank
        mainland = max(mainland.geoms, key=lambda part: part.area)
    angle = np.linspace(0.0, 2.0 * np.pi, 181)[:-1]
    radius = 1.0 + 0.16 * np.sin(3.0 * angle + 0.4) + 0.07 * np.sin(7.0 * angle)
    ring = np.column_stack([ISLAND_KM[0] + 2.7 * radius * np.cos(angle), ISLAND_KM[1] + 1.5 * radius * np.sin(angle)])
    return shapely.MultiPolygon([mainland, shapely.Polygon(ring)])


@cache
def _shore() -> cKDTree:
    line = shapely.segmentize(land().boundary, 0.03)
    points = shapely.get_coordinates(line)
    return cKDTree(points[(points[:, 1] < 30.0) & (np.abs(points[:, 0]) < 59.0)])


def on_land(s_km: Array, t_km: Array) -> NDArray[np.bool_]:
    """Whether each point lies inside the mainland or the island."""
    shapely.prepare(land())
    return shapely.contains_xy(land(), s_km, t_km)


def shore_distance_km(s_km: Array, t_km: Array) -> Array:
    """Straight-line distance to the nearest shore, island included, km."""
    return _shore().query(np.column_stack([np.ravel(s_km), np.ravel(t_km)]))[0].reshape(np.shape(s_km))


def shoals(s_km: Array, t_km: Array) -> Array:
    """The two offshore sand shoals, 1 on their crests."""
    return np.maximum(
        hump(s_km, t_km, (-9.0, -11.5), (6.0, 1.7), 22.0), hump(s_km, t_km, (7.0, -14.0), (5.0, 1.9), 28.0)
    )


def reef(s_km: Array, t_km: Array) -> Array:
    """The reef off the headland, 1 on its crest."""
    return hump(s_km, t_km, (22.0, -3.5), (4.6, 1.9), -25.0)


def headland(s_km: Array, t_km: Array) -> Array:
    """How much of the headland's swift, stony ground a point has."""
    return hump(s_km, t_km, HEADLAND_KM, (6.5, 5.0), 0.0)


def frame_depth_m(s_km: Array, t_km: Array) -> Array:
    """Depth below mean sea level, m, positive down; meaningful in water only."""
    away = shore_distance_km(s_km, t_km)
    depth = 2.0 + 50.0 * (1.0 - np.exp(-away / 11.0)) + 1.0 * away
    depth *= 1.0 + 0.05 * _UNDULATION(s_km, t_km)
    depth *= 1.0 - 0.50 * shoals(s_km, t_km)
    depth -= 14.0 * reef(s_km, t_km)
    river = np.clip((t_km - 16.5) / 1.5, 0.0, 1.0) * (np.abs(s_km - RIVER_MOUTH_KM[0]) < 3.0)
    return np.maximum(depth * (1.0 - river) + 4.0 * river, 1.5)


def frame_bare_rock(s_km: Array, t_km: Array) -> NDArray[np.bool_]:
    """Whether the bed is bare rock: the reef, and ledges off the headland."""
    ledges = 0.75 * hump(s_km, t_km, (16.2, 5.2), (2.6, 1.4), 0.0)
    stony = np.maximum(reef(s_km, t_km), ledges)
    return stony * (1.0 + 0.3 * _ROUGH_ROCK(s_km, t_km)) > 0.5
