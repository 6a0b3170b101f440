"""The page's words: self-contained, in full, safe with hostile text, silent about the machine and hidden positions."""

import re
from dataclasses import replace
from pathlib import Path

import pytest

from texture import build
from texture.recipe import Report
from texture.recipe.file import resolved_toml
from texture.report import CAUTIONS, result_picture, versions_line, write_figures, write_page
from texture.report.methods_text import SOURCES, methods_paragraph
from texture.report.tables import page_tables

pytestmark = pytest.mark.slow

HOSTILE = "<script>document.title='taken'</script> =1+1 \u202eright to left " + "x" * 10_000


@pytest.fixture(scope="module")
def page(plain):
    return (plain.found.recipe.output / "report.html").read_text(encoding="utf-8")


def without_scripts(page):
    return re.sub(r"<script>.*?</script>", "", page, flags=re.DOTALL)


def with_recipe(result, **changes):
    return replace(result, found=replace(result.found, recipe=result.found.recipe.model_copy(update=changes)))


def test_page_asks_for_nothing_from_outside(page):
    assert len(page.encode()) < 8_000_000
    body = without_scripts(page)
    assert not re.search(r"""(?:src|href)\s*=\s*["']?(?:https?:)?//""", body)
    assert not re.search(r"<script[^>]+src", page)
    assert "@import" not in body


def test_page_says_what_matters(page, plain):
    assert plain.answer().split(";")[0] in page
    for caution in CAUTIONS:
        assert caution.split("'")[0] in page
    assert "parts sum to 1.37, expected 1 ± 0.02" in page
    assert "KB87-077" in page
    assert "river inlet, not rimmed" in page
    assert "every water cell has a bed" in page  # a readiness check
    assert "Second opinion by" in page
    assert "Surveys of Kestrel Bight, 1987" in page  # a credit of the recipe
    assert all(re.search(r'alt="[^"]{20,}"', tag) for tag in re.findall(r"<img[^>]*>", without_scripts(page)))


def test_the_reading_order_is_that_of_a_reader(page):
    places = [page.index(f'id="{name}"') for name in (
        "map", "structure", "error", "triangle", "rows", "bed", "opinion", "methods", "defaults", "credits", "settings", "cautions",
    )]  # fmt: skip
    assert places == sorted(places)


def test_no_path_of_the_machine_stands_in_the_page(plain, page):
    for path in (Path.home(), plain.found.recipe.output, plain.found.recipe.output.parent, Path(__file__).parent):
        assert str(path) not in page
    elsewhere = plain.found.recipe.model_copy(update={"output": Path("/somewhere/private/out")})
    text = resolved_toml(elsewhere, plain.found.recipe.output.parent, outside="name")
    assert 'output = "out"' in text
    assert ".." not in text
    assert "private" not in text


def test_hidden_stations_are_nowhere_on_the_page(plain, page, tmp_path):
    hidden = with_recipe(plain, report=Report(stations="hidden"))
    quiet = write_page(hidden, result_picture(hidden), "", versions_line(plain))
    ids = plain.found.stations.samples["id"]
    assert "KB16-001" in set(ids)
    assert "KB16-001" in page
    assert "KB16-001" not in quiet
    assert "held_out.csv, audit.csv and the input files still hold them" in quiet
    assert "held_out.csv, audit.csv and the input files still hold them" not in page
    assert "Where the map was wrong" not in quiet
    assert result_picture(hidden).content != result_picture(plain).content
    write_figures(hidden, tmp_path / "figures")
    assert not (tmp_path / "figures" / "residuals.png").exists()


def test_hostile_text_is_shown_as_text(plain):
    hostile = with_recipe(plain, title=HOSTILE)
    page = write_page(hostile, result_picture(plain), HOSTILE, versions_line(plain))
    body = without_scripts(page)
    assert "<script>document.title" not in page
    assert body.count("&lt;script&gt;") >= 3  # title, heading, settings


def test_a_map_that_is_not_kriged_claims_no_kriging(small, tmp_path):
    quick = {
        "validation": {"count": 3, "compare": []},
        "composition": {"zeros": "replace"},
        "outputs": {"geotiff": False},
    }
    result = build(small, output=tmp_path / "out", method={"name": "inverse_distance"}, **quick)
    text, references = methods_paragraph(result)
    assert "come from inverse distance, as back-transformed coordinates" in text
    assert "kriging" not in text
    assert "Covariances were fitted" not in text
    assert not any("Vigsnes" in r or "Patterson" in r for r in references)


def test_methods_paragraph_has_this_run_s_numbers_and_its_sources(plain):
    text, references = methods_paragraph(plain)
    counts = plain.found.stations.counts
    assert f"Of {counts['rows_read']} rows in 4 files, {counts['rows_used']} were used" in text
    assert f"mud {plain.found.validation.chosen.score('mud', 'rmse'):.3f}" in text
    assert "8,852 water cells" in text
    assert "Linnenbrink et al. 2024" in text
    assert any(r.startswith("Linnenbrink") for r in references)
    assert not any(r.startswith("Egozcue") for r in references)  # no ilr in this run
    cited = set(re.findall(r"[A-Z][^\s();,]+(?: et al\.| and [A-Z][^\s();,]+)? \d{4}", text))
    assert cited <= set(SOURCES)
    assert references == sorted(references)


def test_defaults_tell_what_they_did_and_leave_out_what_was_chosen(plain):
    table = page_tables(plain)["defaults"]
    rows = {row[0]: row for row in table.rows}
    assert "method.neighbours" not in rows  # the demo's recipe gives it
    assert rows["composition.zeros"][1] == "auto"
    assert plain.found.mapper.treatment.label in rows["composition.zeros"][2]
    assert rows["target.points_per_cell"][2] == f"{plain.points_per_side**2} in every cell"
    assert all(row[3] for row in table.rows)  # every setting says what it means
    assert all(row[2] != "–" for row in table.rows[: table.lead])


def test_figures_for_papers_are_the_same_bytes_each_time(plain, tmp_path):
    for folder in ("a", "b"):
        write_figures(plain, tmp_path / folder)
    made = sorted(p.name for p in (tmp_path / "a").iterdir())
    assert {"mud_fraction.png", "mud_fraction.pdf", "texture_class.pdf", "variograms.pdf", "triangle.png"} <= set(made)
    assert len(made) == 32
    for name in made:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
