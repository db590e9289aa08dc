"""Directions in plain words, against cases that can be read off a head by eye."""

import numpy as np
import pytest

from layout.outputs.placement_tables import Room
from layout.outputs.sheet.words import axis_words, direction_words, offset_words, room_at

TOP, LEFT_SIDE, RIGHT_SIDE, FOREHEAD, BACK = np.array(
    [[0, 0, 1.0], [-1.0, 0, 0], [1.0, 0, 0], [0, 1.0, 0], [0, -1.0, 0]]
)


@pytest.mark.parametrize(
    ("normal", "way", "words"),
    [
        (TOP, (3, 6, 0), "6 mm front, 3 mm right"),
        (TOP, (-6, -3, 0), "6 mm left, 3 mm back"),
        (LEFT_SIDE, (0, -4, 5), "5 mm up, 4 mm back"),
        (RIGHT_SIDE, (0, 4, -5), "5 mm down, 4 mm front"),
        (FOREHEAD, (-7, 0, 2), "7 mm left, 2 mm up"),
        (BACK, (0, 0, -9), "9 mm down"),
        (TOP, (8, 0.2, 0), "8 mm right"),  # a fifth of a millimetre is not worth a word
        (TOP, (0.1, 0.2, 0), ""),
    ],
)
def test_offsets(normal, way, words):
    way = 1e-3 * np.array(way, dtype=float)
    assert offset_words(normal, way, float(np.linalg.norm(way))) == words


def test_the_parts_make_up_the_length_along_the_scalp():
    """A way that dips under the tangent plane is laid flat and keeps its length."""
    rng = np.random.default_rng(3)
    for _ in range(50):
        normal = rng.normal(size=3)
        normal /= np.linalg.norm(normal)
        parts = [int(part.split()[0]) for part in offset_words(normal, 0.02 * rng.normal(size=3), 0.8).split(", ")]
        assert np.hypot(*parts, *[0] * (2 - len(parts))) == pytest.approx(800, abs=0.75)  # whole mm each


@pytest.mark.parametrize(
    ("normal", "way", "words"),
    [
        (TOP, (0, 1, 0), "to the front"),
        (TOP, (-np.sin(0.35), np.cos(0.35), 0), "to the front, 20° to the left"),
        (LEFT_SIDE, (0, 0, -1), "down"),
        (RIGHT_SIDE, (0, -np.cos(0.2), np.sin(0.2)), "to the back, 11° up"),
    ],
)
def test_directions(normal, way, words):
    assert direction_words(normal, np.array(way, dtype=float)) == words


@pytest.mark.parametrize(
    ("axis", "words"),
    [
        ((0, 0, 1), "straight out"),
        ((0, 0, -1), "straight out"),
        ((0, 1, 0), "flat, to the front"),
        ((-1, 0, 0), "flat, to the left"),
        ((0, 0.5, np.sqrt(0.75)), "30° from straight out, leaning to the front"),
        ((0, -0.5, -np.sqrt(0.75)), "30° from straight out, leaning to the front"),  # the same line
    ],
)
def test_axes(axis, words):
    assert axis_words(TOP, np.array(axis)) == words


def test_room():
    room = Room(worst=(4.26e-3, 8e-3, 9e-3), mean=(2e-3, 5e-3, 9e-3), toward=("0", "0", "0"), tried=20e-3)
    assert room_at(room, 1e-3) == "4.3"
    assert room_at(Room((np.inf,) * 3, (2e-3, np.inf, np.inf), ("",) * 3, 20e-3), 1e-3) == ">20"
    assert room_at(None, 1e-3) == ""
