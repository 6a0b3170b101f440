"""Repeats of one survey at one place."""

import numpy as np
import pandas as pd
import pytest

from texture.stations.repeats import merge_repeats


def rows(*values, **columns):
    """A frame of rows (mud, sand, gravel) at one place, with columns overridden."""
    n = len(values)
    frame = pd.DataFrame(values, columns=["mud", "sand", "gravel"], dtype=float)
    defaults = {
        "survey": "a",
        "longitude": 3.0,
        "latitude": 54.0,
        "kind": "sieve",
        "described_class": "",
        "resolution": 0.005,
        "top_m": 0.0,
        "thickness_m": np.nan,
        "median_phi": np.nan,
        **{f"{part}_{end}": np.nan for part in ("mud", "sand", "gravel") for end in ("low", "high")},
    }
    for name, value in {**defaults, **columns}.items():
        frame[name] = value if isinstance(value, list) else [value] * n
    return frame


def test_repeats_become_their_arithmetic_mean_with_their_spread():
    # the log-ratio mean of 0 and 40 % gravel would be 4.5 %; mass says 20 %
    stations, member = merge_repeats(rows((0.2, 0.8, 0.0), (0.4, 0.2, 0.4)))
    assert member.tolist() == [0, 0]
    np.testing.assert_allclose(stations[["mud", "sand", "gravel"]].to_numpy(), [[0.3, 0.5, 0.2]])
    assert stations["repeats"].tolist() == [2]
    np.testing.assert_allclose(stations["repeat_sd_gravel"], np.std([0.0, 0.4], ddof=1))


def test_another_survey_or_place_is_another_station():
    frame = rows((0.2, 0.8, 0.0), (0.4, 0.6, 0.0), (0.1, 0.9, 0.0), survey=["a", "b", "a"], longitude=[3.0, 3.0, 3.001])
    stations, member = merge_repeats(frame)
    assert member.tolist() == [0, 1, 2]
    assert stations["repeat_sd_mud"].isna().all()


def test_a_row_that_knows_less_moves_what_it_knows():
    stations, _ = merge_repeats(rows((0.2, 0.6, 0.2), (0.4, np.nan, np.nan), kind=["sieve", "partial"]))
    np.testing.assert_allclose(stations[["mud", "sand", "gravel"]].to_numpy(), [[0.3, 0.525, 0.175]])


def test_a_partial_row_read_first_takes_the_kind_of_the_complete_one():
    stations, _ = merge_repeats(rows((0.4, np.nan, np.nan), (0.2, 0.6, 0.2), kind=["partial", "laser"]))
    assert stations["kind"].tolist() == ["laser"]


def test_words_give_way_to_measurements():
    frame = rows((0.5, 0.5, 0.0), (0.1, 0.9, 0.0), kind=["description", "sieve"])
    stations, member = merge_repeats(frame)
    assert member.tolist() == [0, 0]
    assert stations["mud"].tolist() == [0.1]
    assert stations["repeats"].tolist() == [1]


def test_hard_ground_is_never_merged():
    nan = np.nan
    stations, member = merge_repeats(
        rows((nan, nan, nan), (nan, nan, nan), (0.1, 0.9, 0.0), kind=["hard_ground", "hard_ground", "sieve"])
    )
    assert member.tolist() == [0, 1, 2]
    assert len(stations) == 3


@pytest.mark.parametrize("n", [1, 2, 7])
def test_merging_equal_rows_changes_nothing(n):
    stations, _ = merge_repeats(rows(*[(0.25, 0.5, 0.25)] * n))
    assert stations[["mud", "sand", "gravel"]].to_numpy().tolist() == [[0.25, 0.5, 0.25]]


def test_slices_of_a_core_are_weighted_by_their_thickness_and_are_one_sample():
    # 0-2 cm and 2-10 cm above a surface of 10 cm: one fifth and four fifths
    stations, _ = merge_repeats(rows((0.5, 0.5, 0.0), (0.0, 0.5, 0.5), top_m=[0.0, 0.02], thickness_m=[0.02, 0.08]))
    np.testing.assert_allclose(stations[["mud", "sand", "gravel"]].to_numpy(), [[0.1, 0.5, 0.4]])
    assert stations["repeats"].tolist() == [1]
    assert stations["repeat_sd_mud"].isna().all()


def test_limits_are_averaged_with_the_exact_values_beside_them():
    frame = rows((0.3, 0.7, 0.0), (0.1, 0.9, 0.0), mud_low=[0.2, np.nan], mud_high=[0.4, np.nan])
    stations, _ = merge_repeats(frame)
    np.testing.assert_allclose(stations[["mud", "mud_low", "mud_high"]].to_numpy(), [[0.2, 0.15, 0.25]])
    np.testing.assert_allclose(stations[["sand_low", "sand_high", "gravel_high"]].to_numpy(), [[0.8, 0.8, 0.0]])


def test_a_median_gives_way_to_shares_and_several_become_their_mean():
    kinds = ["median_only", "sieve"]
    stations, _ = merge_repeats(rows((np.nan,) * 3, (0.2, 0.8, 0.0), kind=kinds, median_phi=[2.0, np.nan]))
    assert stations[["kind", "repeats"]].to_numpy().tolist() == [["sieve", 1]]
    stations, _ = merge_repeats(rows((np.nan,) * 3, (np.nan,) * 3, kind="median_only", median_phi=[2.0, 3.0]))
    assert stations["median_phi"].tolist() == [2.5]
    assert stations["mud"].isna().all()
