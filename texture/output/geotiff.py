"""GeoTIFF maps: one file for each part and statistic, in the cloud-optimised layout."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from texture.errors import OutputError
from texture.output.texture_nc import QUANTILES, MapArrays

if TYPE_CHECKING:
    import pyproj

    from texture.targets import Target

__all__ = ["PixelGrid", "pixel_grid", "write_geotiff", "write_geotiffs"]

NODATA = -9999.0
MOST_PIXELS = 400_000_000
"""A larger image is taken for a mistyped cell size; 1.6 GB in each file before compression."""


@dataclass(frozen=True, eq=False)
class PixelGrid:
    """Where the pixels of an image lie, and which cell each one shows.

    Attributes
    ----------
    cell : int array, shape (rows, columns)
        Index of the cell, −1 outside the grid. Rows run north to south.
    transform : tuple of 6 floats
        Affine: pixel (column, row) to x, y of the pixel's upper left corner.
    crs : pyproj.CRS
    note : str
        Empty for a raster target; else says that and how the image was resampled.
    """

    cell: NDArray[np.int32]
    transform: tuple[float, float, float, float, float, float]
    crs: pyproj.CRS
    note: str = ""


def pixel_grid(target: Target, cell_size_m: float | None = None, resample: bool = False) -> PixelGrid:
    """Lay pixels over a target: a raster's own cells, or a regular resample of a curvilinear grid.

    Parameters
    ----------
    target : Target
    cell_size_m : float, optional
        Pixel size of the resample; by default the side of a square of the median water cell's area, to two
        digits.
    resample : bool
        Resample a raster too, such as one in degrees for a map in metres.

    Returns
    -------
    PixelGrid
        A resampled pixel shows the cell that its centre lies in, in the UTM zone of the grid's middle (polar
        stereographic beyond 84°N and 80°S).

    Raises
    ------
    OutputError
        If the pixels are so small that the image has more than 4e8 of them.
    """
    if target.kind == "raster" and not resample:
        return _own_cells(target)
    return _resample(target, cell_size_m)


def _own_cells(target: Target) -> PixelGrid:
    assert target.x is not None  # a raster has its axes
    assert target.y is not None
    width = _step(target.x, target.y)
    height = _step(target.y, target.x)
    transform = (width, 0.0, float(target.x[0]) - width / 2.0, 0.0, -height, float(target.y.max()) + height / 2.0)
    cell = np.arange(target.n_cells, dtype=np.int32).reshape(target.shape)
    if target.y.size > 1 and target.y[0] < target.y[-1]:  # an image runs north to south, whatever the file does
        cell = cell[::-1]
    return PixelGrid(cell, transform, target.crs)


def _step(axis: NDArray[np.float64], other: NDArray[np.float64]) -> float:
    """Cell size along an axis; an axis of one cell has the other's, since cells are square."""
    longer = axis if axis.size > 1 else other
    return abs(float(longer[-1] - longer[0])) / (longer.size - 1) if longer.size > 1 else 1.0


def _resample(target: Target, cell_size_m: float | None) -> PixelGrid:
    import pyproj
    import shapely
    from rasterio.features import rasterize
    from rasterio.transform import Affine

    assert target.corners is not None  # points have no image
    size = cell_size_m or _round_size(float(np.sqrt(np.median(target.area_m2[target.active]))))
    crs = _metric_crs(target)
    x, y = pyproj.Transformer.from_crs(4326, crs, always_xy=True).transform(*target.corners)
    located = np.flatnonzero(np.isfinite(x).all(axis=1) & np.isfinite(y).all(axis=1))
    x, y = x[located], y[located]
    # Edges at whole multiples of the size: two grids resampled alike lie on each other.
    west, north = np.floor(x.min() / size) * size, np.ceil(y.max() / size) * size
    columns, rows = (
        round((np.ceil(x.max() / size) * size - west) / size),
        round((north - np.floor(y.min() / size) * size) / size),
    )
    if columns * rows > MOST_PIXELS:
        raise OutputError(
            f"GeoTIFF of {target.name}: {rows:,} × {columns:,} pixels of {size:g} m are too many; "
            "give a larger outputs.geotiff_cell_size_m"
        )
    transform = Affine(size, 0.0, west, 0.0, -size, north)
    cells = shapely.polygons(np.stack([x, y], axis=-1))
    shapes = zip(cells, (target.cell_of_piece[located] + 1).tolist(), strict=True)
    number = rasterize(shapes, out_shape=(rows, columns), transform=transform, fill=0, dtype="int32")
    note = f"resampled from a curvilinear grid: each pixel of {size:g} m shows the cell that its centre lies in"
    return PixelGrid(number - 1, tuple(transform)[:6], crs, note)


def _round_size(size: float) -> float:
    """Two significant digits: nobody wants pixels of 573.2914 m."""
    return float(f"{size:.2g}")


