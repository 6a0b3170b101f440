"""What averages out inside cells, against random pairs and the edges."""

import numpy as np
import pytest

from texture.structure.averaging import averaged_out, sampling_distance_m


@pytest.mark.parametrize("side", [100.0, 500.0, 5000.0])
def test_share_is_the_mean_variogram_of_random_pairs(side):
    a, b = np.random.default_rng(1).uniform(0, side, (2, 400_000, 2))
    h = np.minimum(np.hypot(*(a - b).T) / 1000.0, 1.0)
    assert averaged_out([side], 1000.0)[0] == pytest.approx((1.5 * h - 0.5 * h**3).mean(), abs=1e-3)


def test_edges():
    assert averaged_out([0.0, 1.0], 0.0).tolist() == [0.0, 1.0]  # without any range a point alone keeps it
    assert averaged_out([0.0, 1e9], 10.0) == pytest.approx([0.0, 1.0], abs=1e-5)
    assert sampling_distance_m(np.zeros((3, 2))) == 0.0
