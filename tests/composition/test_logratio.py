import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from skbio.stats.composition import alr, ilr, sbp_basis

from texture.composition import LogRatio, Partition, close
from texture.errors import CompositionError

NAN = float("nan")
PARTS = ["mud", "sand", "gravel"]
X = np.array([0.1, 0.3, 0.4, 0.2])
CHAIN = ["a", ["b", ["c", "d"]]]
PAIRS = [["a", "b"], ["c", "d"]]


def tree(**kwargs):
    return LogRatio(PARTS, **kwargs)


def test_tree_coordinates_by_hand():
    lr = tree()
    assert lr.coordinate_names == ("ln(mud / (sand + gravel))", "ln(gravel / sand)")
    np.testing.assert_allclose(lr.forward([0.5, 0.4, 0.1]), [0.0, np.log(0.25)])
    np.testing.assert_allclose(lr.inverse([np.log(1.0), np.log(0.25)]), [0.5, 0.4, 0.1])
    assert eval(repr(lr)) == lr


# Egozcue et al. (2003), Egozcue & Pawlowsky-Glahn (2005), Aitchison (1986); numbers from scikit-bio.
def test_ilr_and_alr_of_the_worked_example():
    names = list("abcd")
    np.testing.assert_allclose(
        LogRatio(names, "ilr", CHAIN).forward(X), [-0.91742512, 0.04808472, 0.49012907], atol=1e-8
    )
    np.testing.assert_allclose(
        LogRatio(names, "ilr", PAIRS).forward(X), [-0.49041463, -0.77683620, 0.49012907], atol=1e-8
    )
    # The default basis of scikit-bio splits the last part off first and numbers from the leaves.
    last_first = LogRatio(names, "ilr", [[["a", "b"], "c"], "d"]).forward(X)
    np.testing.assert_allclose(last_first[::-1], [-0.77683620, -0.68339802, 0.11704769], atol=1e-8)
    np.testing.assert_allclose(LogRatio(names, "alr").forward(X), [-0.69314718, 0.40546511, 0.69314718], atol=1e-8)
    np.testing.assert_allclose(
        LogRatio(names, "alr", reference="a").forward(X), [1.09861229, 1.38629436, 0.69314718], atol=1e-8
    )


@pytest.mark.parametrize(
    ("fractions", "over_gravel", "default", "pivot"),
    [
        ((0.70, 0.25, 0.05), (2.63905733, 1.60943791), (0.72805087, 1.73444092), (1.49773101, 1.13804446)),
        ((0.05, 0.90, 0.05), (0.0, 2.89037176), (-2.04380147, 1.17998933), (-1.17998933, 2.04380147)),
        ((0.60, 0.39, 0.01), (4.09434456, 3.66356165), (0.30460952, 3.16715195), (1.84737556, 2.59052928)),
    ],
)
def test_three_part_coordinates(fractions, over_gravel, default, pivot):
    # scikit-bio's default basis: mud against sand, then both against gravel.
    last_first = tree(kind="ilr", tree=[["mud", "sand"], "gravel"]).forward(fractions)
    np.testing.assert_allclose(last_first[::-1], default, atol=1e-8)
    # Pivot: sqrt(2/3) ln(mud / sqrt(sand gravel)), sqrt(1/2) ln(sand / gravel), Egozcue et al. (2003).
    np.testing.assert_allclose(tree(kind="alr").forward(fractions), over_gravel, atol=1e-8)
    lr = tree(kind="ilr", tree=["mud", ["sand", "gravel"]])
    np.testing.assert_allclose(lr.forward(fractions), pivot, atol=1e-8)


@given(arrays(np.float64, (6, 4), elements=st.floats(0.02, 1)))
def test_agrees_with_scikit_bio_on_any_rows(raw):
    rows = close(raw)
    basis = sbp_basis(np.array([[1, 1, -1, -1], [1, -1, 0, 0], [0, 0, 1, -1]]))
    ours = LogRatio(list("abcd"), "ilr", PAIRS, detection_limit=0.0)
    np.testing.assert_allclose(ours.partition.balance_basis(), basis, atol=1e-12)
    np.testing.assert_allclose(ours.forward(rows), ilr(rows, basis=basis), atol=1e-10)
    np.testing.assert_allclose(
        LogRatio(list("abcd"), "alr", detection_limit=0.0).forward(rows), alr(rows, ref_idx=3), atol=1e-10
    )


@pytest.mark.parametrize("kind", ["tree", "ilr", "alr", "shares"])
@given(raw=arrays(np.float64, (5, 4), elements=st.floats(0.05, 1)), factor=st.floats(1e-3, 1e3))
def test_round_trip_and_units(kind, raw, factor):
    lr = LogRatio(["clay", "silt", "sand", "gravel"], kind)
    np.testing.assert_allclose(lr.inverse(lr.forward(raw * factor)), close(raw), rtol=0, atol=1e-12)


