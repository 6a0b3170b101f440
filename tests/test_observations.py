"""Stations to arrays: measured rows, words, limits, and rows that only know what passed 2 mm."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from texture.composition import LogRatio, class_moments, from_intervals
from texture.errors import SampleError
from texture.observations import observe
from texture.recipe import Recipe
from texture.stations import read_samples
from texture.structure.plane import Plane

LOGRATIO = LogRatio(["mud", "sand", "gravel"])


def observed(tmp_path, text, **samples):
    (tmp_path / "a.csv").write_text(text)
    target = {"bounds": [0.0, 50.0, 1.0, 51.0], "cell_size": 0.5, "crs": "EPSG:4326"}
    recipe = Recipe.model_validate({"samples": [{"file": tmp_path / "a.csv", **samples}], "target": target})
    stations = read_samples(recipe)
    plane = Plane.choose(stations.table["longitude"], stations.table["latitude"])
    return stations, observe(stations, LOGRATIO, plane)


WHOLE = [f"S{i},0.{i},50.{i},0.{i},0.{8 - i},0.2" for i in range(1, 8)]


def test_measured_rows_become_coordinates_with_the_noise_of_their_digits(tmp_path):
    _, o = observed(tmp_path, "id,lon,lat,mud,sand,gravel\n" + "\n".join(WHOLE))
    coordinates, noise = o.coordinates(LOGRATIO)
    np.testing.assert_allclose(coordinates[0], [np.log(0.1 / 0.9), np.log(0.2 / 0.7)])
    # One digit: a step of 0.1, error variance 0.1² / 12 on each side (uniform rounding, delta method).
    np.testing.assert_allclose(noise[0, 0], 0.01 / 12 * (1 / 0.1**2 + 1 / 0.9**2))
    assert o.measured.all()
    assert o.exact.all()
    assert o.points.shape == (7, 2)


def test_hard_ground_is_not_sediment_and_words_are_not_scored(tmp_path):
    words = ["W1,0.5,50.9,,,,muddy sand", "W2,0.6,50.9,,,,rock"]
    text = "id,lon,lat,mud,sand,gravel,description\n" + "\n".join([f"{row}," for row in WHOLE] + words)
    stations, o = observed(tmp_path, text)
    assert stations.counts["rows_evidence"] == 1
    assert o.count == 8
    assert o.measured.tolist() == [True] * 7 + [False]
    assert np.isnan(o.fractions[7]).all()
    assert o.described.tolist() == [""] * 7 + ["mS"]
    coordinates, noise = o.coordinates(LOGRATIO)
    share = 1 / (1 + np.exp(-coordinates[7, 0]))
    assert 0.1 < share < 0.5  # Folk (1954): muddy sand has sand : mud between 1:1 and 9:1
    assert noise[7, 0] > noise[0, 0]
    assert o.rows.tolist() == list(range(8))
    # As shares the same words say the same, within [0, 1]: mean and variance of the logistic of that normal.
    shares, spread = o.coordinates(LogRatio(LOGRATIO.parts, "shares"))
    mean, covariance = class_moments(["mS"], LOGRATIO)
    draws = np.random.default_rng(1).normal(mean[0, 0], np.sqrt(covariance[0, 0, 0]), 200_000)
    assert shares[7, 0] == pytest.approx((1 / (1 + np.exp(-draws))).mean(), abs=0.002)
    assert spread[7, 0] == pytest.approx((1 / (1 + np.exp(-draws))).var(), rel=0.02)


def test_rows_below_2_mm_inform_mud_with_noise_and_are_not_scored(tmp_path):
    text = "id,lon,lat,mud,sand\n" + "\n".join(f"S{i},0.{i},50.{i},0.{i},0.{10 - i}" for i in range(1, 8))
    _, o = observed(tmp_path, text, basis="below_2mm")
    coordinates, noise = o.coordinates(LOGRATIO)
    np.testing.assert_allclose(o.mud_of_fines, np.arange(1, 8) / 10)
    assert np.isnan(coordinates[:, 1]).all()
    assert np.isfinite(coordinates[:, 0]).all()
    assert (coordinates[:, 0] < np.log(np.arange(1, 8) / (10 - np.arange(1, 8)))).all()  # some of it may be gravel
    assert (noise[:, 0] > 0.05).all()
    assert np.isnan(o.fractions).all()


def test_limits_of_a_table_become_pseudo_observations(tmp_path):
    stations, _ = observed(tmp_path, "id,lon,lat,mud,sand,gravel\n" + "\n".join(WHOLE))
    table = stations.samples.copy()
    for part in LOGRATIO.parts:
        for end in ("low", "high"):
            table[f"{part}_{end}"] = np.nan
    table.loc[0, ["gravel_low", "gravel_high"]] = [0.0, 0.01]  # "<1": exact mud, sand and gravel share the rest
    table.loc[0, ["mud", "sand", "gravel"]] = [0.4, np.nan, np.nan]
    table.loc[1, ["mud_low", "mud_high"]] = [0.95, 1.0]  # ">95"
    table.loc[1, ["mud", "sand", "gravel"]] = np.nan
    table.loc[2, ["mud_low", "mud_high"]] = table.loc[2, "mud"]  # two equal limits are a number
    plane = Plane.choose(table["longitude"], table["latitude"])
    o = observe(SimpleNamespace(samples=table), LOGRATIO, plane)
    assert o.bounded.tolist() == [True, True] + [False] * 5
    coordinates, noise = o.coordinates(LOGRATIO)
    low, high = [[0.4, 0.0, 0.0], [0.95, 0.0, 0.0]], [[0.4, 1.0, 0.01], [1.0, 1.0, 1.0]]
    mean, variance = from_intervals(LOGRATIO, low, high)
    np.testing.assert_array_equal(coordinates[:2], mean)
    np.testing.assert_array_equal(noise[:2], np.nan_to_num(variance))
    np.testing.assert_allclose(o.fractions[0], [0.4, np.nan, 0.005])  # known well enough to score against
    assert np.isnan(o.fractions[1]).all()


def test_what_learns_from_fractions_learns_from_those_taken(tmp_path):
    rows = [f"S{i},0.{i},50.{i},0.{i},0.{8 - i},0.2" for i in range(1, 8)]
    _, o = observed(tmp_path, "id,lon,lat,mud,sand,gravel\n" + "\n".join(rows))
    fractions = o.fractions.copy()
    fractions[:5] = np.column_stack([np.full(5, 0.3), np.full(5, 0.69), np.full(5, 0.01)]) + 0.0
    fractions[5:] = np.nan
    some = replace(o, fractions=fractions, mud_of_fines=np.array([np.nan] * 5 + [0.5, 0.5]))
    little = some.coordinates(LOGRATIO)[0][5, 0]
    much = replace(some, fractions=np.where(np.isnan(fractions), np.nan, [0.3, 0.2, 0.5])).coordinates(LOGRATIO)[0][
        5, 0
    ]
    assert little == pytest.approx(np.log(0.495 / 0.505), abs=1e-6)  # 1 % gravel
    assert much == pytest.approx(np.log(0.25 / 0.75), abs=1e-6)  # half of it gravel


def test_a_median_alone_informs_mud_and_is_not_scored(tmp_path):
    text = "id,lon,lat,mud,sand,gravel,median (phi)\n" + "\n".join(
        [f"{row}," for row in WHOLE] + ["M1,0.5,50.9,,,,6.5"]
    )
    stations, o = observed(tmp_path, text)
    assert stations.table["kind"].tolist()[-1] == "median_only"
    values, noise = o.coordinates(LOGRATIO)
    assert values[-1, 0] > 0.0  # 6.5 phi is a silt: more mud than not
    assert noise[-1, 0] > 0.25
    assert np.isnan(values[-1, 1])
    assert o.measured.tolist() == [True] * 7 + [False]


def test_too_few(tmp_path):
    with pytest.raises(SampleError, match="expected at least 5"):
        observed(tmp_path, "id,lon,lat,mud,sand,gravel\n" + "\n".join(WHOLE[:4]))
