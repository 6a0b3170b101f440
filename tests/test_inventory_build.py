"""The inventory of a whole run: in the summary, the CSV and the page."""

import json

import numpy as np
import pandas as pd
import pytest

from texture import build
from texture.inventory import bed_correlation

pytestmark = pytest.mark.slow


def test_inventory_in_every_place(small):
    out = small.parent / "out"
    result = build(small, output=out, validation={"count": 2, "compare": []}, outputs={"geotiff": False})
    table = pd.read_csv(out / "inventory.csv")
    assert table["sediment"].tolist() == ["mud", "sand", "gravel"]
    np.testing.assert_allclose(table["tonnes"], list(result.bed.account.tonnes.values()), atol=1e-3)
    assert (table["tonnes_low"] < table["tonnes"]).all()
    assert (table["tonnes"] < table["tonnes_high"]).all()
    record = json.loads(json.dumps(result.summary(), allow_nan=False))["inventory"]
    assert record[0]["depth_from_m"] is None
    assert record[1]["tonnes"] == pytest.approx(table["tonnes"][1], abs=1e-3)
    assert "A plain sum of quantiles" in (out / "report.html").read_text()
    # Narrower than all cells low or high at once.
    q, f = result.estimate.quantiles[..., 0], result.estimate.fractions[:, 0]
    mass = result.bed.erodible_thickness[0] * result.bed.dry_density[0] * result.found.target.area_m2 / 1000.0
    assert table["tonnes_high"][0] - table["tonnes"][0] < (mass * (1 - result.bed.rim_weight) * (q[2] - f)).sum()


def test_correlation_falls_with_distance(small):
    result = build(
        small, output=small.parent / "out", validation={"count": 2, "compare": []}, outputs={"geotiff": False}
    )
    alike = bed_correlation(result.found)
    first = np.zeros(20, dtype=np.int64)
    rho = alike(first, np.arange(20))  # along the first row
    assert rho[0] == 1.0
    assert (np.diff(rho) <= 1e-12).all()
    covariance = max(result.found.mapper.structure, key=lambda c: c.range_m)
    assert alike(first[:1], np.array([19]))[0] <= 1.0
    assert covariance.range_m > 0.0


def test_ranges_hold_the_demo_s_true_tonnes(plain, demo_recipe, capsys):
    """The demo's true cell means are known: the true tonnes must lie in ranges that are narrower than all cells at once."""
    import xarray as xr

    from texture.bed.inventory import depth_groups

    target, bed, estimate = plain.found.target, plain.bed, plain.estimate
    with xr.open_dataset(demo_recipe.parent / "truth.nc") as data:
        truth = np.stack([data[part].to_numpy().ravel() for part in ("mud", "sand", "gravel")], axis=1)
    unit = (bed.erodible_thickness * bed.dry_density).sum(axis=0) * target.area_m2 / 1000.0 * (1.0 - bed.rim_weight)
    groups = depth_groups(target.active, target.depth_m, plain.found.recipe.inventory.depth_bands_m)
    inside = []
    stocks = iter(plain.inventory)
    for group in groups:
        for k, share in enumerate(bed.classes.share):
            stock, part = next(stocks), bed.classes.part[k]
            wrong = (truth[group.cells, part] - estimate.fractions[group.cells, part]) * unit[group.cells] * share
            inside.append(stock.tonnes_low <= stock.tonnes + wrong.sum() <= stock.tonnes_high)
            at_once = (estimate.quantiles[2] - estimate.fractions)[group.cells, part] * unit[group.cells] * share
            assert stock.tonnes_high - stock.tonnes < 0.6 * at_once.sum()
    with capsys.disabled():
        print(f"\n  true tonnes inside their 90 % range: {sum(inside)} of {len(inside)} rows", end="")
    assert all(inside[:4])  # the whole map
    assert np.mean(inside) >= 0.8
