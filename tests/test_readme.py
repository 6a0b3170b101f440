"""What the README shows works as it stands there."""

import re
from pathlib import Path

import matplotlib as mpl
import pytest
from typer.main import get_command

from texture_cli.main import app

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")


@pytest.mark.slow
def test_the_example_in_python_runs(small, monkeypatch, capsys):
    mpl.use("Agg")
    import matplotlib.pyplot as plt

    monkeypatch.chdir(small.parent)
    blocks = re.findall(r"```python\n(.*?)```", README, flags=re.DOTALL)
    assert blocks
    for block in blocks:
        names: dict = {}
        exec(compile(block, "README.md", "exec"), names)
    said = capsys.readouterr().out
    assert "Stations: 30 with sediment" in said
    assert "30 stations; held-out RMSE" in said
    assert len(plt.get_fignums()) == 3
    assert names["result"].estimate.fractions.shape == (240, 3)
    plt.close("all")


def test_every_command_in_it_exists_with_its_options():
    commands = get_command(app).commands
    shown = re.findall(r"`(texture [a-z-][^`]*)`|^    (texture [a-z].*)$", README, flags=re.MULTILINE)
    lines = [(a or b).split("#")[0].split(">")[0].split() for a, b in shown]
    assert len(lines) >= 6
    for _, name, *words in lines:
        if name.startswith("-"):
            continue
        options = {option for parameter in commands[name].params for option in parameter.opts}
        assert {w.split("=")[0] for w in words if w.startswith("-")} <= options, (name, words)


def test_every_file_that_it_links_is_there():
    for link in re.findall(r"\]\(([^)#]+)\)", README):
        if not link.startswith("http"):
            assert (Path(__file__).parents[1] / link).exists(), link
