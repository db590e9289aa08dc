"""Progress and colours as a terminal, a pipe and their variables ask for; Ctrl-C in a real process."""

import os
import re
import signal
import subprocess
import sys

import pytest
from shown import COLOUR, CONTROL, ROOT, spawned, whole_output
from small_brief import SMALL_BRIEF

WORKING = """
import time
from layout.cli.course import Stage
from layout.cli.shared import Printing
printing = Printing(False, {quiet})
with printing.progress((Stage("loading", 0.4), Stage("part", 1.0))) as progress:
    progress("loading [red]markup[/red]")
    time.sleep(0.25)
    for number in range(1, 4):
        progress(f"part {{number}} of 3")
        time.sleep(0.25)
printing.result(lambda console: console.print("a word", style="yellow"), lambda: "", "the end")
"""


def working(columns=80, quiet=False, **env):
    child = spawned("-c", WORKING.format(quiet=quiet), columns=columns, **env)
    return whole_output(child)


def test_a_terminal_shows_what_is_done_a_bar_and_the_time_left_and_is_left_clean():
    said = working()
    plain = CONTROL.sub("", said)
    for words in ("loading [red]markup[/red]", "part 2 of 3", "━", "0:00:00", "a few seconds left"):
        assert words in plain
    assert COLOUR.search(said)
    assert said.count("\x1b[?25l") == said.count("\x1b[?25h") == 1  # the cursor comes back
    assert said.rstrip().endswith("the end")
    last = CONTROL.sub("", said[said.rindex("\x1b[2K") :])
    assert "━" not in last
    assert "part" not in last


def test_no_color_is_honoured():
    said = working(NO_COLOR="1")
    assert "part 2 of 3" in said
    assert not COLOUR.search(said)


def test_a_terminal_that_cannot_move_its_cursor_gets_no_bar():
    assert working(TERM="dumb").split() == ["a", "word", "the", "end"]


def test_quiet_shows_and_says_nothing():
    assert working(quiet=True) == ""


@pytest.mark.parametrize("columns", [60, 100])
def test_the_bar_fits_the_terminal(columns):
    lines = re.split(r"[\r\n]+", CONTROL.sub("", working(columns=columns)))
    shown = [line for line in lines if "━" in line]
    assert shown
    assert max(map(len, shown)) <= columns


@pytest.mark.parametrize("env", [{}, {"FORCE_COLOR": "1"}])
def test_a_pipe_gets_no_progress_and_no_colours_unless_forced(env):
    given = {**os.environ, "PYTHONPATH": str(ROOT), "TERM": "xterm-256color", **env}
    said = subprocess.run(
        [sys.executable, "-c", WORKING.format(quiet=False)], capture_output=True, text=True, env=given, check=True
    )
    assert said.stderr == ""
    assert bool(COLOUR.search(said.stdout)) == bool(env)
    assert CONTROL.sub("", said.stdout) == "a word\nthe end\n"


@pytest.mark.parametrize("command", ["design", "curve"])
def test_ctrl_c_in_a_terminal_leaves_no_debris_and_no_traceback(tmp_path, command):
    (tmp_path / "study.toml").write_text(SMALL_BRIEF)
    more = ["--counts", "3:9:2"] if command == "curve" else []
    child = spawned("-m", "layout", command, "study.toml", *more, folder=tmp_path)
    child.expect("laying the candidate sites|lead fields", timeout=60)
    child.sendintr()
    said = child.before + whole_output(child)
    assert child.exitstatus == 130
    assert "Stopped." in said
    assert "Traceback" not in said
    assert said.count("\x1b[?25l") == said.count("\x1b[?25h")
    assert [path.name for path in tmp_path.iterdir()] == ["study.toml"]


@pytest.mark.slow
@pytest.mark.parametrize("after", [0.5, 1.5, 3.0])
def test_an_interrupt_at_any_time_in_a_pipe_is_clean(tmp_path, after):
    (tmp_path / "study.toml").write_text(SMALL_BRIEF)
    words = [sys.executable, "-m", "layout", "design", "study.toml"]
    env = {**os.environ, "PYTHONPATH": str(ROOT)}
    process = subprocess.Popen(words, cwd=tmp_path, env=env, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    try:
        out, said = process.communicate(timeout=after)
    except subprocess.TimeoutExpired:
        process.send_signal(signal.SIGINT)
        out, said = process.communicate(timeout=30)
        # Python ends itself by the signal, 130 to a shell, where it struck inside exec() of a text.
        assert process.returncode in (130, -signal.SIGINT)
        assert said == "Stopped.\n"
        assert out == ""
        assert [path.name for path in tmp_path.iterdir()] == ["study.toml"]
        return
    pytest.skip(f"done before {after} s: {out[-60:]}")
