"""The demo on its grid, on a raster, on a mesh and on a list of places: one map, whatever it is drawn on."""

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from texture import build

pytestmark = pytest.mark.slow

# Stations on land move to the nearest cell, which is another on another target: kept where they are, all are the same.
# Shares have no limit to choose: two targets cannot choose two.
QUICK = {
    "validation": {"count": 2, "compare": []},
    "intake": {"on_land": "keep"},
    "composition": {"logratio": "shares"},
}
PARTS = ("mud", "sand", "gravel")


@pytest.fixture(scope="module")
def on(demo_recipe, tmp_path_factory):
    """Build the demo on another target; one point a cell, so that equal places must be equal."""

    def build_on(name, **target):
        none = dict.fromkeys(("file", "mask", "bounds", "cell_size", "crs"))
        folder = tmp_path_factory.mktemp(name)
        return build(
            demo_recipe, output=folder / "out", outputs={"names": None}, target={**none, "points_per_cell": 1, **target},
            **QUICK, **({"rim": None} if name == "places" else {}),
        )  # fmt: skip

    return build_on


@pytest.fixture(scope="module")
def grid(on, demo_recipe):
    return on("grid", file="model_grid.nc", mask="sea")


@pytest.fixture(scope="module")
def mesh(on):
    return on("mesh", file="model_mesh.nc", location="node")


def at_shared_places(a, b):
    """Fractions of two builds at places that both have, as rows of a and of b."""
    places = [np.round(np.column_stack([r.found.target.longitude, r.found.target.latitude]), 7) for r in (a, b)]
    index = {tuple(p): i for i, p in enumerate(places[0].tolist())}
    pairs = [(index[tuple(p)], i) for i, p in enumerate(places[1].tolist()) if tuple(p) in index]
    rows = np.array([(i, j) for i, j in pairs if a.found.target.active[i] and b.found.target.active[j]])
    return a.estimate.fractions[rows[:, 0]], b.estimate.fractions[rows[:, 1]]


def same_stations(a, b):
    return a.found.observations.count == b.found.observations.count


def test_mesh_nodes_and_places_equal_the_grid(on, grid, mesh):
    places = on("places", file="places.csv")
    for other, least in ((mesh, 900), (places, 40)):
        ours, theirs = at_shared_places(grid, other)
        assert len(ours) >= least
        assert same_stations(grid, other)
        np.testing.assert_array_equal(ours, theirs)


def test_raster_cell_centres_as_places_equal_the_raster(on, tmp_path):
    raster = on("raster", bounds=[520_000.0, 4_880_000.0, 540_000.0, 4_896_000.0], cell_size=1000.0, crs="EPSG:32626")
    target = raster.found.target
    rows = [f"{lon!r},{lat!r}" for lon, lat in zip(target.longitude.tolist(), target.latitude.tolist(), strict=True)]
    (tmp_path / "centres.csv").write_text("longitude,latitude\n" + "\n".join(rows) + "\n")
    places = on("places", file=str(tmp_path / "centres.csv"))
    wet = target.active & places.found.target.active
    assert wet.sum() > 250
    # The raster works in its own projection, the places in a plane around the stations: distances differ by parts in a
    # thousand, and with them the fit.
    np.testing.assert_allclose(raster.estimate.fractions[wet], places.estimate.fractions[wet], atol=0.02)


def test_mesh_files_pass_the_checker_and_open_as_meshes(on):
    result = on("faces", file="model_mesh.nc")
    out = result.found.recipe.output
    checker = Path(sys.executable).parent / "ugrid-checker"
    for name in ("texture.nc", "bed.nc"):
        done = subprocess.run([checker, out / name], capture_output=True, text=True, check=False)
        assert "No problems found" in done.stdout, done.stdout
    import xugrid

    opened = xugrid.open_dataset(out / "texture.nc")
    assert opened.ugrid.grid.n_face == result.found.target.n_cells
    np.testing.assert_array_equal(opened["mud_fraction"].to_numpy(), result.estimate.fractions[:, 0])
    assert (result.bed.rim_weight[result.found.target.open_cells] == 1.0).all()
    np.testing.assert_allclose(result.bed.class_fraction.sum(axis=0), 1.0, atol=1e-12)
    from rio_cogeo import cog_validate

    for image in (out / "geotiff").glob("*.tif"):
        valid, errors, _ = cog_validate(image, strict=True)
        assert valid, (image.name, errors)


def test_places_are_a_cf_point_feature(on):
    result = on("places", file="places.csv")
    out = result.found.recipe.output
    assert not (out / "geotiff").exists()
    with xr.open_dataset(out / "texture.nc") as data:
        assert data.attrs["featureType"] == "point"
        assert data["mud_fraction"].dims == ("point",)
        np.testing.assert_allclose(sum(data[f"{p}_fraction"] for p in PARTS), 1.0, atol=1e-12)
