"""Direction by likelihood: found where it is, none where there is none, the same numbers as stretching by hand."""

from __future__ import annotations

import numpy as np
import pytest

from texture.errors import StructureError
from texture.structure import Covariance, CovarianceSet, Structure


def field(seed: int, anisotropy, n: int = 200):
    rng = np.random.default_rng(seed)
    points = rng.uniform(0.0, 20_000.0, (n, 2))
    truth = Covariance([Structure("exponential", 1.0, 9_000.0)], small_scale=0.05, anisotropy=anisotropy)
    return points, np.linalg.cholesky(truth.matrix(points)) @ rng.normal(size=n)


def test_a_given_direction_is_stretching_by_hand():
    points, values = field(1, (30.0, 3.0))
    given = Covariance.fit(points, values, anisotropy=(30.0, 3.0))
    by_hand = Covariance([], small_scale=1.0, anisotropy=(30.0, 3.0)).metric(points)
    plain = Covariance.fit(by_hand, values)
    assert given.anisotropy == (30.0, 3.0)
    assert given.range_m == pytest.approx(plain.range_m, rel=2e-3)  # the range's weak prior sees another extent
    assert given.sill == pytest.approx(plain.sill, rel=2e-3)
    assert "azimuth 30°, ratio 3.00" in given.fit_record.notes[-1]


def test_direction_and_ratio_are_found():
    azimuth, ratio = [], []
    for seed in range(4):
        points, values = field(seed, (60.0, 3.0), 300)
        found = Covariance.fit(points, values, anisotropy="fit")
        assert found.anisotropy is not None
        azimuth.append(found.anisotropy[0])
        ratio.append(found.anisotropy[1])
    assert np.mean(azimuth) == pytest.approx(60.0, abs=10.0)
    assert 2.0 < np.exp(np.mean(np.log(ratio))) < 4.0
    warm = Covariance.fit(points, values, anisotropy="fit", start=found)  # inside folds
    assert warm.anisotropy[0] == pytest.approx(found.anisotropy[0], abs=5.0)
    assert warm.range_m == pytest.approx(found.range_m, rel=0.1)


def test_no_direction_is_found_where_there_is_none():
    found = [Covariance.fit(*field(seed, None, 120), anisotropy="fit").anisotropy for seed in range(6)]
    assert sum(a is not None for a in found) <= 1


def test_columns_share_direction_and_covariates_keep_their_range():
    points, first = field(3, (120.0, 4.0))
    depth = np.sin(points[:, :1] / 3_000.0)
    second = first + 2.0 * depth[:, 0]
    both = Covariance.fit(
        np.column_stack([points, depth]), np.column_stack([first, second]), anisotropy="fit", own_range_axes=(2,)
    )
    assert isinstance(both, CovarianceSet)
    assert both[0].anisotropy == both[1].anisotropy is not None
    assert both[0].anisotropy[0] == pytest.approx(120.0, abs=15.0)
    # The same covariance as that of points turned by hand, at constant area, with the covariate as it is.
    given = Covariance.fit(np.column_stack([points, depth]), first, anisotropy=(120.0, 4.0), own_range_axes=(2,))
    turned = Covariance([], small_scale=1.0, anisotropy=(120.0, 4.0)).metric(points) / 2.0
    by_hand = Covariance.fit(np.column_stack([turned, depth]), first, own_range_axes=(2,))
    np.testing.assert_allclose(
        given.matrix(np.column_stack([points, depth])), by_hand.matrix(np.column_stack([turned, depth])), rtol=1e-4
    )


def test_a_line_has_no_direction():
    with pytest.raises(StructureError, match="found 1 coordinates of place, expected the two of a plane"):
        Covariance.fit(np.arange(9.0)[:, None], np.arange(9.0), anisotropy="fit")
    with pytest.raises(StructureError, match='found "north", expected "fit"'):
        Covariance.fit(np.eye(3)[:, :2], np.arange(3.0), anisotropy="north")
