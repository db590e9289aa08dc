"""What is printed: narrow enough, plain in a pipe, no bigger claim than was shown."""

import dataclasses
import io

import pytest
from rich.console import Console

from layout.outputs.terminal import print_result


def _printed(result, width=80, terminal=False):
    stream = io.StringIO()
    console = Console(file=stream, width=width, force_terminal=terminal, color_system=None if not terminal else "auto")
    print_result(result, console)
    return stream.getvalue()


@pytest.mark.parametrize("width", [60, 80, 120])
def test_fits_the_width(result, width):
    assert max(len(line) for line in _printed(result, width).splitlines()) <= width


def test_numbers_are_whole_at_80_columns(result):
    words = _printed(result).split()
    for number in ("10.333", "10.339", "0.05", "5.440", "31", "6.200", "60.0", "14.8"):
        assert number in words
    assert " ".join(words).count("more than 64") == 1
    assert words.count("31") == 2
    assert "…" not in "".join(words)


def test_plain_in_a_pipe_and_names_are_words(result):
    text = _printed(result)
    assert "\x1b" not in text
    joined = " ".join(text.split())
    assert "[bold]Ω" in joined
    assert "[red]ñ" in joined


def test_hostile_names_send_no_codes_to_a_terminal(result):
    assert "\x1b[31m" not in _printed(result, terminal=True)


def test_claims(result):
    assert "proven to 0.1 %" in " ".join(_printed(result).split())
    open_layout = dataclasses.replace(result.layouts[0], proven=False, gap_percent=0.1004)
    stopped = dataclasses.replace(result, layouts=(open_layout,), stopped_by_clock=True)
    text = " ".join(_printed(stopped).split())
    assert text.count("0.11") == 2  # rounded up in table and sentence: 0.10 would look proven
    assert "Better layouts may exist" in text
    assert "stopped by its time allowance" in text
    assert "optimal" not in text.lower()
    assert "yes" not in text.split()
