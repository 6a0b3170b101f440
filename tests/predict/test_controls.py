import numpy as np
import pytest

from texture.errors import RecipeError, StructureError
from texture.predict import (
    METHODS,
    InverseDistance,
    Nearest,
    Triangulation,
    TunedInverseDistance,
    WholeMean,
    make_method,
)
from texture.structure import Covariance, Structure

# Cells of meuse.grid, ln(zinc): x, y, inverse square distance over all samples, nearest sample (R gstat 2.1).
MEUSE = np.array(
    [
        [181220, 333460, 5.9472404, 5.5490761], [180860, 332900, 5.7525201, 5.3936275],
        [180580, 332420, 6.1722283, 6.3438804], [180220, 332100, 6.1200394, 6.6147256],
        [179900, 331820, 5.7307291, 4.9344739], [180180, 331540, 5.5727166, 5.4026774],
        [180340, 331260, 5.1932094, 4.7273878], [180020, 330980, 5.318247, 4.8598124],
        [180180, 330740, 5.4608955, 5.2574954], [179140, 330500, 5.8553933, 5.3278762],
        [178700, 330300, 5.9826684, 5.805135], [179260, 330100, 5.4297272, 5.241747],
    ]
)  # fmt: skip


def test_meuse(meuse):
    cells = MEUSE[:, :2]
    idw = InverseDistance(2.0, neighbours=None).fit(meuse.points, meuse.log_zinc).predict(cells)
    assert idw[0][:, 0] == pytest.approx(MEUSE[:, 2], abs=1e-5)
    nearest = Nearest().fit(meuse.points, meuse.log_zinc).predict(cells)
    assert nearest[0][:, 0] == pytest.approx(MEUSE[:, 3], abs=1e-5)
    assert np.isnan(idw[1]).all()
    assert np.isnan(nearest[1]).all()


def test_leave_one_out_order_on_meuse(meuse):
    # R gstat: nearest neighbour RMSE .565466, mean .724221 (kriging .391749): kriging < nearest < mean.
    def rmse(method):
        error = []
        for i in range(155):
            rest = np.arange(155) != i
            error.append(method.fit(meuse.points[rest], meuse.log_zinc[rest]).predict(meuse.points[[i]])[0][0, 0])
        return np.sqrt(np.mean((np.array(error) - meuse.log_zinc) ** 2))

    assert rmse(Nearest()) == pytest.approx(0.565466, abs=1e-5)
    assert rmse(WholeMean()) == pytest.approx(0.724221, abs=1e-5)


@pytest.mark.parametrize("make", [Nearest, Triangulation, InverseDistance, TunedInverseDistance, WholeMean])
def test_unknown_values_and_batches(make):
    rng = np.random.default_rng(1)
    points, z, cells = rng.random((50, 2)), rng.normal(size=(50, 2)), rng.random((30, 2))
    z[::2, 1] = np.nan
    together = make().fit(points, z).predict(cells)[0]
    alone = make().fit(points[1::2], z[1::2, 1]).predict(cells)[0]
    assert np.array_equal(together[:, [1]], alone)
    assert np.array_equal(make().fit(points, z).predict(cells[3:4])[0], together[3:4])


def test_inverse_distance_at_stations():
    points = [[0.0, 0.0], [0.0, 0.0], [1.0, 0.0], [1e-200, 5.0]]
    k = InverseDistance().fit(points, [1.0, 3.0, 7.0, 9.0])
    assert k.predict([[0.0, 0.0], [1.0, 0.0], [1.0, 1e-180]])[0][:, 0].tolist() == [2.0, 7.0, 7.0]


def test_the_table_makes_all_methods():
    c = Covariance([Structure("exponential", 1.0, 10.0)])
    points = np.random.default_rng(0).uniform(0, 10, (20, 2))
    for name in METHODS:
        settings = {"weights": {"nearest": 0.5, "kriging": 0.5}} if name == "average" else {}
        k = make_method(name, c, **settings).fit(points, points[:, 0])
        assert np.isfinite(k.predict([[1.0, 1.0]])[0]).all()


@pytest.mark.parametrize(
    ("call", "error", "message"),
    [
        (lambda: make_method("krigging"), RecipeError, "found 'krigging', expected one of mean, nearest"),
        (lambda: make_method("kriging"), RecipeError, "needs a covariance"),
        (lambda: Nearest().predict([[0.0]]), StructureError, "call fit before predict"),
        (lambda: InverseDistance(0.0), StructureError, "power: found 0.0"),
        (lambda: InverseDistance(neighbours=0), StructureError, "neighbours: found 0"),
    ],
)
def test_errors(call, error, message):
    with pytest.raises(error, match=message):
        call()