def _metric_crs(target: Target) -> pyproj.CRS:
    import pyproj

    latitude = float(np.nanmean(target.latitude[target.active]))
    angle = np.radians(target.longitude[target.active])
    longitude = float(np.degrees(np.arctan2(np.nanmean(np.sin(angle)), np.nanmean(np.cos(angle)))))
    if latitude > 84.0 or latitude < -80.0:
        return pyproj.CRS.from_epsg(3995 if latitude > 0.0 else 3031)
    zone = int((longitude + 180.0) // 6.0) % 60 + 1
    return pyproj.CRS.from_epsg((32600 if latitude >= 0.0 else 32700) + zone)


def write_geotiff(
    path: Path,
    grid: PixelGrid,
    values: NDArray[Any],
    description: str,
    *,
    units: str = "",
    colours: Mapping[int, tuple[int, int, int]] | None = None,
    names: Mapping[int, str] | None = None,
) -> None:
    """Write one image: tiled, deflated, with overviews, its description in the band.

    Parameters
    ----------
    path : path
    grid : PixelGrid
    values : array, shape (n,)
        On the target's cells. Floats are stored as float32 with −9999 where NaN; integers as uint8 with 0
        for no data.
    description : str
    units : str
    colours : mapping, optional
        Red, green, blue of each value of an integer image.
    names : mapping, optional
        Words for each value of an integer image, kept as tags `value_<n>`.

    Raises
    ------
    OutputError
        If the file cannot be written.
    """
    import rasterio
    from rasterio.transform import Affine

    whole = values.dtype.kind in "iu"
    nodata: float = 0 if whole else NODATA
    image = np.where(grid.cell >= 0, values[grid.cell], nodata if whole else np.nan)
    image = image.astype(np.uint8) if whole else np.where(np.isnan(image), nodata, image).astype(np.float32)
    tags = {f"value_{value}": word for value, word in (names or {}).items()}
    profile = {
        "driver": "COG",
        "height": image.shape[0],
        "width": image.shape[1],
        "count": 1,
        "dtype": image.dtype,
        "crs": rasterio.crs.CRS.from_wkt(grid.crs.to_wkt()),
        "transform": Affine(*grid.transform),
        "nodata": nodata,
        "compress": "DEFLATE",
        "predictor": "STANDARD" if whole else "FLOATING_POINT",
        "blocksize": 256,
        "overviews": "AUTO",
        "overview_resampling": "NEAREST" if whole else "AVERAGE",
    }
    try:
        # By default GDAL may fill a twentieth of the machine's memory with tiles.
        with rasterio.Env(GDAL_CACHEMAX=64), rasterio.open(path, "w", **profile) as image_file:
            image_file.write(image, 1)
            image_file.set_band_description(1, f"{description} ({grid.note})" if grid.note else description)
            image_file.update_tags(**tags, **({"resampled": grid.note} if grid.note else {}))
            if units:
                image_file.set_band_unit(1, units)
            if colours:
                image_file.write_colormap(1, {value: (*colour, 255) for value, colour in colours.items()})
    except rasterio.errors.RasterioError as error:
        raise OutputError(f"{path.name}: cannot be written ({error}); is the disk full?") from error


def write_geotiffs(
    folder: Path,
    estimate: MapArrays,
    target: Target,
    parts: tuple[str, ...],
    class_words: Mapping[int, str],
    class_colours: Mapping[int, tuple[int, int, int]],
    cell_size_m: float | None = None,
) -> None:
    """Write the map's images: fractions, their quantiles, texture class and its probability, evidence.

    Parameters
    ----------
    folder : path
        Made if absent.
    estimate, target
        The map and its cells.
    parts : tuple of str
    class_words, class_colours : mappings from class number
        Words and our own colours.
    cell_size_m : float, optional
        Of the resample of a curvilinear grid.
    """
    from texture.bed.bed import EVIDENCE

    folder.mkdir(parents=True, exist_ok=True)
    grid = pixel_grid(target, cell_size_m)
    for i, part in enumerate(parts):
        write_geotiff(
            folder / f"{part}_fraction.tif", grid, estimate.fractions[:, i], f"expected fraction of {part}", units="1"
        )
        for q, values in zip(QUANTILES, estimate.quantiles[..., i], strict=True):
            if np.isfinite(values).any():
                name = f"{part}_fraction_q{round(100 * q):02d}.tif"
                write_geotiff(folder / name, grid, values, f"quantile {q:g} of the fraction of {part}", units="1")
    write_geotiff(
        folder / "texture_class.tif", grid, estimate.texture_class, "most probable texture class",
        colours=class_colours, names=class_words,
    )  # fmt: skip
    write_geotiff(
        folder / "texture_class_probability.tif", grid, estimate.class_probability,
        "probability of the most probable texture class", units="1",
    )  # fmt: skip
    write_geotiff(folder / "evidence.tif", grid, estimate.evidence, "what supports the map", names=EVIDENCE)
