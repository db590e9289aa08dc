"""The report's charts, read back: what is drawn is what was found."""

import base64
import io
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from made_evidence import with_evidence
from PIL import Image

from layout.outputs.report.charts import (
    BOUND,
    FOUND,
    STANDARD,
    correlation_labels,
    correlation_png,
    curve_key,
    curve_svg,
    middle_correlation,
    noise_rows,
    strongest_pairs,
    ticks,
)


@pytest.fixture(scope="module")
def evidence(result):
    return with_evidence(result).evidence


def drawn(svg, colour):
    """Values that a line stands for, read off the picture by the labels of its axes."""
    labels = [
        (float(x), float(y), text) for x, y, text in re.findall(r'<text x="([\d.]+)" y="([\d.]+)"[^>]*>([\d.]+)<', svg)
    ]
    below = max(y for _, y, _ in labels)
    across = np.array([(x, float(text)) for x, y, text in labels if y == below])
    upward = np.array([(y - 4, float(text)) for _, y, text in labels if y != below])  # written 4 below their line
    line = re.search(rf'<polyline points="([^"]*)" fill="none" stroke="{colour}"', svg)[1]
    spots = np.array([[float(part) for part in spot.split(",")] for spot in line.split()])
    x = np.polyval(np.polyfit(*across.T, 1), spots[:, 0])
    return x, np.polyval(np.polyfit(*upward.T, 1), spots[:, 1])


def test_the_curve_is_read_back_off_its_own_axes(evidence):
    curve = evidence.curve
    svg = curve_svg(curve)
    spent = [one.spent for one in curve.points]
    for colour, expected in (
        (FOUND, [one.value for one in curve.points]),
        (BOUND, [one.bound for one in curve.points]),
    ):
        x, y = drawn(svg, colour)
        assert x == pytest.approx(spent, abs=0.01 * max(spent))
        assert y == pytest.approx(expected, abs=0.01 * max(expected))
    assert len(drawn(svg, STANDARD)[0]) == sum(one.standard is not None for one in curve.points)
    assert [words for _, _, words in curve_key(curve)][-1] == "knee of the curve"


@given(st.floats(1e-6, 1e6))
def test_ticks_are_round_and_few(high):
    found = ticks(0.0, high)
    assert 2 <= len(found) <= 8
    assert found[0] == 0.0
    assert found[-1] <= high * (1 + 1e-6)
    step = found[1] - found[0]
    assert found[-1] + step > high * (1 - 1e-6)
    assert f"{step:.0e}"[0] in "125"


def test_parts_of_the_noise_make_the_whole(evidence):
    noise = evidence.noise[0]
    rows = noise_rows(noise)
    assert [row["number"] for row in rows] == noise.sensor.tolist()
    for row in rows:
        parts = np.array([float(part) for part in row["parts"]])
        assert float(row["whole"]) == pytest.approx(np.sqrt((parts**2).sum()), rel=0.005)
        shares = np.array([float(piece["width"]) for piece in row["pieces"]])
        assert shares == pytest.approx(100 * parts**2 / (parts**2).sum(), abs=0.3)
        assert float(row["pieces"][1]["start"]) == pytest.approx(shares[0], abs=0.02)
    assert {row["unit"] for row in rows} == {"µV", "fT"}


def test_correlation_is_drawn_cell_by_cell(evidence):
    noise = evidence.noise[0]
    n = len(noise.names)
    pixels = np.asarray(
        Image.open(io.BytesIO(base64.b64decode(correlation_png(noise.correlation)))).convert("RGB"), float
    )
    assert pixels.shape == (n, n, 3)
    blue_less_red = pixels[..., 2] - pixels[..., 0]
    off = ~np.eye(n, dtype=bool)
    assert np.corrcoef(blue_less_red[off], noise.correlation[off])[0, 1] > 0.99
    assert (blue_less_red[np.eye(n, dtype=bool)] == blue_less_red.max()).all()
    pairs = strongest_pairs(noise)
    largest = np.sort(np.abs(noise.correlation[np.triu_indices(n, 1)]))[::-1]
    assert [abs(float(value)) for _, _, value in pairs] == pytest.approx(largest[: len(pairs)], abs=0.005)
    assert float(middle_correlation(noise)) == pytest.approx(np.median(largest), abs=0.005)
    assert [number for _, number in correlation_labels(noise)] == [str(k) for k in dict.fromkeys(noise.sensor.tolist())]
