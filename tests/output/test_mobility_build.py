"""The mobility screen from the recipe into the files, the page and the summary."""

import json

import netCDF4
import numpy as np
import pytest
import xarray as xr

from texture import build
from texture.errors import TargetError
from texture.pipeline import intake

QUICK = {"validation": {"count": 2, "compare": []}, "outputs": {"geotiff": False}}
CLASSES = [
    {"name": "mud", "part": "mud", "grain": {"diameter_m": 20e-6}, "erosion": {"critical_stress_pa": 0.05}},
    {"name": "sand", "part": "sand", "grain": {"diameter_m": 250e-6}},
    {"name": "gravel", "part": "gravel", "grain": {"diameter_m": 8e-3}},
]
FAIR = {"name": "fair weather", "orbital_velocity_m_s": 0.15, "kind": "rms", "period_s": 8.0, "fair_weather": True}
STORM = {
    "name": "winter storm", "file": "storm.nc", "orbital_velocity_m_s": "swell", "kind": "significant", "period_s": 12.0,
    "current_m_s": 0.4, "depth_m": 15.0,
}  # fmt: skip


@pytest.fixture
def storm(small):
    swell = np.linspace(0.5, 3.0, 240).reshape(12, 20)
    xr.Dataset({"swell": (("y", "x"), swell, {"units": "m s-1"})}).to_netcdf(small.parent / "storm.nc")
    return small


@pytest.mark.slow
def test_screen_in_every_place(storm):
    out = storm.parent / "out"
    result = build(storm, output=out, mobility=[FAIR, STORM], bed={"classes": CLASSES}, **QUICK)
    fair, rough = result.summary()["mobility"]
    json.dumps(result.summary(), allow_nan=False)
    assert fair["condition"] == "fair weather"
    assert 0.05 < fair["median_stress_pa"] < 0.5  # common practice, no source
    assert 1.0 < rough["largest_stress_pa"] < 50.0
    assert rough["moving_share"]["sand"] > fair["moving_share"]["gravel"]
    assert rough["rim_moving_share"] == 1.0
    assert fair["flushed_mud_share"] is not None
    with netCDF4.Dataset(out / "bed.nc") as file:
        assert file["condition_name"][:].tolist() == ["fair weather", "winter storm"]
        np.testing.assert_array_equal(file["skin_friction_stress"][1].ravel(), result.moved[1].stress_pa)
        assert file["moving_area_share"][1, 0] == fair["moving_share"]["sand"]
        assert set(np.unique(file["flushed_mud"][0])) <= {0, 1}
    page = (out / "report.html").read_text()
    assert "winter storm" in page
    assert "mud flushed" in page
    assert any("winter storm: median stress" in line for line in result.summary_lines())
    assert "storm.nc" in (out / "provenance.json").read_text()


def test_mistakes_are_told_before_the_work(storm, monkeypatch):
    import texture.pipeline

    monkeypatch.setattr(texture.pipeline, "place_stations", lambda *_: pytest.fail("the work began"))
    with pytest.raises(
        TargetError, match=r'storm.nc: no variable "swel" for mobility "winter storm", orbital_velocity_m_s'
    ):
        build(storm, mobility=[STORM | {"orbital_velocity_m_s": "swel"}])
    without_depth = {k: v for k, v in STORM.items() if k != "depth_m"}
    with pytest.raises(TargetError, match=r'mobility "winter storm", depth_m: a current needs the depth it flows in'):
        build(storm, mobility=[without_depth])


@pytest.mark.slow
def test_hours_of_a_wave_record(storm):
    """A record of waves at one place stands for all cells; the hours reach the summary and the page."""
    record = xr.Dataset({"swell": (("hour",), [0.05, 0.05, 1.0, 1.0], {"units": "m s-1"})})
    record.to_netcdf(storm.parent / "record.nc")
    week = {
        "name": "a week",
        "file": "record.nc",
        "orbital_velocity_m_s": "swell",
        "kind": "rms",
        "period_s": 9.0,
        "hours": 168.0,
    }
    result = build(storm, output=storm.parent / "out", mobility=[week], bed={"classes": CLASSES}, **QUICK)
    (found,) = result.summary()["mobility"]
    assert found["moving_hours"]["sand"] == pytest.approx(84.0)
    assert "(84 h)" in (storm.parent / "out" / "report.html").read_text()
    lengths = xr.Dataset(
        {"swell": (("hour",), [0.1, 0.2], {"units": "m s-1"}), "beat": (("other",), [8.0, 9.0, 7.0], {"units": "s"})}
    )
    lengths.to_netcdf(storm.parent / "record2.nc")
    with pytest.raises(TargetError, match=r'mobility "a week", series of 2 and 3 times; expected one length'):
        build(storm, output=storm.parent / "b", mobility=[week | {"file": "record2.nc", "period_s": "beat"}], **QUICK)


def test_the_samples_alone_can_be_read_before_the_bed_is_right(storm):
    """A rim or waves that do not fit are the build's concern, not the account of the rows."""
    found = intake(
        storm, output=storm.parent / "rows", rim={"width_cells": 400}, mobility=[STORM | {"period_s": "none"}]
    )
    assert found.summary()["stations"] == 30
