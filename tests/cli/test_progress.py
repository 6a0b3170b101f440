"""What a long run tells while it works: bars on a terminal, plain lines in a log, nothing when quiet."""

import os
import pty
import subprocess
import sys

import pytest

from texture_cli.progress import Lines, make_progress, seconds_text


class Clock:
    now = 0.0

    def __call__(self):
        return self.now


def test_a_long_stage_says_count_and_time_left_and_a_short_one_nothing():
    said, clock = [], Clock()
    lines = Lines(said.append, clock)
    with lines.stage("read the grid", total=2) as advance:
        clock.now += 1.0
        advance(2)
    with lines.stage("validate", total=40) as advance:
        for _ in range(40):
            clock.now += 1.0
            advance(1)
    assert said == [
        "… 2 validate: 12 % (5 of 40), about 35 s left",
        "… 2 validate: 50 % (20 of 40), about 20 s left",
        "… 2 validate: 88 % (35 of 40), about 5 s left",
        "… 2 validate: done in 40 s",
    ]


def test_a_stage_without_steps_says_that_it_is_at_work(monkeypatch):
    monkeypatch.setattr("texture_cli.progress.PATIENCE_S", 0.01)
    said = []
    import time

    with Lines(said.append).stage("fit the spatial structure"):
        time.sleep(0.1)
    assert said[0] == "… 1 fit the spatial structure …"
    assert said[1].startswith("… 1 fit the spatial structure: done in 1 s")


def test_quiet_says_nothing(capsys):
    with make_progress(quiet=True) as progress, progress.stage("estimate", total=2) as advance:
        advance(2)
    assert capsys.readouterr() == ("", "")


@pytest.mark.parametrize(("seconds", "text"), [(59.6, "1 min"), (60.4, "1 min"), (3600, "1 h 0 min")])
def test_times_read_as_a_person_says_them(seconds, text):
    assert seconds_text(seconds) == text


def on_a_terminal(code, **environment):
    """Run Python with a terminal as its standard error, and return what it printed there."""
    outer, inner = pty.openpty()
    base = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR", "TTY_COMPATIBLE")}
    done = subprocess.Popen([sys.executable, "-c", code], stderr=inner, env={**base, "TERM": "xterm", **environment})
    os.close(inner)
    text = b""
    while True:
        try:
            more = os.read(outer, 4096)
        except OSError:
            break
        if not more:
            break
        text += more
    assert done.wait() == 0
    return text.decode()


BAR = (
    "from texture_cli.progress import make_progress\n"
    "with make_progress(quiet=False) as p, p.stage('estimate', total=3) as advance: advance(3)"
)


def test_a_terminal_gets_bars_in_colour_and_without_where_no_color_is_set():
    bars = on_a_terminal(BAR)
    assert "1 estimate" in bars
    assert "3/3" in bars
    assert "\x1b[3" in bars
    plain = on_a_terminal(BAR, NO_COLOR="1")
    assert "1 estimate" in plain
    assert "\x1b[3" not in plain
    assert on_a_terminal(BAR, TERM="dumb") == ""
