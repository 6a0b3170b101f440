"""Further value columns share the weights of the values: each is kriged as if it stood alone."""

import numpy as np
import pytest

from texture.errors import StructureError
from texture.predict import Kriging
from texture.structure import Covariance, CovarianceSet, Structure

PAIR = CovarianceSet(
    [
        Covariance([Structure("exponential", 1.0, 300.0)], small_scale=0.1, noise=0.1, survey=0.3),
        Covariance([Structure("matern", 1.0, 200.0, 1.5)], small_scale=0.2, survey=0.1),
    ]
)


@pytest.mark.parametrize(
    ("settings", "drifted"),
    [
        ({"neighbours": 12}, False),
        ({"neighbours": 12}, True),
        ({"neighbours": 12, "drift": "local"}, True),
        ({"neighbours": 12, "neighbourhood": "nearest"}, True),
        ({"neighbours": 12, "mean": [0.5, -1.0]}, False),
        ({"neighbours": None}, True),
        ({"neighbours": 300, "at_least": 290}, True),  # too few in the second column: its mean serves
    ],
)
def test_each_column_as_if_it_stood_alone(settings, drifted):
    rng = np.random.default_rng(0)
    points, cells = rng.random((300, 2)) * 1000.0, rng.random((80, 2)) * 1200.0 - 100.0
    values, columns = rng.normal(size=(300, 2)), rng.normal(size=(300, 2, 3)) + np.array([1.0, 2.0, 3.0])
    values[:40, 1] = np.nan
    columns[:40, 1] = np.nan
    points[299] = points[298]  # exact in the second coordinate: averaged there, in every column
    given = {"survey": np.arange(300) // 2 % 5, "noise_variance": np.where(np.arange(300) < 150, 0.2, 0.0)}
    at = {}
    if drifted:
        given["drift"], at["drift"] = points[:, 0] / 500.0, cells[:, 0] / 500.0
    kriging = Kriging(PAIR, **settings).fit(points, values, **given, columns=columns)
    mean, variance, further = kriging.predict_columns(cells, **at)
    plain = Kriging(PAIR, **settings).fit(points, values, **given)
    assert further.shape == (80, 2, 3)
    assert mean == pytest.approx(plain.predict(cells, **at)[0], abs=1e-12)
    assert variance == pytest.approx(plain.predict(cells, **at)[1], abs=1e-12)
    for j in range(3):
        alone = Kriging(PAIR, **settings).fit(points, columns[:, :, j], **given).predict(cells, **at)
        assert further[:, :, j] == pytest.approx(alone[0], abs=1e-10)


def test_none_given():
    kriging = Kriging(PAIR[1]).fit(np.eye(3), [1.0, 2.0, 3.0], survey=[0, 0, 1])
    assert kriging.predict_columns(np.eye(3))[2].shape == (3, 1, 0)


def test_errors():
    points, values = np.eye(3), [[1.0], [np.nan], [3.0]]
    with pytest.raises(StructureError, match=r"columns: found shape \(3, 2\), expected \(3, 1, c\)"):
        Kriging(Covariance([], 1.0)).fit(points, values, columns=np.ones((3, 2)))
    with pytest.raises(StructureError, match="columns: row 2 is not finite where the station has a value"):
        Kriging(Covariance([], 1.0)).fit(points, values, columns=[[[1.0]], [[np.nan]], [[np.inf]]])
