"""A page for ten million cells and fifty thousand stations: small enough to send, and open at once."""

import time
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from texture.recipe import TargetSettings
from texture.report import result_picture, versions_line, write_page
from texture.targets import read_target

pytestmark = pytest.mark.slow

ROWS, COLUMNS, STATIONS, ASIDE = 2_500, 4_000, 50_000, 5_000


@pytest.fixture(scope="module")
def large(plain):
    """The demo's result spread over a grid and stations of that size, with noise that no picture can compress away."""
    rng = np.random.default_rng(3)
    target = read_target(
        TargetSettings(
            bounds=(5e5, 4.87e6, 5e5 + 20.0 * COLUMNS, 4.87e6 + 20.0 * ROWS), cell_size=20.0, crs="EPSG:32626"
        )
    )
    target.__dict__["area_m2"] = np.full(target.n_cells, 400.0)  # cached; working it out is not what is timed here
    small = plain.found.target
    wet = np.flatnonzero(small.active)
    index = rng.permutation(wet)[np.add.outer(np.arange(ROWS) // 40, np.arange(COLUMNS) // 40).ravel() % wet.size]
    noisy = plain.estimate.fractions[index] * rng.uniform(0.9, 1.1, (target.n_cells, 1))
    estimate = replace(
        plain.estimate,
        fractions=np.clip(noisy, 0.0, 1.0),
        quantiles=np.stack([noisy * 0.6, noisy, noisy * 1.2]),
        mean=plain.estimate.mean[index],
        variance=plain.estimate.variance[index],
        evidence=plain.estimate.evidence[index],
        texture_class=plain.estimate.texture_class[index],
        class_probability=plain.estimate.class_probability[index],
        outside=plain.estimate.outside[index],
        sample_distance_m=plain.estimate.sample_distance_m[index],
        expected_error=plain.estimate.expected_error[index],
    )
    bed = plain.bed
    of_cells = {
        name: getattr(bed, name)[..., :1, index] for name in ("class_fraction", "erodible_thickness", "evidence")
    }
    bed = replace(
        bed,
        **of_cells,
        class_critical_stress=bed.class_critical_stress[:, :1],
        rim_weight=np.zeros(target.n_cells),
        hard_ground_probability=bed.hard_ground_probability[index],
    )
    found = with_many_stations(plain.found, rng)
    return replace(plain, found=replace(found, target=target), estimate=estimate, bed=bed, moved=(), inventory=())


def with_many_stations(found, rng):
    take = rng.integers(0, found.observations.count, STATIONS)
    table = found.stations.table.iloc[found.observations.rows[take]].reset_index(drop=True)
    row = np.arange(1, STATIONS + ASIDE + 1)
    table["id"], table["row"] = [f"ST-{r:06d}" for r in row[:STATIONS]], row[:STATIONS]
    table["file"], table["sheet"] = "many.csv", ""
    ledger = pd.DataFrame(
        {
            "file": "many.csv", "sheet": "", "row": row, "id": [f"ST-{r:06d}" for r in row],
            "fate": ["used"] * STATIONS + ["set_aside"] * ASIDE,
            "reason": [""] * STATIONS + ["parts sum to 1.37, expected 1 ± 0.02"] * ASIDE,
            "station": [*range(STATIONS), *[-1] * ASIDE],
        }
    )  # fmt: skip
    stations = replace(
        found.stations, table=table, ledger=ledger[list(found.stations.ledger.columns)],
        rows_read={("many.csv", ""): STATIONS + ASIDE},
    )  # fmt: skip
    observations = replace(found.observations.take(take), rows=np.arange(STATIONS))
    methods = [
        replace(
            m,
            predicted=m.predicted[take],
            intervals={share: (low[take], high[take]) for share, (low, high) in m.intervals.items()},
        )
        for m in found.validation.methods
    ]
    return replace(
        found, stations=stations, observations=observations, validation=replace(found.validation, methods=methods)
    )


@pytest.fixture(scope="module")
def page(large, tmp_path_factory):
    path = tmp_path_factory.mktemp("large") / "report.html"
    path.write_text(write_page(large, result_picture(large), "", versions_line(large)), encoding="utf-8")
    return path


def test_it_is_below_eight_megabytes_and_says_what_it_leaves_out(page):
    assert page.stat().st_size < 8_000_000
    text = page.read_text(encoding="utf-8")
    assert "The grid has 10,000,000 cells, more than a page can carry" in text
    assert "The map shows 3,000 of 50,000 stations" in text
    assert "3,000 more stand in rows.csv" in text


@pytest.mark.browser
def test_it_opens_in_three_seconds(page, need_tool):
    from playwright.sync_api import sync_playwright

    chromium = need_tool("chromium", "chromium-browser", "google-chrome")
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=chromium, args=["--no-sandbox", "--disable-gpu"])
        took = []
        for _ in range(3):
            view = browser.new_page()
            start = time.perf_counter()
            view.goto(page.as_uri())
            view.wait_for_function(
                "window.Bokeh && Bokeh.documents.length && Bokeh.documents[0].is_idle", timeout=30_000
            )
            took.append(time.perf_counter() - start)
            view.close()
        browser.close()
    assert min(took) < 3.0, took