@given(arrays(np.float64, (5, 3), elements=st.floats(0.05, 1)), st.permutations(range(3)))
def test_column_order_in_is_column_order_out(raw, order):
    order = list(order)
    for kind in ("tree", "ilr", "shares"):
        plain, turned = tree(kind=kind), LogRatio([PARTS[i] for i in order], kind)
        np.testing.assert_allclose(turned.forward(raw[:, order]), plain.forward(raw), atol=1e-12)


@given(arrays(np.float64, (20, 4), elements=st.floats(0.05, 1)))
def test_ilr_keeps_total_variance(raw):
    # Egozcue et al. (2003): an isometry; the trace of the covariance is that of clr.
    logs = np.log(raw)
    clr = logs - logs.mean(axis=1, keepdims=True)
    total = clr.var(axis=0).sum()
    for branches in (CHAIN, PAIRS):
        assert LogRatio(list("abcd"), "ilr", branches).forward(raw).var(axis=0).sum() == pytest.approx(total)


def test_rows_that_know_only_some_parts():
    coords = tree().forward(
        [
            [0.3, NAN, NAN],  # everything but mud is 0.7
            [NAN, 0.5, 0.2],  # mud is what is left
            [NAN, NAN, 0.2],  # gravel alone: neither split is known
            [0.3, 0.6, NAN],  # gravel is what is left
            [NAN, NAN, NAN],
        ]
    )
    np.testing.assert_allclose(
        coords,
        [
            [np.log(0.3 / 0.7), NAN],
            [np.log(0.3 / 0.7), np.log(0.2 / 0.5)],
            [NAN, NAN],
            [np.log(0.3 / 0.7), np.log(0.1 / 0.6)],
            [NAN, NAN],
        ],
    )
    # Balances need every part of theirs; the ratio of two known parts needs nothing else.
    four = LogRatio(list("abcd"), "ilr", PAIRS, detection_limit=0.0).forward([[0.2, 0.4, NAN, NAN]])
    np.testing.assert_allclose(four, [[NAN, np.sqrt(0.5) * np.log(0.5), NAN]])


def test_a_side_that_is_known_as_the_rest_of_a_deeper_tree():
    lr = LogRatio(["clay", "silt", "sand", "gravel"])
    assert lr.tree == (("clay", "silt"), ("gravel", "sand"))
    np.testing.assert_allclose(lr.forward([NAN, NAN, 0.3, 0.3]), [np.log(0.4 / 0.6), NAN, 0.0], atol=1e-12)


def test_small_parts_and_pure_rows():
    lr = tree(detection_limit=0.01)
    r = 0.0065
    np.testing.assert_allclose(
        lr.forward([[1, 0, 0], [0, 1, 0], [0.5, 0.5, 0], [0, 0.6, 0.4], [0.5, 0.498, 0.002]]),
        [
            [np.log((1 - r) / r), NAN],  # pure mud says nothing of gravel against sand
            [np.log(r / (1 - r)), np.log(r / (1 - r))],
            [0.0, np.log(r / (0.5 - r))],
            [np.log(r / (1 - r)), np.log(0.4 / 0.6)],
            [0.0, np.log(r / (0.5 - r))],
        ],
    )
    # The replaced row of Martín-Fernández et al. (2003).
    np.testing.assert_allclose(lr.inverse(lr.forward([0, 0.6, 0.4])), [0.0065, 0.5961, 0.3974], atol=1e-12)


def test_alr_and_ilr_of_a_pure_row_leave_the_unknown_unknown():
    coords = tree(kind="ilr").forward([1, 0, 0])
    assert np.isfinite(coords[0])
    assert np.isnan(coords[1])
    assert np.isnan(tree(kind="alr", reference="sand").forward([1, 0, 0])).tolist() == [False, True]


def test_shares_are_untransformed_and_clipped():
    lr = tree(kind="shares")
    assert lr.coordinate_names == ("mud", "gravel / (sand + gravel)")
    np.testing.assert_allclose(lr.forward([[0.5, 0.4, 0.1], [0, 1, 0], [1, 0, 0]]), [[0.5, 0.2], [0, 0], [1, NAN]])
    np.testing.assert_allclose(lr.inverse([[-0.1, 0.2], [0.5, 1.3]]), [[0, 0.8, 0.2], [0.5, 0, 0.5]])


def test_noise_of_rounded_and_small_parts():
    coords, noise = tree().forward_with_noise([[0.5, 0.25, 0.25], [0.5, 0.5, 0.0], [1, 0, 0]], resolution=0.01)
    step = 0.01**2 / 12
    np.testing.assert_allclose(noise[0], [step * (1 / 0.25 + 1 / 0.25), step * 2 / 0.25**2])
    # A replaced part: (1/12) / 0.65² for a step as large as the limit; here the step is twice the limit.
    assert noise[1, 1] == pytest.approx(4 / 12 / 0.65**2, rel=1e-3)
    assert np.isnan(noise[2, 1])
    assert np.isnan(coords[2, 1])
    _, by_limit = tree().forward_with_noise([0.5, 0.5, 0.0])
    assert by_limit[1] == pytest.approx(0.197, abs=1e-3)


