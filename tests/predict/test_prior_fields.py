"""Prior fields: their covariances are the models', by either method, and a member is the same however it is asked for."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from texture.predict.circulant import CirculantPrior, find_lattice
from texture.predict.draws import colour, place_normals
from texture.predict.spectra import density, radius_quantile
from texture.predict.spectral import SpectralPrior, _cos_sin
from texture.structure import Covariance, CovarianceSet, Structure

MODELS = [
    (Structure("exponential", 1.0, 300.0), 2),
    (Structure("matern", 1.0, 300.0, 0.8), 5),
    (Structure("gaussian", 1.0, 300.0), 3),
    (Structure("spherical", 1.0, 300.0), 3),
    (Structure("cubic", 1.0, 300.0), 3),
]


@pytest.mark.parametrize(("structure", "dimensions"), MODELS)
def test_quantiles_integrate_the_density(structure, dimensions):
    from scipy.integrate import quad

    surface = 2.0 * math.pi ** (dimensions / 2) / math.gamma(dimensions / 2)
    for share in (0.1, 0.5, 0.9):
        radius = float(radius_quantile(structure, dimensions, np.array(share)))
        found = quad(
            lambda w: surface * w ** (dimensions - 1) * float(density(structure, dimensions, np.array(w))), 0.0, radius,
            limit=500,
        )[0]  # fmt: skip
        # 5e-5: the spherical model's tail is closed with its asymptote.
        assert found == pytest.approx(share, abs=5e-5)


def test_exponential_in_the_plane_by_hand():
    """Its spectrum in the plane is a**2 / (2 pi (1 + (a w)**2)**1.5), with a share 1 - 1 / sqrt(1 + (a w)**2) below w."""
    structure = Structure("exponential", 1.0, 2.995732273553991)
    assert float(density(structure, 2, np.array(1.0))) == pytest.approx(1.0 / (2.0 * math.pi * 2.0**1.5))
    assert float(radius_quantile(structure, 2, np.array(1.0 - 1.0 / math.sqrt(2.0)))) == pytest.approx(1.0)


def test_cosines_and_sines_are_exact():
    turns = np.random.default_rng(2).uniform(-40.0, 40.0, 5000)
    cosine, sine = np.empty(5000), np.empty(5000)
    _cos_sin(turns, cosine, sine)
    # 1e-13: what 2 pi times 40 turns leaves numpy itself.
    np.testing.assert_allclose(cosine, np.cos(2.0 * np.pi * turns), atol=1e-13)
    np.testing.assert_allclose(sine, np.sin(2.0 * np.pi * turns), atol=1e-13)


def quadrature_error(structure: CovarianceSet, dimensions: int) -> np.ndarray:
    """Covariance that the frequencies stand for, less the model's, in sills; rms for each column."""
    prior = SpectralPrior(structure, dimensions)
    rng = np.random.default_rng(1)
    way = rng.normal(size=(500, dimensions))
    lag = way / np.linalg.norm(way, axis=1, keepdims=True) * rng.uniform(0.0, 600.0, (500, 1))
    errors = []
    for column, c in enumerate(structure):
        found = (prior.weight[column] ** 2 * np.cos(2.0 * np.pi * lag @ prior.frequency.T)).sum(axis=1)
        errors.append(np.sqrt(np.mean((found - c.matrix(np.zeros((1, dimensions)), lag)[0]) ** 2)) / c.sill)
    return np.array(errors)


@pytest.mark.parametrize(
    ("columns", "dimensions", "most"),
    [
        ([Covariance([Structure("exponential", 1.0, 300.0)])], 2, 0.006),
        ([Covariance([Structure("matern", 2.0, 300.0, 1.5)])], 2, 0.003),
        ([Covariance([Structure("spherical", 1.0, 300.0)])], 2, 0.01),
        ([Covariance([Structure("exponential", 1.0, 300.0)])], 4, 0.015),
        (
            [
                Covariance([Structure("spherical", 1.0, 300.0), Structure("exponential", 1.0, 30.0)]),
                Covariance([Structure("matern", 2.0, 200.0, 1.5)], anisotropy=(30.0, 3.0)),
            ],
            2,
            0.03,
        ),
        ([Covariance([Structure("matern", 1.0, 300.0, 1.5)], axis_scales=(1.0, 1.0, 30.0))], 3, 0.015),
    ],
)
def test_frequencies_stand_for_the_model(columns, dimensions, most):
    assert (quadrature_error(CovarianceSet(columns), dimensions) < most).all()


PAIR = CovarianceSet(
    [Covariance([Structure("exponential", 1.0, 200.0)]), Covariance([Structure("exponential", 2.0, 200.0)])],
    [[1.0, 0.6], [0.6, 1.0]],
)


def test_a_spectral_member_is_the_same_bits_alone():
    prior = SpectralPrior(PAIR, 2, seed=4, frequencies=256)
    points = np.random.default_rng(0).uniform(0.0, 1e5, (4501, 2))
    together = prior.at(points, range(1, 31))
    assert np.array_equal(prior.at(points[[4500, 7]], [29]), together[[4500, 7], :, 28:29])
    assert not np.array_equal(
        together[:, :, 0], SpectralPrior(PAIR, 2, seed=5, frequencies=256).at(points, [1])[:, :, 0]
    )


