"""Tiles overlap: what holds where they meet."""

import numpy as np
import pytest

from benchmarks.seams import LAYOUTS, MODEL, field, jumps, lines
from texture.predict import Kriging
from texture.predict.tiles import build_tiles
from texture.structure import Covariance, Structure


@pytest.mark.parametrize("layout", LAYOUTS)
def test_tiles_leave_no_seams(layout):
    # Where a step between cells of 4 m on 1,000 m crosses from one tile into the next, the rms jump is within 1.2 times
    # that of steps inside tiles. Between clusters tiles are small where the field itself is steep: there the map from all
    # stations has 1.3 by itself, and the comparison is with that.
    points = LAYOUTS[layout]()
    cells, shape = lines(4.0, 12)
    local = Kriging(MODEL, 32).fit(points, field(points))
    edge, inside = jumps(local, cells, shape)
    own = 1.0
    if layout == "clusters":
        edge_all, inside_all = jumps(Kriging(MODEL, None).fit(points, field(points)), cells, shape, local)
        own = edge_all / inside_all
    assert edge / inside < 1.2 * own


@pytest.mark.parametrize("d", [1, 2, 3, 4])
def test_weights_add_up_and_stations_within_reach_serve(d):
    rng = np.random.default_rng(d)
    points = np.concatenate([rng.random((300, d)), 0.01 * rng.random((200, d)) + 0.4])
    tiles = build_tiles(points, 8)
    places = np.concatenate([rng.random((200, d)) * 3.0 - 1.0, points])
    begin, tile, weight = tiles.serving(places)
    assert np.add.reduceat(weight, begin[:-1]) == pytest.approx(1.0, abs=1e-14)
    assert (weight > 0.0).all()
    sets = {t: set(tiles.stations(t).tolist()) for t in np.unique(tile).tolist()}
    for i in range(500):
        pairs = slice(begin[200 + i], begin[201 + i])
        assert all(i in sets[t] for t in tile[pairs].tolist())


@pytest.mark.parametrize("d", [1, 2, 3])
def test_the_map_is_continuous_and_exact(d):
    rng = np.random.default_rng(10 + d)
    points = 1000.0 * np.concatenate([rng.random((200, d)), 0.02 * rng.random((100, d)) + 0.4])
    z = np.sin(points.sum(axis=1) / 150.0)
    kriging = Kriging(Covariance([Structure("exponential", 1.0, 500.0)]), 8).fit(points, z)
    mean, variance = kriging.predict(points)
    assert mean[:, 0] == pytest.approx(z, abs=1e-6)
    assert variance.max() < 1e-6
    # A micrometre to either side of where a tile begins to serve, and of its sides.
    boxes = kriging.systems[0].tiles.boxes
    side = (boxes.high - boxes.low)[:, :1]
    for part in (0.0, boxes.overlap[:, None]):
        at = boxes.low + rng.random(boxes.low.shape) * (boxes.high - boxes.low)
        at[:, :1] = boxes.high[:, :1] + part * side
        hair = 1e-6 * np.eye(d)[0]
        before, after = (kriging.predict(at + sign * hair)[0] for sign in (-1.0, 1.0))
        assert np.abs(after - before).max() < 1e-6
