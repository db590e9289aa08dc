"""The scalp picture: left is left, hidden is hidden, same bytes twice."""

import dataclasses
import io
import xml.etree.ElementTree as ET

import matplotlib
import numpy as np
import pytest
from made_result import make_result
from matplotlib.colors import to_rgb

from layout.outputs.pictures.backdrop import paint_backdrop, region_colour
from layout.outputs.pictures.figure import STYLE, scalp_figure, scalp_picture
from layout.outputs.pictures.views import BACK, FRONT, LEFT, RIGHT, TOP, four_views

VIEWS = (TOP, FRONT, BACK, LEFT, RIGHT)


@pytest.fixture(scope="module")
def figure(result):
    with matplotlib.rc_context(STYLE):
        return scalp_figure(result, result.layouts[0])


def _texts(axes):
    return {text.get_text(): text.get_position() for text in axes.texts}


@pytest.mark.parametrize("view", VIEWS, ids=lambda view: view.name)
def test_views_are_right_handed(view):
    frame = np.stack([view.across, view.up, view.toward])
    np.testing.assert_allclose(frame @ frame.T, np.eye(3), atol=1e-15)
    assert np.linalg.det(frame) == pytest.approx(1)


def test_the_ends_are_where_the_landmarks_are(result):
    marks = result.head.landmarks
    for view in VIEWS:
        left, right, top, bottom = view.ends
        ends = {left.strip("←→ "): (0, -1), right.strip("←→ "): (0, 1), top: (1, 1), bottom: (1, -1)}
        for name, point in (("L", marks.lpa), ("R", marks.rpa), ("front", marks.nas), ("back", marks.inion)):
            if name in ends:
                axis, sign = ends[name]
                assert np.sign(view.project(point)[axis]) == sign, (view.name, name)
    # the viewer stands where the name says
    assert LEFT.project(marks.lpa)[2] > 0
    assert RIGHT.project(marks.rpa)[2] > 0
    assert FRONT.project(marks.nas)[2] > 0
    assert BACK.project(marks.inion)[2] > 0


def test_front_or_back_is_the_side_with_more_sensors():
    forward, backward = np.array([[0.0, 1, 0]] * 3), np.array([[0.0, -1, 0]] * 2)
    assert FRONT in four_views(np.vstack([forward, backward]))
    assert BACK in four_views(np.vstack([backward, forward[:1]]))


def test_labels_on_the_drawn_axes(figure, result):
    for axes, view in zip(figure.axes, (TOP, None, LEFT, RIGHT), strict=True):
        if view is None:
            continue
        texts = _texts(axes)
        nasion = view.project(result.head.landmarks.nas)
        if view is TOP:
            lpa = view.project(result.head.landmarks.lpa)
            assert texts["L"][0] < lpa[0] < 0 < texts["R"][0]
            assert texts["front"][1] > nasion[1]
        else:
            front = next(place for name, place in texts.items() if "front" in name)
            assert np.sign(front[0]) == np.sign(nasion[0])


def test_numbers_stand_at_their_sensors_and_only_on_the_near_side(figure, result):
    layout = result.layouts[0]
    normals = result.candidates.sites.normals
    views = four_views(normals[result.candidates.site[list(layout.chosen)]])
    seen = set()
    for axes, view in zip(figure.axes, views, strict=True):
        texts = _texts(axes)
        for row in layout.sensors:
            flat = view.project(row.scalp_position)
            facing = normals[result.candidates.site[row.candidate]] @ view.toward
            drawn = texts.get(str(row.number))
            if facing > 0.3:
                assert drawn is not None
                seen.add(row.number)
                assert np.hypot(drawn[0] - flat[0], drawn[1] - flat[1]) < 20e-3
            elif facing < -0.3:
                assert drawn is None
    assert seen == {row.number for row in layout.sensors}


def test_region_has_its_colour_where_it_is(result):
    backdrop = paint_backdrop(result.head, result.regions, LEFT)
    left, right, bottom, top = backdrop.extent
    rows, columns = backdrop.inside.shape
    for index, facing in ((0, True), (1, False)):
        flat = LEFT.project(result.head.cortex.positions[result.regions[index].members]).mean(axis=0)
        column = int((flat[0] - left) / (right - left) * columns)
        row = int((flat[1] - bottom) / (top - bottom) * rows)
        colour, wanted = backdrop.image[row, column] / 255, np.array(to_rgb(region_colour(index)))
        saturation = np.ptp(colour) / colour.max()
        full = np.ptp(wanted) / wanted.max()
        hue = (colour - colour.mean()) @ (wanted - wanted.mean())
        assert hue > 0
        assert saturation > 0.7 * full if facing else 0.1 * full < saturation < 0.6 * full


def test_one_scale_for_all_views(figure):
    widths = {round(np.ptp(axes.get_xlim()), 9) for axes in figure.axes}
    assert len(widths) == 1
    bar = next(line for line in figure.axes[0].lines if np.ptp(line.get_xdata()) > 0.04)
    assert np.ptp(bar.get_xdata()) == pytest.approx(0.050)
    assert "50 mm" in _texts(figure.axes[0])


def test_title_says_value_bound_and_gap(figure):
    words = " ".join(text.get_text() for text in figure.texts)
    assert "10.333 bits" in words
    assert "bound 10.339 bits" in words  # 10.33850 rounded up
    assert "0.05 %" in words
    assert "optimal" not in words.lower()


@pytest.mark.slow
def test_same_bytes_twice_and_nothing_of_the_clock(result, pictures):
    again = scalp_picture(make_result(), result.layouts[0])
    assert again.png == pictures[0].png
    assert again.svg == pictures[0].svg
    assert b"<dc:date" not in again.svg
    ET.fromstring(again.svg)  # hostile names and all
    assert pictures[0].png != pictures[1].png


def test_size_in_print(pictures):
    from PIL import Image

    image = Image.open(io.BytesIO(pictures[0].png))
    assert image.size[0] == 9.6 * 150
    assert set(image.info) <= {"dpi"}
    assert image.info["dpi"] == pytest.approx((150, 150), abs=0.02)  # PNG counts whole pixels per metre


def test_legend_names_only_what_is_shown(electrodes_only, magnetometers_only):
    for shown, has_axis in ((electrodes_only, False), (magnetometers_only, True)):
        with matplotlib.rc_context(STYLE):
            labels = [text.get_text() for text in scalp_figure(shown, shown.layouts[0]).legends[0].get_texts()]
        assert ("sensitive axis" in labels) == has_axis
        assert any("reference" in label for label in labels) != has_axis
        assert "left <motor> hand" in labels


def test_a_name_that_starts_with_an_underscore_is_in_the_legend(electrodes_only):
    region = dataclasses.replace(electrodes_only.regions[0], name="_hidden?")
    named = dataclasses.replace(electrodes_only, regions=(region,))
    with matplotlib.rc_context(STYLE):
        labels = [text.get_text() for text in scalp_figure(named, named.layouts[0]).legends[0].get_texts()]
    assert "_hidden?" in labels


def test_dollars_in_a_title_are_dollars(electrodes_only):
    brief = dataclasses.replace(electrodes_only.brief, title=r"a cap for $\frac$")
    assert scalp_picture(dataclasses.replace(electrodes_only, brief=brief), electrodes_only.layouts[0]).png
