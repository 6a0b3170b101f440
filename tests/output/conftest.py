"""Targets, a bed and a map on them, small enough to check cell by cell."""

from types import SimpleNamespace

import numpy as np
import pyproj
import pytest

from texture.bed import make_bed
from texture.recipe import Recipe
from texture.targets import Target
from texture.targets.corners import OwnCorners
from texture.targets.structured import Structured

ROWS, COLUMNS = 9, 14  # neither square nor symmetric
SIZE = 250.0
WEST, NORTH = 500_000.0, 5_400_000.0


def mask():
    active = np.ones((ROWS, COLUMNS), dtype=bool)
    active[:2, :9] = False  # land in the north-west only
    active[4, 5] = False  # an island
    return active


def make_raster():
    x, y = WEST + (np.arange(COLUMNS) + 0.5) * SIZE, NORTH - (np.arange(ROWS) + 0.5) * SIZE
    to_degrees = pyproj.Transformer.from_crs(32633, 4326, always_xy=True)

    def degrees(dx, dy):
        lon, lat = to_degrees.transform(*np.meshgrid(x + dx * SIZE / 2, y + dy * SIZE / 2))
        return lon.ravel(), lat.ravel()

    corners = [degrees(dx, dy) for dx, dy in [(-1, -1), (1, -1), (1, 1), (-1, 1)]]
    longitude, latitude = degrees(0, 0)
    return Target(
        kind="raster", name="little raster", dims=("y", "x"), shape=(ROWS, COLUMNS), crs=pyproj.CRS.from_epsg(32633),
        longitude=longitude, latitude=latitude,
        corners=OwnCorners(np.stack([c[0] for c in corners], axis=1), np.stack([c[1] for c in corners], axis=1)),
        active=mask().ravel(), topology=Structured((ROWS, COLUMNS)), x=x, y=y,
    )  # fmt: skip


def make_curvilinear(angle_deg=25.0):
    """The same cells turned about the north-west corner, rows from south to north as models often have them."""
    to_degrees = pyproj.Transformer.from_crs(32633, 4326, always_xy=True)
    turn = np.radians(angle_deg)

    def degrees(column, row):
        u, v = np.meshgrid(column * SIZE, row * SIZE)
        lon, lat = to_degrees.transform(
            WEST + u * np.cos(turn) - v * np.sin(turn), NORTH + u * np.sin(turn) + v * np.cos(turn)
        )
        return lon, lat

    vertices = degrees(np.arange(COLUMNS + 1), np.arange(ROWS + 1))
    longitude, latitude = degrees(np.arange(COLUMNS) + 0.5, np.arange(ROWS) + 0.5)
    corners = tuple(
        np.stack([v[:-1, :-1], v[:-1, 1:], v[1:, 1:], v[1:, :-1]], axis=-1).reshape(-1, 4) for v in vertices
    )
    return Target(
        kind="curvilinear", name="little_grid.nc", dims=("row", "column"), shape=(ROWS, COLUMNS),
        crs=pyproj.CRS.from_epsg(4326), longitude=longitude.ravel(), latitude=latitude.ravel(), corners=OwnCorners(*corners),
        active=mask()[::-1].ravel(), topology=Structured((ROWS, COLUMNS)),
    )  # fmt: skip


def make_recipe(**blocks):
    bed = {
        "layers": [{"thickness_m": 0.1}, {"thickness_m": 0.9, "fill": {"sand": 1.0}}],
        "classes": [
            {"name": "mud", "part": "mud", "grain": {"diameter_m": 20e-6},
             "erosion": {"critical_stress_pa": 0.1, "rate": 5e-5},
             "water_column": {"settling_velocity_m_s": 1e-4}},
            {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
            {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
        ],
    }  # fmt: skip
    return Recipe(
        **{
            "title": "Kestrel Bight, starting bed",
            "samples": [{"file": "survey_1987.csv"}],
            "target": {"bounds": [0, 0, 1000, 1000], "cell_size": 100, "crs": "EPSG:32633"},
            "bed": bed,
            "rim": {"sides": "open", "width_cells": 2, "composition": {"sand": 0.5, "gravel": 0.5}},
            **blocks,
        }
    )


def make_estimate(target, seed=3):
    """A map that differs in every cell, with the shape of `texture.estimate.Estimate`."""
    rng = np.random.default_rng(seed)
    n, wet = target.n_cells, target.active
    fractions = rng.dirichlet([2.0, 3.0, 1.0], n)
    quantiles = np.stack([fractions * f for f in (0.5, 0.9, 1.0)])
    mean, variance = rng.normal(size=(n, 2)), rng.uniform(0.1, 1.0, (n, 2))
    probability = rng.uniform(0.3, 1.0, n)
    for array in (fractions, mean, variance, probability):
        array[~wet] = np.nan
    quantiles[:, ~wet] = np.nan
    return SimpleNamespace(
        fractions=fractions,
        quantiles=quantiles,
        mean=mean,
        variance=variance,
        evidence=np.where(wet, rng.choice([1, 2, 6], n), 0).astype(np.int8),
        texture_class=np.where(wet, rng.integers(1, 4, n), 0).astype(np.int8),
        class_probability=probability,
        sample_distance_m=np.where(wet, rng.uniform(10.0, 3000.0, n), np.nan).astype(np.float32),
        expected_error=np.where(wet, rng.uniform(0.01, 0.3, n), np.nan).astype(np.float32),
    )


CLASS_WORDS = {1: "mud", 2: "sandy mud", 3: "gravelly sand"}
CLASS_COLOURS = {1: (90, 80, 70), 2: (150, 130, 90), 3: (230, 200, 120)}


@pytest.fixture(params=["raster", "curvilinear"])
def target(request):
    return make_raster() if request.param == "raster" else make_curvilinear()


@pytest.fixture
def recipe():
    return make_recipe()


@pytest.fixture
def estimate(target):
    return make_estimate(target)


@pytest.fixture
def bed(target, estimate, recipe):
    return make_bed(estimate.fractions, estimate.evidence, target, recipe.bed, recipe.rim)
