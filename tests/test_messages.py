"""Words of messages that no other test raises: each names what was found, what was expected or what to do."""

from pathlib import Path

import numpy as np
import pytest
import shapely
import xarray as xr

from texture import Covariance, Kriging, LogRatio, Structure
from texture.bed import Water
from texture.composition import censoring_bounds, presence_forward
from texture.composition.cumulative import parts_from_weights
from texture.composition.presence_draws import Presence
from texture.composition.schemes import Scheme
from texture.errors import BedError, CompositionError, OutputError, RecipeError, StructureError, TargetError
from texture.output import ResultFolder
from texture.predict import make_method
from texture.recipe import Rim, TargetSettings
from texture.recipe.file import read_recipe
from texture.recipe.sensitivity import Vary
from texture.structure.covariance import CovarianceSet
from texture.structure.plane import Plane
from texture.structure.variogram import empirical_variogram, fit_variogram
from texture.targets import read_target
from texture.validation.folds import make_folds

POINTS = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0], [3.0, 1.0], [2.0, 5.0], [4.0, 4.0]]) * 1000.0
VALUES = np.array([1.0, 2.0, 0.5, 3.0, 2.5, 1.5])
MODEL = Covariance([Structure("exponential", 1.0, 2000.0)])
LON = {"units": "degrees_east", "standard_name": "longitude"}
LAT = {"units": "degrees_north", "standard_name": "latitude"}


def kriged(drift=None, values=VALUES, **settings):
    return Kriging(MODEL, **settings).fit(POINTS, values, drift=drift)


def alr():
    return LogRatio(("mud", "sand", "gravel"), kind="alr")


ARRAYS = {
    "dependent drift": (
        lambda: kriged(np.column_stack([POINTS[:, 0], 2.0 * POINTS[:, 0]])).predict(
            POINTS[:1], drift=np.column_stack([POINTS[:1, 0], 2.0 * POINTS[:1, 0]])
        ),
        StructureError,
        "drift: the columns are linearly dependent",
    ),
    "infinite value": (
        lambda: kriged(values=np.array([1.0, np.inf, 0.0, 0.0, 0.0, 0.0])),
        StructureError,
        "row 1 is infinite; give NaN where a value is unknown",
    ),
    "all stations within a radius": (
        lambda: Kriging(MODEL, neighbours=None, radius_m=10.0),
        StructureError,
        "neighbours=None uses all stations",
    ),
    "drift and a known mean": (
        lambda: kriged(POINTS[:, :1], mean=1.0),
        StructureError,
        "drift and a known mean exclude each other; leave out one",
    ),
    "no structures": (lambda: Covariance([1.0]), StructureError, "expected Structure objects"),
    "correlation": (
        lambda: CovarianceSet([MODEL, MODEL], [[1.0, 0.5], [0.2, 1.0]]),
        StructureError,
        "correlation: expected a symmetric matrix with ones on its diagonal",
    ),
    "record of a set": (
        lambda: CovarianceSet.from_dict({"covariance": []}),
        StructureError,
        "expected covariances and correlation",
    ),
    "estimator": (
        lambda: empirical_variogram(POINTS, VALUES, estimator="madogram"),
        StructureError,
        "expected matheron, cressie_hawkins or dowd",
    ),
    "weights": (
        lambda: fit_variogram(empirical_variogram(POINTS, VALUES), "exponential", weights="none"),
        StructureError,
        "expected pairs_over_square_distance, pairs or equal",
    ),
    "places of two lengths": (
        lambda: Plane.choose(np.zeros(3), np.zeros(4)),
        StructureError,
        "longitude and latitude: found shapes",
    ),
    "folds": (
        lambda: make_folds("leave", POINTS, 3, 1, targets=POINTS, block_m=1.0),
        StructureError,
        'folds "leave" are unknown; expected matched, random, blocks or each',
    ),
    "drift by name": (lambda: Kriging(MODEL, drift="somewhere"), StructureError, "expected global or local"),
    "feet": (
        lambda: Plane.choose(np.array([-77.0]), np.array([39.0]), "EPSG:2248"),
        StructureError,
        "expected metre; choose a projected CRS in metres",
    ),
    "no covariance": (
        lambda: make_method("kriging", None),
        RecipeError,
        "needs a covariance; fit one with Covariance.fit",
    ),
    "censored ilr": (
        lambda: censoring_bounds(LogRatio(("mud", "sand", "gravel"), kind="ilr"), [[0.5, 0.5, 0.0]]),
        CompositionError,
        "censoring works with kind 'tree' and 'alr', not with 'ilr'",
    ),
    "presence in alr": (
        lambda: presence_forward(alr(), [[0.5, 0.5, 0.0]]),
        CompositionError,
        "presence works with kind 'tree', not with 'alr'",
    ),
    "presence drawn in alr": (
        lambda: Presence(alr()),
        CompositionError,
        "presence works with kind 'tree', not with 'alr'",
    ),
    "within cells in ilr": (
        lambda: LogRatio(("mud", "sand", "gravel"), kind="ilr").quantiles(
            np.zeros((1, 2)), np.ones((1, 2)), [0.5], within=np.zeros((1, 2))
        ),
        CompositionError,
        "within = ... works with kind 'tree' and 'shares', not with 'ilr'",
    ),
    "falling cuts": (
        lambda: parts_from_weights([4.0, 0.0], np.array([[1.0]]), [2e-3, 63e-6]),
        CompositionError,
        "expected rising diameters",
    ),
    "basis of a tree": (
        lambda: LogRatio(("mud", "sand", "gravel"), kind="tree").log_basis,
        CompositionError,
        "has no linear basis, only ilr and alr have",
    ),
    "classes twice": (
        lambda: Scheme.from_table(
            {
                "title": "t",
                "source": "s",
                "parts": ["mud", "sand", "gravel"],
                "classes": [{"code": "a", "words": "a", "number": 1, "when": []}] * 2,
            }
        ),
        CompositionError,
        "expected codes and numbers (from 1) without repeats",
    ),
}


