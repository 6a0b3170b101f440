import numpy as np
import pytest

from texture.bed.land import nearest_water
from texture.errors import BedError


def test_water_keeps_itself_and_land_takes_its_shore(target_of):
    target = target_of([[1, 1, 0, 0, 1, 1]])
    assert nearest_water(target).tolist() == [0, 1, 1, 4, 4, 5]


def test_land_takes_the_water_it_borders_not_the_basin_behind(target_of):
    # Two basins on either side of a wall; the wall's western half belongs to the western basin.
    active = np.ones((5, 9), dtype=bool)
    active[:, 3:7] = False
    source = nearest_water(target_of(active)).reshape(5, 9)
    assert (source[:, 3:5] % 9 == 2).all()
    assert (source[:, 5:7] % 9 == 7).all()
    assert (source // 9 == np.arange(5)[:, None]).all()


def test_land_without_coordinates(target_of):
    target = target_of([[1, 0, 0, 0], [1, 0, 0, 0]])
    lon = target.longitude.copy()
    lon[~target.active] = np.nan
    blind = type(target)(
        **{
            name: getattr(target, name)
            for name in ("kind", "name", "dims", "shape", "crs", "corners", "active", "topology")
        },
        longitude=lon,
        latitude=target.latitude,
    )
    assert nearest_water(blind).tolist() == [0, 0, 0, 0, 4, 4, 4, 4]


def test_all_water_is_left_alone(target_of):
    assert nearest_water(target_of(np.ones((2, 3)))).tolist() == list(range(6))


def test_unreachable_land_is_said():
    class Loose:
        name = "loose cells"
        active = np.array([True, True, False])
        edges = np.array([[0, 1]])

        def distance_m(self, pairs):
            return np.ones(len(pairs))

    with pytest.raises(BedError, match="1 land cells of loose cells touch no water"):
        nearest_water(Loose())