@pytest.fixture(scope="module")
def raster() -> np.ndarray:
    x, y = np.meshgrid(np.arange(20) * 20.0 + 7.0, np.arange(15) * 25.0 + 3.0)
    return np.column_stack([x.ravel(), y.ravel()])


def test_circulant_fields_have_the_models_covariance_at_nodes_and_stations(raster):
    rng = np.random.default_rng(3)
    structure = CovarianceSet(
        [Covariance([Structure("exponential", 1.0, 200.0)]), Covariance([Structure("matern", 2.0, 150.0, 1.5)], anisotropy=(30.0, 2.0))],
        [[1.0, 0.5], [0.5, 1.0]],
    )  # fmt: skip
    stations = np.vstack([rng.uniform(-60.0, 420.0, (12, 2)), raster[[5]], rng.uniform(200.0, 212.0, (4, 2))])
    lattice = find_lattice(raster[::-1], stations)
    prior = CirculantPrior.make(structure, lattice, stations)
    nodes, count = lattice.nodes_of(raster[::23]), 1500
    found = np.empty((2, len(stations) + len(nodes), 2 * count))
    for j in range(count):
        fields = prior.pair(j)
        for half in (0, 1):
            found[:, : len(stations), 2 * j + half] = prior.at_stations(fields[half], 2 * j + half + 1).T
            found[:, len(stations) :, 2 * j + half] = fields[half].reshape(2, -1)[:, nodes]
    np.testing.assert_array_equal(found[0, 12], found[0, 12])
    for v, c in enumerate(structure):
        model = c.matrix(np.vstack([stations, raster[::23]])) / c.sill
        error = found[v] @ found[v].T / (2 * count) / c.sill - model
        # Monte Carlo: an estimate from 3,000 members has the standard error sqrt((1 + rho**2) / 3000), 0.018 to 0.026.
        z = error / np.sqrt((1.0 + model**2) / (2 * count))
        assert 0.8 < z.std() < 1.2
        assert np.abs(z).max() < 5.0


def test_a_station_on_a_node_has_its_value(raster):
    stations = np.vstack([raster[[5, 200]], [[111.0, 77.0]]])
    lattice = find_lattice(raster, stations)
    prior = CirculantPrior.make(PAIR, lattice, stations)
    fields = prior.pair(0)[1]
    at = fields.reshape(2, -1)[:, lattice.nodes_of(raster[[5, 200]])].T
    np.testing.assert_array_equal(prior.at_stations(fields, 2)[:2], at)


def test_an_embedding_that_is_too_negative_is_refused(raster, monkeypatch):
    long = CovarianceSet([Covariance([Structure("gaussian", 1.0, 4000.0)])])
    assert CirculantPrior.make(long, find_lattice(raster, raster[:1]), raster[:1]) is not None
    monkeypatch.setattr("texture.predict.circulant.FREE_NODES", 1 << 12)
    assert CirculantPrior.make(long, find_lattice(raster, raster[:1]), raster[:1]) is None


def test_lattices_are_told_from_other_points(raster):
    holes = raster[np.random.default_rng(1).random(len(raster)) < 0.6]
    lattice = find_lattice(holes, np.array([[0.0, 0.0], [500.0, 300.0]]))
    assert lattice.step == pytest.approx((20.0, 25.0))
    j, i = np.divmod(lattice.nodes_of(holes), lattice.shape[1])
    np.testing.assert_allclose(np.column_stack([i, j]) * lattice.step + lattice.origin, holes, atol=1e-9)
    turned = holes @ np.array([[0.8, 0.6], [-0.6, 0.8]])
    assert find_lattice(turned, holes[:1]) is None
    assert find_lattice(holes, np.array([[1e7, 0.0]])) is None  # a station too far to reach with a raster
    assert find_lattice(np.column_stack([holes, holes[:, 0]]), holes[:1]) is None


@settings(max_examples=25, deadline=None)
@given(st.floats(-0.99, 0.99), st.floats(-0.99, 0.99), st.floats(-0.99, 0.99))
def test_colour_is_a_root_of_the_correlation(a, b, c):
    matrix = np.array([[1.0, a, b], [a, 1.0, c], [b, c, 1.0]])
    if np.linalg.eigvalsh(matrix).min() < 0.0:
        return
    root = colour(matrix)
    np.testing.assert_allclose(root @ root.T, matrix, atol=1e-12)
    assert np.allclose(np.triu(root, 1), 0.0)


def test_place_normals_belong_to_places():
    points = np.random.default_rng(0).uniform(0.0, 1e6, (20_000, 2))
    drawn = place_normals(points, 1, [1, 2], 2)
    assert np.array_equal(place_normals(points[77:79] + 2e-7, 1, [2], 2), drawn[77:79, :, 1:])
    flat = drawn.reshape(len(points), 4)
    # 20,000 draws: a mean, a variance and a correlation are known to 0.007, 0.01 and 0.007; four of those are allowed.
    assert np.abs(flat.mean(axis=0)).max() < 0.03
    assert np.abs(flat.var(axis=0) - 1.0).max() < 0.04
    assert np.abs(np.corrcoef(flat.T) - np.eye(4)).max() < 0.03