@pytest.mark.parametrize("name", ARRAYS)
def test_arrays_that_make_no_sense(name):
    call, error, words = ARRAYS[name]
    with pytest.raises(error) as raised:
        call()
    assert words in str(raised.value)


def grid(path, cells=("row", "column"), lon=None, lat=None, **variables):
    rows, columns = 4, 5
    lon = np.tile(np.linspace(-26.0, -25.6, columns), (rows, 1)) if lon is None else lon
    lat = np.tile(np.linspace(44.0, 44.3, rows)[:, None], (1, columns)) if lat is None else lat
    coords = {"lon": (cells[: lon.ndim], lon, LON), "lat": (cells[: lat.ndim], lat, LAT)}
    xr.Dataset(variables, coords=coords).to_netcdf(path)
    return path


SEA = {"standard_name": "sea_binary_mask"}
CELLS = ("row", "column")
GRIDS = {
    "two masks": (
        {"a": (CELLS, np.ones((4, 5)), SEA), "b": (CELLS, np.ones((4, 5)), SEA)},
        {},
        "several masks (a, b); choose one as target.mask",
    ),
    "depth on other cells": (
        {"h": (("station",), np.ones(3))},
        {"depth": "h"},
        "depth \"h\" is on ('station',), the grid on ('row', 'column')",
    ),
    "coordinates on other dimensions": (
        {"lon": np.linspace(-26.0, -25.6, 4)},
        {},
        "expected both one-dimensional, or both on the same two dimensions",
    ),
    "a single row": (
        {"cells": ("lat", "lon"), "lon": np.linspace(-26.0, -25.6, 5)[None, :], "lat": np.full((1, 5), 44.0)},
        {},
        "a grid of 1 × 5 cells needs its corners as CF bounds",
    ),
    "metres for degrees": (
        {"lon": np.tile(np.arange(5.0) * 1e5, (4, 1))},
        {},
        "expected degrees; name the variables under [target]",
    ),
}


@pytest.mark.parametrize("name", GRIDS)
def test_grids_that_cannot_be_read(tmp_path, name):
    variables, settings, words = GRIDS[name]
    with pytest.raises(TargetError) as raised:
        read_target(TargetSettings(file=grid(tmp_path / "g.nc", **variables), **settings))
    assert words in str(raised.value)


def test_an_image_that_is_turned(tmp_path):
    import rasterio
    from rasterio.transform import Affine

    turned = Affine(470.0, 171.0, 5e5, 171.0, -470.0, 4.9e6)
    with rasterio.open(
        tmp_path / "t.tif",
        "w",
        driver="GTiff",
        width=4,
        height=3,
        count=1,
        dtype="uint8",
        crs="EPSG:32626",
        transform=turned,
    ) as image:
        image.write(np.ones((1, 3, 4), dtype=np.uint8))
    with pytest.raises(
        TargetError, match=r"t.tif: its pixels are turned against its projection; expected an image with north up"
    ):
        read_target(TargetSettings(file=tmp_path / "t.tif"))


