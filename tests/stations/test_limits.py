"""Limits of what is not exact: they hold the point, can be met, and widen what stands beside them."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.stations.test_fractions import share
from texture.composition import LogRatio, from_intervals

CELLS = st.one_of(
    st.sampled_from(["<1", "<5", "trace", ">90", "~3", "~40", "5-10", "20-60", None]),
    st.integers(0, 100).map(float),
)


@settings(deadline=None)  # the first example compiles nothing but draws its quasi-random points
@given(st.lists(st.tuples(CELLS, CELLS, CELLS), min_size=1, max_size=20))
def test_every_row_with_limits_can_be_met_by_some_composition(cells):
    mud, sand, gravel = (list(column) for column in zip(*cells, strict=True))
    shares = share({"mud": mud, "sand": sand, "gravel": gravel}, unit="percent")
    value = np.column_stack([shares.mud, shares.sand, shares.gravel])
    told = np.isfinite(shares.low)
    assert (told == np.isfinite(shares.high)).all()
    assert (shares.low[told] <= value[told] + 1e-12).all()
    assert (value[told] <= shares.high[told] + 1e-12).all()
    rows = told.any(axis=1)
    if rows.any():  # raises for limits that nothing meets
        from_intervals(LogRatio(["mud", "sand", "gravel"]), shares.low[rows], shares.high[rows])


def test_a_limit_informs_less_than_the_point_that_stands_for_it():
    shares = share(
        {"mud": ["<10", 6.5], "sand": [60.0, 60.0], "gravel": [40.0, 33.5]}, unit="percent", sum_tolerance=0.1
    )
    assert np.isfinite(shares.low).all(axis=1).tolist() == [True, False]
    logratio = LogRatio(["mud", "sand", "gravel"])
    _, noise = from_intervals(logratio, shares.low[:1], shares.high[:1])
    point = np.array([[shares.mud[1], shares.sand[1], shares.gravel[1]]])
    _, rounding = logratio.forward_with_noise(point, 2.0 * shares.resolution[1:])
    assert noise[0, 0] > 50.0 * rounding[0, 0]
    # The variance of ln u for a share u spread evenly from 0 is 1, and less where u is cut off at 0.65 x 0.005.
    assert 0.8 < noise[0, 0] < 1.0
