"""Values that are worked out when they are written."""

import numpy as np
import xarray as xr

from texture.output.cf import FILL, write_netcdf
from texture.output.on_demand import in_memory, is_on_demand, on_demand


def made(calls):
    def make():
        calls.append(1)
        return np.arange(6.0)

    return on_demand(("row", "column"), make, (2, 3), np.float32, {"units": "m"})


def test_nothing_is_made_before_it_is_asked_for():
    calls = []
    dataset = xr.Dataset({"thickness": made(calls)})
    assert is_on_demand(dataset.variables["thickness"])
    assert dataset["thickness"].isel(row=1).shape == (3,)
    assert not calls
    assert dataset["thickness"].isel(row=1).values.tolist() == [3.0, 4.0, 5.0]
    assert dataset["thickness"].dtype == np.float32
    assert len(calls) == 1


def test_in_memory_it_can_be_changed_without_changing_its_source():
    source = np.zeros(2)
    dataset = xr.Dataset({"weight": on_demand(("x",), lambda: source, (2,), np.float64, {})})
    changed = in_memory(dataset)
    changed["weight"].values[0] = 7.0
    assert source.tolist() == [0.0, 0.0]
    assert changed["weight"].values.tolist() == [7.0, 0.0]


def test_written_and_read_back(tmp_path):
    """Outside check: xarray reads the file."""
    holes = np.array([1.0, np.nan, 3.0], dtype=np.float32)
    write_netcdf(xr.Dataset({"thickness": made([]), "mud": ("x", holes)}), tmp_path / "a.nc")
    with xr.open_dataset(tmp_path / "a.nc") as back:
        assert back["thickness"].values.tolist() == [[0.0, 1.0, 2.0], [3.0, 4.0, 5.0]]
        np.testing.assert_array_equal(back["mud"].values, holes)
        assert back["mud"].encoding["_FillValue"] == np.float32(FILL)
    assert np.isnan(holes[1])
