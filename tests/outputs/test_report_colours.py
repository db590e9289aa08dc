"""Colours: text stands out as WCAG 2.2 AA asks, and colour-blind readers tell what colour alone tells apart."""

import itertools
import re
from pathlib import Path

import numpy as np
import pytest

import layout.outputs.report.page
from layout.outputs.pictures.backdrop import REGION_COLOURS
from layout.outputs.pictures.figure import GROUND_COLOUR, KIND_COLOURS
from layout.outputs.report.charts import BOUND, EVEN, FOUND, NEGATIVE, PART_COLOURS, POSITIVE, QUIET, STANDARD
from layout.outputs.report.page import PAPER, RAMP
from layout.outputs.report.scene import CORTEX_GREY

# Machado, Oliveira & Fernandes 2009, IEEE TVCG 15:1291, severity 1, for linear RGB (as colorspacious 1.1.2 has them)
VISION = {
    "usual": np.eye(3),
    "protanopia": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "deuteranopia": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
}
TO_XYZ = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])  # IEC 61966-2-1
APART = 15.0  # CIE 1976 colour difference; about 2.3 is just noticeable side by side


def linear(colour):
    parts = np.array([int(colour[at : at + 2], 16) for at in (1, 3, 5)]) / 255
    return np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)


def lab(colour, vision):
    relative = TO_XYZ @ np.clip(VISION[vision] @ linear(colour), 0, 1) / TO_XYZ.sum(axis=1)
    f = np.where(relative > 216 / 24389, np.cbrt(relative), (24389 / 27 * relative + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def contrast(one, other):
    """WCAG 2.2, "contrast ratio"."""
    bright, dark = sorted((TO_XYZ[1] @ linear(one), TO_XYZ[1] @ linear(other)), reverse=True)
    return (bright + 0.05) / (dark + 0.05)


def hexed(rgb):
    return "#" + "".join(f"{part:02x}" for part in rgb)


@pytest.fixture(scope="module")
def tokens():
    css = Path(layout.outputs.report.page.__file__).with_name("report.css").read_text(encoding="utf-8")
    return dict(re.findall(r"--(\w[\w-]*): (#[0-9a-f]{6})", css.split("}")[0]))


def test_contrast_is_computed_as_published():
    assert contrast("#000000", "#ffffff") == pytest.approx(21, abs=0.01)
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.01)  # the usual example of a grey that passes


@pytest.mark.parametrize("ground", ["paper", "card", "wash", "warm", "stage"])
def test_text_on_every_ground(tokens, ground):
    for ink in ("ink", "soft", "accent", "warn"):
        assert contrast(tokens[ink], tokens[ground]) >= 4.5, (ink, ground)
    for mark in ("focus", "accent"):
        assert contrast(tokens[mark], tokens[ground]) >= 3.0, (mark, ground)


def test_words_and_marks_in_charts(tokens):
    for colour in (*KIND_COLOURS, GROUND_COLOUR):
        assert contrast(colour, "#ffffff") >= 4.5  # the number on a sensor's disc
    assert contrast(tokens["accent-ink"], tokens["accent"]) >= 4.5
    for colour in (FOUND, BOUND, EVEN, STANDARD, QUIET):
        assert contrast(colour, tokens["card"]) >= 4.5
    assert tokens["stage"] == PAPER.lower()


@pytest.mark.parametrize("vision", VISION)
def test_colours_that_tell_things_apart_do_so_for_every_eye(vision):
    groups = ((*REGION_COLOURS, CORTEX_GREY), (*KIND_COLOURS, GROUND_COLOUR), PART_COLOURS)
    for group in (*groups, (hexed(NEGATIVE), hexed(POSITIVE), "#fafaf8")):
        for one, other in itertools.combinations(group, 2):
            assert np.linalg.norm(lab(one, vision) - lab(other, vision)) > APART, (one, other)
    light = [lab(colour, vision)[0] for colour in RAMP]
    assert all(high - low > APART for high, low in itertools.pairwise(light))