def test_land_and_places_of_the_wrong_kind(tmp_path):
    import geopandas

    points = geopandas.GeoDataFrame(geometry=[shapely.Point(0, 0)], crs=4326)
    points.to_file(tmp_path / "points.geojson")
    square = geopandas.GeoDataFrame(geometry=[shapely.box(0, 0, 1, 1)], crs=4326)
    square.to_file(tmp_path / "square.geojson")
    with pytest.raises(TargetError, match=r"points.geojson: holds no polygon; expected land as polygons"):
        read_target(TargetSettings(file=grid(tmp_path / "g.nc"), land=tmp_path / "points.geojson"))
    with pytest.raises(TargetError, match=r"square.geojson: holds no point; expected the places to fill as points"):
        read_target(TargetSettings(file=tmp_path / "square.geojson"))


def test_projected_grids_need_their_projection(tmp_path):
    axes = {
        "x": ("x", np.arange(5.0) * 500.0, {"standard_name": "projection_x_coordinate", "units": "m"}),
        "y": ("y", np.arange(4.0) * 500.0, {"standard_name": "projection_y_coordinate", "units": "m"}),
    }
    xr.Dataset({"a": (("y", "x"), np.ones((4, 5)))}, coords=axes).to_netcdf(tmp_path / "p.nc")
    with pytest.raises(TargetError, match=r"projection coordinates without a grid mapping; give target.crs, such as"):
        read_target(TargetSettings(file=tmp_path / "p.nc"))
    broken = xr.Dataset({"crs": ((), 0, {"grid_mapping_name": "no_such_mapping"})}, coords=axes)
    broken.to_netcdf(tmp_path / "q.nc")
    with pytest.raises(TargetError, match=r"cannot be read; give target.crs"):
        read_target(TargetSettings(file=tmp_path / "q.nc"))


@pytest.mark.parametrize(
    ("override", "words"),
    [
        (
            'quantities=[{ name = "d50", curve = "median_phi", unit = "mm" }]',
            'd50: a median in phi has unit "phi" and scale "plain"',
        ),
        ("method.neighbours", "expected key.path=value, such as method.neighbours=24"),
        ("target.crs=", "bounds need cell_size and crs beside them"),
        ("bed.land_fill={ mud = 0.5, sand_x = 0.5 }", 'unknown name "sand_x"; did you mean "sand"?'),
    ],
)
def test_recipes_that_contradict_themselves(small, override, words):
    with pytest.raises(RecipeError) as raised:
        read_recipe(small, [override])
    assert words in str(raised.value)


def test_a_fill_is_in_parts_or_in_classes(small):
    classes = (
        'bed.classes=[{ name = "fines", part = "mud", grain = { diameter_m = 2e-5 } }, '
        '{ name = "grit", part = "sand", grain = { diameter_m = 3e-4 } }, { name = "stones", part = "gravel", grain = { diameter_m = 5e-3 } }]'
    )
    rim = "rim.classes={ grit = 1.0 }"
    with pytest.raises(RecipeError, match="mixes parts and classes; give"):
        read_recipe(small, [classes, rim, "bed.land_fill={ mud = 0.5, grit = 0.5 }"])


def test_water_that_is_none():
    with pytest.raises(BedError, match=r"water: density = 3, expected 900 to 1300 kg m-3"):
        Water(density=3.0)


def test_a_result_that_appears_meanwhile_is_kept(tmp_path):
    def fill():
        with ResultFolder(tmp_path).filling() as aside:
            (aside / "bed.nc").write_text("ours")
            (tmp_path / "bed.nc").write_text("of another run")

    with pytest.raises(OutputError, match="appeared while the run was going on; kept, nothing written"):
        fill()
    assert (tmp_path / "bed.nc").read_text() == "of another run"


@pytest.mark.parametrize(
    ("override", "words"),
    [
        ({"what": "thickness", "values": [1.0], "classes": ["sand"]}, "is not of classes; leave out `classes`"),
        ({"what": "diameter", "factors": [1.0], "layers": [1]}, "is not of layers; leave out `layers`"),
        ({"what": "thickness", "range": [2.0, 1.0]}, "expected two numbers, the lower one first"),
        ({"what": "thickness", "values": [True]}, "expected numbers, or words for control, found True"),
    ],
)
def test_sensitivities_that_contradict_themselves(override, words):
    with pytest.raises(ValueError, match="1 validation error") as raised:
        Vary.model_validate(override)
    assert words in str(raised.value)


def test_openings_cannot_be_struck_from_a_drawing():
    with pytest.raises(ValueError, match="draw sides without them instead"):
        Rim(width_cells=3, sides=Path("sides.geojson"), leave_out=(1,), classes={"sand": 1.0})
