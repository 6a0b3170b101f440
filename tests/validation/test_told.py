"""Stations known by words or a median: compared apart, by hand."""

import numpy as np
import pytest

from texture.validation.told import compare_told, told_rows, told_text


def test_words_and_medians_are_apart_and_measured_stations_in_neither():
    predicted = np.array([[0.02, 0.98, 0.0], [0.02, 0.98, 0.0], [0.95, 0.05, 0.0], [0.5, 0.5, 0.0], [np.nan] * 3])
    described = np.array(["S", "M", "M", "", "S"])
    median_phi = np.array([np.nan, np.nan, np.nan, 2.0, np.nan])
    square_z = np.array([[1.0, 3.0], [8.0, np.nan], [0.0, 0.0], [4.0, np.nan], [np.nan, np.nan]])
    words, medians = compare_told(predicted, described, median_phi, square_z, 0.001)
    assert (words.kind, words.n) == ("description", 3)  # the one that was not predicted is left out
    assert words.class_agreement == pytest.approx(2 / 3)
    assert words.mean_square_standardised_distance == pytest.approx(12.0 / 5.0)
    assert (medians.kind, medians.n, medians.mean_square_standardised_distance) == ("median_only", 1, 4.0)
    rows = told_rows([words, medians])
    assert [(r["stations"], r["score"]) for r in rows] == [
        ("description", "n"), ("description", "class_agreement"), ("description", "mean_square_standardised_distance"),
        ("median_only", "n"), ("median_only", "mean_square_standardised_distance"),
    ]  # fmt: skip
    assert "1 station known by a median (mean square standardised distance 4.00)" in told_text([words, medians])


def test_nothing_told_says_nothing():
    nothing = np.full(2, np.nan)
    assert compare_told(np.full((2, 3), 1 / 3), np.array(["", ""]), nothing, nothing[:, None], 0.001) == []
    assert told_text([]) == ""
