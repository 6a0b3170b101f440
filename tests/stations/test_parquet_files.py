"""Parquet tables: read where pyarrow is installed, and one clear line where it is not."""

import importlib.util
import sys
from pathlib import Path

import pytest

from tests.stations.samples import ROWS, recipe_for
from texture.errors import SampleError
from texture.stations import read_samples

GRABS = Path(__file__).with_name("corpus") / "grabs.parquet"  # the rows of `samples`, written by pyarrow 26
THERE = importlib.util.find_spec("pyarrow") is not None


def test_a_parquet_table_is_read_or_its_extra_named():
    recipe = recipe_for({"file": GRABS})
    if THERE:
        table = read_samples(recipe).table
        assert table["id"].tolist() == [r[0] for r in ROWS]
        assert table["mud"].tolist() == pytest.approx([r[3] / 100 for r in ROWS])
    else:
        with pytest.raises(SampleError, match=r"grabs\.parquet: .* install seabed-texture\[parquet\]"):
            read_samples(recipe)


def test_without_pyarrow_the_extra_is_named(monkeypatch):
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    with pytest.raises(
        SampleError, match=r"grabs\.parquet: .* install seabed-texture\[parquet\], or save the table as csv"
    ):
        read_samples(recipe_for({"file": GRABS}))


def test_a_truncated_table_has_its_line(tmp_path):
    (tmp_path / "half.parquet").write_bytes(GRABS.read_bytes()[:900])
    words = "not a readable parquet table" if THERE else "need pyarrow"
    with pytest.raises(SampleError, match=rf"half\.parquet: .*{words}"):
        read_samples(recipe_for({"file": tmp_path / "half.parquet"}))
