"""Stations to arrays: measured rows, words, and rows that only know what passed 2 mm."""

import numpy as np
import pytest

from texture.composition import LogRatio
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
    np.testing.assert_allclose(o.coordinates[0], [np.log(0.1 / 0.9), np.log(0.2 / 0.7)])
    # One digit: a step of 0.1, error variance 0.1² / 12 on each side (uniform rounding, delta method).
    np.testing.assert_allclose(o.noise[0, 0], 0.01 / 12 * (1 / 0.1**2 + 1 / 0.9**2))
    assert o.measured.all()
    assert o.points.shape == (7, 2)


def test_hard_ground_is_not_sediment_and_words_are_not_scored(tmp_path):
    words = ["W1,0.5,50.9,,,,muddy sand", "W2,0.6,50.9,,,,rock"]
    text = "id,lon,lat,mud,sand,gravel,description\n" + "\n".join([f"{row}," for row in WHOLE] + words)
    stations, o = observed(tmp_path, text)
    assert stations.counts["rows_evidence"] == 1
    assert o.count == 8
    assert o.measured.tolist() == [True] * 7 + [False]
    assert np.isnan(o.fractions[7]).all()
    share = 1 / (1 + np.exp(-o.coordinates[7, 0]))
    assert 0.1 < share < 0.5  # Folk (1954): muddy sand has sand : mud between 1:1 and 9:1
    assert o.noise[7, 0] > o.noise[0, 0]
    assert o.rows.tolist() == list(range(8))


def test_rows_below_2_mm_inform_mud_with_noise_and_are_not_scored(tmp_path):
    text = "id,lon,lat,mud,sand\n" + "\n".join(f"S{i},0.{i},50.{i},0.{i},0.{10 - i}" for i in range(1, 8))
    _, o = observed(tmp_path, text, basis="below_2mm")
    assert np.isnan(o.coordinates[:, 1]).all()
    assert np.isfinite(o.coordinates[:, 0]).all()
    assert (o.coordinates[:, 0] < np.log(np.arange(1, 8) / (10 - np.arange(1, 8)))).all()  # some of it may be gravel
    assert (o.noise[:, 0] > 0.05).all()
    assert np.isnan(o.fractions).all()


def test_too_few(tmp_path):
    with pytest.raises(SampleError, match="expected at least 5"):
        observed(tmp_path, "id,lon,lat,mud,sand,gravel\n" + "\n".join(WHOLE[:4]))
