"""Offsets between methods that overlap in space."""

import numpy as np
import pytest

from tests.stations.samples import HEADER, as_csv, recipe_for
from texture.stations import read_samples
from texture.stations.offsets import method_offsets


def two_methods(offset, n=60, apart=0.0, seed=3):
    """Stations of two methods side by side on a smooth bed, the second reading higher by `offset`."""
    rng = np.random.default_rng(seed)
    lon, lat = rng.random(n) * 0.2, 54 + rng.random(n) * 0.1
    both = np.concatenate([lon, lon + 1e-3 + apart]), np.concatenate([lat, lat])
    bed = 3.0 * np.sin(20.0 * lon)
    values = np.concatenate([bed, bed + offset]) + rng.normal(0, 0.3, 2 * n)
    return *both, values, np.array(["laser"] * n + ["pipette"] * n, dtype=object)


@pytest.mark.parametrize("offset", [0.8, -0.8])
def test_an_offset_comes_back_within_its_error(offset):
    (found,) = method_offsets(*two_methods(offset))
    assert (found.method, found.other) == ("pipette", "laser")
    assert abs(found.offset - offset) < 3.0 * found.standard_error
    assert found.standard_error < 0.15
    assert f"pipette reads {'higher' if offset > 0 else 'lower'} than laser" in found.text("x")


def test_the_error_is_as_large_as_it_says():
    away = [(f.offset - 0.5) / f.standard_error for s in range(60) for f in method_offsets(*two_methods(0.5, seed=s))]
    assert len(away) == 60
    assert 0.7 < np.std(away) < 1.4


def test_methods_that_do_not_meet_have_no_offset():
    assert method_offsets(*two_methods(0.8, apart=5.0)) == []
    lon, lat, values, method = two_methods(0.8)
    assert method_offsets(lon, lat, values, np.full(len(lon), "laser", dtype=object)) == []
    values[:55] = np.nan  # five of the first method are left
    assert method_offsets(lon, lat, values, method) == []


def test_offsets_are_among_the_notes(tmp_path):
    lon, lat, values, _ = two_methods(0.8)
    mud = 100.0 / (1.0 + np.exp(1.0 - values))
    rows = [[f"S{i}", lat[i], lon[i], round(m, 2), round(100 - m, 2), 0, ""] for i, m in enumerate(mud)]
    (tmp_path / "a.csv").write_text(as_csv([HEADER, *rows[:60]]))
    (tmp_path / "b.csv").write_text(as_csv([HEADER, *rows[60:]]))
    blocks = [{"file": tmp_path / "a.csv", "method": "laser"}, {"file": tmp_path / "b.csv", "method": "pipette"}]
    notes = read_samples(recipe_for(*blocks)).notes
    assert any(note.startswith("pipette reads higher than laser where they overlap: 0.") for note in notes)
