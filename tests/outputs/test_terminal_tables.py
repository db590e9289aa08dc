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
    assert "1310 fT" in " ".join(words)
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


def test_every_sensor_of_layout_1_has_a_row_with_its_nearest_position(result):
    lines = _printed(result, 120).splitlines()
    begin = next(n for n, line in enumerate(lines) if line.startswith("Sensors of layout 1"))
    rows = [line.split() for line in lines[begin:] if line.split() and line.split()[0].isdigit()]
    sensors = result.layouts[0].sensors
    assert [int(row[0]) for row in rows] == [sensor.number for sensor in sensors]
    for row, sensor in zip(rows, sensors, strict=True):
        told = f"{sensor.nearest_name} {1000 * sensor.nearest_offset:.1f} mm".replace(" 0.0 mm", " on the spot")
        assert told in " ".join(row)
        assert f"{sensor.worth:.3f}" in row
        assert ("reference" in row) == (sensor.role == "reference")


def test_figures_outside_their_band_are_said_to_be(result):
    text = " ".join(_printed(result, 200).split())
    assert text.count("outside the band") == 1
    assert "100 to 1000 fT outside the band, above it" in text
    assert "5 to 9 fT below the band; for comparison" in text
    assert "10 to 50 µV set by the brief" in text


def test_effort_housings_and_where_the_bound_is_from(result, electrodes_only):
    text = " ".join(_printed(result).split())
    assert (
        "20 starts, 1 swap. Bound: 340 rounds of tightening; branch and bound: 120 parts examined, 7 left open." in text
    )
    assert "Pairs of housings that meet: 2 in layout 1, 1 in layout 2;" in text
    assert "(bound from branch and bound)" in text
    assert "ousings" not in _printed(electrodes_only)


def test_notes_stand_under_their_headings(result):
    lines = _printed(result).splitlines()
    assert lines[lines.index("Head and model") + 1] == "- Spherical head: only a quick model."
    assert lines[lines.index("Strengths and noise") + 1].startswith("- Brain noise")
    assert "Ranking" not in lines  # nothing under it
