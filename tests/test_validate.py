"""Cross-validation as a whole: resumed, without leaks, and in one clear line where it cannot be."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import tomli_w

import texture.validate
from texture.errors import TextureError
from texture.pipeline import validate

pytestmark = pytest.mark.slow
OF_MAP = 1 + 3  # mappers on all stations: the map's own, and those with its limit of zeros, half of it and twice


def recipe(folder, table, **blocks):
    table.to_csv(folder / "grabs.csv", index=False)
    settings = {
        "title": "Validate",
        "output": "out",
        "samples": [{"file": "grabs.csv", "crs": "EPSG:32626"}],
        "target": {"bounds": [500_000.0, 4_900_000.0, 520_000.0, 4_920_000.0], "cell_size": 500.0, "crs": "EPSG:32626"},
        "composition": {"zeros": "replace", "detection_limit": 0.001},
        "validation": {"compare": ["nearest", "inverse_distance"], "count": 5},
        "bed": {
            "classes": [
                {"name": "mud", "part": "mud", "share": 1.0, "grain": {"diameter_m": 15e-6},
                 "water_column": {"settling_velocity_m_s": 1e-4}, "erosion": {"critical_stress_pa": 0.1, "rate": 5e-5}},
                {"name": "sand", "part": "sand", "share": 1.0, "grain": {"diameter_m": 3e-4}},
                {"name": "gravel", "part": "gravel", "share": 1.0, "grain": {"diameter_m": 5e-3}},
            ]
        },
    }  # fmt: skip
    for name, block in blocks.items():
        settings[name] = {**settings.get(name, {}), **block}
    (folder / "recipe.toml").write_text(tomli_w.dumps(settings))
    return folder / "recipe.toml"


@pytest.fixture(scope="module")
def table():
    rng = np.random.default_rng(1)
    x, y = rng.uniform(500_500, 519_500, 150), rng.uniform(4_900_500, 4_919_500, 150)
    wave = np.sin((x - 500_000) / 3000) + np.cos((y - 4_900_000) / 4000)
    mud = 1 / (1 + np.exp(-1.5 * wave - 0.4 * rng.standard_normal(150)))
    gravel = (1 - mud) / (1 + np.exp(2.0 + wave + 0.4 * rng.standard_normal(150)))
    parts = {"mud": mud.round(4), "sand": (1 - mud.round(4) - gravel.round(4)).round(4), "gravel": gravel.round(4)}
    return pd.DataFrame({"id": [f"S{i}" for i in range(150)], "easting": x.round(), "northing": y.round(), **parts})


def test_interrupted_validation_goes_on_to_the_same_bytes(tmp_path, table, monkeypatch):
    whole = validate(recipe(tmp_path, table))
    expected = [path.read_bytes() for path in whole.files]
    assert not (tmp_path / "out" / "unfinished_validation").exists()
    made, stop = [], 8
    make_mapper = texture.validate.make_mapper

    def counted(*args, **settings):
        if len(made) == stop:
            raise KeyboardInterrupt
        made.append(args[0])
        return make_mapper(*args, **settings)

    monkeypatch.setattr(texture.validate, "make_mapper", counted)
    with pytest.raises(KeyboardInterrupt):
        validate(tmp_path / "recipe.toml", overwrite=True)
    assert [path.read_bytes() for path in whole.files] == expected  # earlier results are as they were
    assert len(list((tmp_path / "out" / "unfinished_validation").rglob("*.npz"))) == 8
    made.clear()
    stop = 100
    again = validate(tmp_path / "recipe.toml", overwrite=True)
    runs = len(whole.validation.tried) + 2
    assert len(made) == 5 * runs - 8 + OF_MAP  # the folds that were open, and the map's own
    assert [path.read_bytes() for path in again.files] == expected
    assert not (tmp_path / "out" / "unfinished_validation").exists()


def test_journal_of_other_settings_is_not_taken_up(tmp_path, table, monkeypatch):
    made = []
    make_mapper = texture.validate.make_mapper

    def counted(*args, **settings):
        if len(made) == 3:
            raise KeyboardInterrupt
        made.append(args[0])
        return make_mapper(*args, **settings)

    monkeypatch.setattr(texture.validate, "make_mapper", counted)
    with pytest.raises(KeyboardInterrupt):
        validate(recipe(tmp_path, table))
    made.clear()
    monkeypatch.setattr(texture.validate, "make_mapper", lambda *a, **s: (made.append(a[0]), make_mapper(*a, **s))[1])
    found = validate(tmp_path / "recipe.toml", method={"neighbours": 24})
    assert len(made) == 5 * (len(found.validation.tried) + 2) + OF_MAP


def test_shuffled_fractions_have_no_skill(tmp_path, table):
    shuffled = table.copy()
    order = np.random.default_rng(2).permutation(150)
    shuffled[["mud", "sand", "gravel"]] = table[["mud", "sand", "gravel"]].to_numpy()[order]
    held = validate(recipe(tmp_path, shuffled)).validation.chosen
    for part in ("mud", "sand", "gravel"):
        score = held.find(part, "r_squared")
        assert score.low <= 0.0
        assert score.value < 0.05


def test_duplicated_stations_do_not_lift_the_score(tmp_path, table):
    (tmp_path / "once").mkdir()
    (tmp_path / "twice").mkdir()
    once = validate(recipe(tmp_path / "once", table)).validation.chosen
    twin = table.assign(id=table["id"] + "b")
    twin["northing"] += 0.3  # another grab, a hand's breadth away
    twice = validate(recipe(tmp_path / "twice", pd.concat([table, twin]))).validation
    score = once.find("mud", "r_squared")
    assert twice.chosen.score("mud", "r_squared") <= score.high
    assert twice.chosen.score("mud", "rmse") > 0.9 * once.score("mud", "rmse")


def test_repeats_say_what_is_attainable_and_figures_are_drawn(tmp_path, table):
    again = table.head(8).assign(id=[f"R{i}" for i in range(8)])
    shift = np.minimum(0.05, again["sand"] / 2)
    again["mud"], again["sand"] = again["mud"] + shift, again["sand"] - shift
    both = pd.concat([table, again], ignore_index=True)
    found = validate(recipe(tmp_path, both, outputs={"figures": True}, validation={"compare": ["nearest"], "count": 4}))
    held = found.validation.chosen
    assert held.score("mud", "repeated_places") == 8.0
    # Pairs that lie `shift` apart have a variance of shift² / 2; eight stations are means of two, 142 are single samples.
    mud = found.observations.fractions[:, 0]
    noise = np.mean(shift**2 / 2) * (142 + 8 / 2) / 150
    assert held.score("mud", "r_squared_attainable") == pytest.approx(1.0 - noise / mud.var(), abs=1e-6)
    assert "R² attainable at best" in "\n".join(found.summary_lines())
    scores = pd.read_csv(tmp_path / "out" / "validation.csv")
    tenths = scores[scores["score"].str.startswith("pit_")].groupby(["method", "treatment", "part"])["value"].sum()
    assert tenths.to_numpy() == pytest.approx(1.0)
    assert set(scores["stations"]) == {"measured"}
    drawn = {p.name for p in (tmp_path / "out" / "figures").iterdir()}
    assert {"held_out.png", "residuals.pdf", "calibration.png", "pit.png"} <= drawn


def test_surveys_are_held_out_whole(tmp_path, table):
    surveyed = table.assign(
        survey=np.where(table["easting"] < 507_000, "west", np.where(table["easting"] < 513_000, "mid", "east"))
    )
    found = validate(recipe(tmp_path, surveyed, validation={"compare": ["nearest"], "count": 5, "group_by": "survey"}))
    folds = found.validation.folds
    assert folds.count == len(np.unique(found.observations.survey))
    assert "5 folds were asked, but stations make" in folds.note or folds.count == 5


def test_best_takes_the_simplest_of_the_good_and_says_so(tmp_path, table):
    found = validate(recipe(tmp_path, table, method={"name": "best"}, validation={"compare": ["nearest"], "count": 4}))
    standings = found.validation.standings
    assert [s.method for s in standings] == [
        "mean", "nearest", "triangulation", "inverse_distance", "kriging", "forest", "forest_kriging", "average"
    ]  # fmt: skip
    chosen = next(s for s in standings if s.simplest)
    best = min(standings, key=lambda s: s.energy_score)
    assert found.recipe.method.name == found.validation.method == found.mapper.name == chosen.method
    assert chosen.energy_score <= best.energy_score + chosen.standard_error
    assert all(s.above_best > s.standard_error for s in standings[: standings.index(chosen)])
    text = "\n".join(found.summary_lines())
    assert "within one standard error" in text
    assert text.count("energy score") >= 2
    mean, variance = found.mapper.predict(found.some_centres(50))
    assert np.isfinite(mean).all()
    assert (variance >= 0).all()


def test_average_can_be_the_map(tmp_path, table):
    found = validate(recipe(tmp_path, table, method={"name": "average"}, validation={"count": 4}))
    weights = found.validation.judged.settings["weights"]
    assert sum(weights.values()) == pytest.approx(1.0)
    assert found.mapper.name == "average"
    nearest = next(m for m in found.validation.methods if m.method == "nearest")
    assert found.validation.chosen.score("all", "energy_score") < nearest.score("all", "energy_score")


@pytest.mark.parametrize("what", ["constant", "one class"])
def test_beds_that_hardly_vary_divide_by_nothing(tmp_path, table, what):
    flat = table.copy()
    if what == "constant":
        flat[["mud", "sand", "gravel"]] = [0.2, 0.7, 0.1]
    else:
        mud = 0.4 + 0.02 * table["mud"]
        flat["mud"], flat["sand"], flat["gravel"] = mud.round(4), (1 - mud.round(4)).round(4), 0.0
    found = validate(recipe(tmp_path, flat)).validation
    if what == "constant":
        assert np.isnan(found.chosen.score("mud", "r_squared"))
        assert found.chosen.score("mud", "rmse") < 1e-3
    # One class is measured: agreement cannot be beyond that of chance, and is not divided by nothing.
    kappa = found.chosen.score("all", "class_kappa")
    assert np.isnan(kappa) or kappa == 0.0
    assert all(np.isfinite(s.energy_score) for s in found.standings)


@pytest.mark.parametrize(
    ("blocks", "rows", "message"),
    [
        ({}, 4, "4 usable stations, expected at least 5"),
        ({"method": {"name": "kriging_with_covariates"}}, 150, r"needs \[\[method.covariates\]\]"),
        (
            {"validation": {"compare": [], "count": 4}, "method": {"name": "average"}},
            150,
            "an average needs two other methods",
        ),
    ],
)
def test_what_cannot_be_done_is_said_in_one_line(tmp_path, table, blocks, rows, message):
    with pytest.raises(TextureError, match=message) as caught:
        validate(recipe(tmp_path, table.head(rows), **blocks))
    assert "\n" not in str(caught.value)
