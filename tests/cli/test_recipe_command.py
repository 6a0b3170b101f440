"""What a recipe may hold, printed from the fields that check it; completion, help and plan."""

import json
import os
import resource
import subprocess
import sys
import tomllib

import pytest
import tomli_w

from texture_cli.main import app


def texture(*arguments, **environment):
    return subprocess.run(
        [sys.executable, "-m", "texture_cli", *map(str, arguments)],
        capture_output=True, text=True, check=False, env={**os.environ, "COLUMNS": "100", "NO_COLOR": "1", **environment},
    )  # fmt: skip


def test_schema_is_printed_as_json():
    done = texture("recipe", "--schema")
    assert done.returncode == 0, done.stderr
    schema = json.loads(done.stdout)
    assert schema["title"] == "Recipe of Seabed Texture"
    assert schema["additionalProperties"] is False
    assert schema["$defs"]["Method"]["properties"]["neighbours"]["maximum"] == 500


def test_recipe_wants_to_know_which():
    for arguments in ((), ("--schema", "--reference")):
        done = texture("recipe", *arguments)
        assert done.returncode == 2
        assert done.stderr == "texture: recipe needs one of --schema and --reference\n"


def test_shells_complete_commands_and_settings():
    code = "from texture_cli.main import app; app(prog_name='texture')"

    def complete(words, position):
        environment = {
            **os.environ,
            "_TEXTURE_COMPLETE": "complete_bash",
            "COMP_WORDS": words,
            "COMP_CWORD": str(position),
        }
        done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, env=environment)
        return done.stdout.split()

    assert complete("texture bu", 1) == ["build"]
    assert complete("texture build --set method.neighbours", 3) == ["method.neighbours="]


def test_help_has_sections_and_is_there_at_once():
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    done = texture("--help")
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    for section in ("To start", "The work", "To look at"):
        assert section in done.stdout
    assert "Example: texture recipe --schema" in texture("recipe", "--help").stdout
    for panel in ("What to do", "What to say", "--plan"):
        assert panel in texture("build", "--help").stdout
    # Seconds of the processor, which other work on the machine does not stretch as it does the clock's.
    assert after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime < 0.4


def test_plan_counts_says_memory_and_time_and_writes_nothing(small):
    done = texture("build", small, "--plan", "--json")
    assert done.returncode == 0, done.stderr
    data = json.loads(done.stdout)
    assert (data["stations"], data["cells"], data["points_per_cell"], data["folds"]) == (30, 240, 1, 4)
    assert 300 < data["memory_mb"] < 1000
    assert set(data["seconds"]) == {"read", "fit", "validate", "estimate", "write"}
    assert "a plan, nothing was written" in done.stderr
    assert "memory      about 0." in done.stderr
    assert "may be off by a factor of three" in done.stderr
    assert not (small.parent / "out").exists()


def test_plan_grows_with_the_grid_and_warns_where_memory_is_short(small, monkeypatch):
    from texture import planning

    first = planning.plan(small)
    settings = tomllib.loads(small.read_text())
    settings["target"]["cell_size"] = 20.0
    small.write_text(tomli_w.dumps(settings))
    second = planning.plan(small)
    assert second.cells == 625 * first.cells
    assert second.seconds["estimate"] == pytest.approx(625 * first.seconds["estimate"])
    assert second.memory_mb > first.memory_mb + 50
    assert not any("may not fit" in line for line in second.summary_lines())
    monkeypatch.setattr(planning, "_machine_gb", lambda: 0.5)
    assert "this may not fit into memory: choose larger cells" in second.summary_lines()[-1]


def test_plan_finds_mistakes_as_the_build_would(small):
    settings = small.read_text().replace("width_cells = 2", "width_cells = 500")
    small.write_text(settings)
    done = texture("build", small, "--plan")
    assert done.returncode == 2
    assert done.stderr.startswith("texture: ")
    assert "rim" in done.stderr


def test_every_command_is_listed_in_the_help():
    names = {info.name or info.callback.__name__ for info in app.registered_commands}
    assert names == {"draft", "recipe", "intake", "validate", "build", "cases", "inspect"}


def test_plan_counts_a_fold_for_each_station(small):
    from texture import planning

    made = planning.plan(small, validation={"folds": "each"})
    assert made.summary()["folds"] == 30
    assert any('folds = "each" fits everything anew for each of 30 stations' in line for line in made.summary_lines())


@pytest.mark.parametrize("module", ["texture_cli", "texture_cli.main"])
def test_the_command_runs_as_a_module(module):
    done = subprocess.run([sys.executable, "-m", module, "--version"], capture_output=True, text=True, check=True)
    assert done.stdout.startswith("texture ")