def test_noise_of_a_rounded_row_matches_a_simulation():
    rng = np.random.default_rng(4)
    truth = np.array([0.32, 0.55, 0.13])
    for kind in ("tree", "alr", "ilr"):
        lr = tree(kind=kind)
        errors = rng.uniform(-0.01, 0.01, (40_000, 3))
        # Independent rounding of each side: the sides of one split, not the parts of a closed row.
        if kind == "tree":
            top, bottom = truth[0] + errors[:, 0], 0.68 + errors[:, 1]
            spread = np.log(top / bottom).var()
        else:
            spread = LogRatio(PARTS, kind, detection_limit=0.0).forward(truth + errors)[:, 0].var()
        _, noise = lr.forward_with_noise(truth, resolution=0.02)
        assert noise[0] == pytest.approx(spread, rel=0.03)


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ([[0.2, 0.3, -0.1]], "found negative"),
        ([[0.2, np.inf, 0.1]], "found infinite"),
        ([[0, 0, 0]], r"row 0 \(counted from 0\): all parts are zero"),
        ([[0.5, 0.5, 0], [30, 60, NAN]], "row 1 .*known parts sum to 90, expected at most 1"),
        ([[0.5, 0.5]], "expected 3 columns"),
    ],
)
def test_rows_that_make_no_sense_are_refused(rows, message):
    with pytest.raises(CompositionError, match=message):
        tree().forward(rows)


def test_a_zero_without_a_limit_is_refused():
    with pytest.raises(CompositionError, match=r"a part is zero.*give a detection limit"):
        tree(detection_limit=0.0).forward([0.5, 0.5, 0.0])


@pytest.mark.parametrize(
    ("kwargs", "message"),
    [
        ({"kind": "log"}, "kind = 'log', expected one of tree, ilr, alr, shares"),
        ({"tree": ["mud", "sand"]}, "expected each of .* exactly once"),
        ({"tree": ["mud", "sand", "gravel"]}, "expected a part name or a pair"),
        ({"detection_limit": 0.4}, "detection_limit = 0.4"),
        ({"reference": "clay", "kind": "alr"}, "reference = 'clay'"),
    ],
)
def test_settings_that_make_no_sense_are_refused(kwargs, message):
    with pytest.raises(CompositionError, match=message):
        LogRatio(PARTS, **kwargs)


def test_part_names_are_checked():
    with pytest.raises(CompositionError, match="two or more part names"):
        Partition(["mud"])
    with pytest.raises(CompositionError, match="each name once"):
        Partition(["mud", "mud"])


def test_importing_the_room_stays_light():
    code = "import sys, texture.composition; print([m for m in ('numba', 'pandas', 'scipy.stats') if m in sys.modules])"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert loaded.strip() == "[]"


# Aitchison (1986), section 7.7, gives 9.697, -2.743, 4.805, -1.096 (from memory); to 1e-5 from numpy's least squares.
def test_arctic_lake_regression_on_log_depth(arctic_lake):
    coords = LogRatio(["sand", "silt", "clay"], "alr", detection_limit=0.0).forward(arctic_lake[:, :3])
    design = np.column_stack([np.ones(39), np.log(arctic_lake[:, 3])])
    fit = np.linalg.lstsq(design, coords, rcond=None)[0]
    np.testing.assert_allclose(fit, [[9.69738, 4.80516], [-2.74291, -1.09625]], atol=1e-5)
    np.testing.assert_allclose(fit.T.ravel(), [9.697, -2.743, 4.805, -1.096], atol=5e-4)
    lr = LogRatio(["sand", "silt", "clay"], "alr")
    at = lr.inverse(np.array([[1, np.log(20)], [1, np.log(100)]]) @ fit)
    np.testing.assert_allclose(at, [[0.440704, 0.459012, 0.100284], [0.028943, 0.426758, 0.544299]], atol=1e-5)
    np.testing.assert_allclose(
        np.cov(coords, rowvar=False), [[4.73149287, 2.06265868], [2.06265868, 1.03502849]], atol=1e-7
    )
    pivot = LogRatio(["sand", "silt", "clay"], "ilr", detection_limit=0.0, tree=["sand", ["silt", "clay"]])
    np.testing.assert_allclose(
        np.cov(pivot.forward(arctic_lake[:, :3]), rowvar=False),
        [[1.95172755, 0.89208955], [0.89208955, 0.51751424]],
        atol=1e-7,
    )
    residual = coords - design @ fit
    ilr_like = pivot.forward(lr.inverse(residual))
    total = pivot.forward(arctic_lake[:, :3])
    r2 = 1 - (ilr_like**2).sum() / ((total - total.mean(axis=0)) ** 2).sum()
    assert r2 == pytest.approx(0.716275, abs=1e-5)
