"""Footprints against dense sampling and, where the scalp is flat, against boxes by separating axes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from synthetic_head import brief, electrodes, magnetometers

from layout.brief.objects import FootprintBrief, SitesBrief
from layout.sensing.footprints import footprints_overlap, near_pairs
from layout.sensing.lay_out import lay_candidates
from layout.sensing.overlap import boxes_overlap

FLAT = np.array([[0.0, 0.0, 1.0], [0.0, 1.0, 0.0], [-1.0, 0.0, 0.0]])  # normal up, front y, left -x
DISC = FootprintBrief("circle", 12e-3, 12e-3)


def rotated(frame, axis, angle):
    """Rows (n, 3) turned about a unit axis (Rodrigues)."""
    cross = np.cross(np.eye(3), axis)
    turn = np.eye(3) - np.sin(angle) * cross + (1 - np.cos(angle)) * cross @ cross
    return frame @ turn.T


def overlap(first, second, where, frames=(FLAT, FLAT), clearance=0.0):
    shapes = [first, second]
    return bool(
        footprints_overlap(
            np.array([[0, 1]]),
            np.array([0, 1]),
            shapes,
            np.full(2, clearance),
            np.array([np.zeros(3), where]),
            np.array(frames),
        )[0]
    )


def covers(shape, points):
    """Which points (n, 2), right and front of the centre, the footprint covers."""
    if shape.shape == "circle":
        return np.linalg.norm(points, axis=1) <= shape.width / 2
    right = np.array([np.cos(shape.turn), np.sin(shape.turn)])
    front = np.array([-np.sin(shape.turn), np.cos(shape.turn)])
    return (np.abs(points @ right) <= shape.width / 2) & (np.abs(points @ front) <= shape.depth / 2)


LENGTH = st.floats(4e-3, 30e-3)
ANGLE = st.floats(-np.pi, np.pi)
RECTANGLE = st.builds(FootprintBrief, st.just("rectangle"), LENGTH, LENGTH, ANGLE)
CIRCLE = LENGTH.map(lambda d: FootprintBrief("circle", d, d))
SHAPE = st.one_of(RECTANGLE, CIRCLE)
OFFSET = st.floats(-30e-3, 30e-3)


@settings(max_examples=150, deadline=None)
@given(SHAPE, SHAPE, OFFSET, OFFSET)
def test_on_a_flat_scalp_as_dense_sampling_says(first, second, x, y):
    """A grid of 0.25 mm over the first: shared points mean overlap; none means none but for a sliver."""
    line = np.arange(-25e-3, 25e-3, 0.25e-3)
    points = np.stack(np.meshgrid(line, line), axis=-1).reshape(-1, 2)
    shared = (covers(first, points) & covers(second, points - [x, y])).sum()
    said = overlap(first, second, (x, y, 0.0))
    if shared > 0:
        assert said
    elif said:
        grown = (covers(wider(first, 0.4e-3), points) & covers(wider(second, 0.4e-3), points - [x, y])).sum()
        assert grown > 0


def wider(shape, by):
    return FootprintBrief(shape.shape, shape.width + 2 * by, shape.depth + 2 * by, shape.turn)


@settings(max_examples=200, deadline=None)
@given(RECTANGLE, RECTANGLE, OFFSET, OFFSET)
def test_rectangles_on_a_flat_scalp_as_separating_axes_say(first, second, x, y):
    poses, sizes = np.tile(np.eye(4), (2, 1, 1)), np.ones((2, 3))
    for pose, size, shape in zip(poses, sizes, (first, second), strict=True):
        pose[:2, :2] = [[np.cos(shape.turn), -np.sin(shape.turn)], [np.sin(shape.turn), np.cos(shape.turn)]]
        size[:2] = shape.width, shape.depth
    poses[1, :2, 3] = x, y
    answers = [boxes_overlap(poses[:1], sizes[:1] + grow, poses[1:], sizes[1:] + grow)[0] for grow in (-4e-6, 4e-6)]
    if answers[0] == answers[1]:
        assert overlap(first, second, (x, y, 0.0)) == answers[0]


@pytest.mark.parametrize(("gap", "clearance", "meets"), [(12.001, 0, False), (11.999, 0, True), (12, 0, False)])
def test_discs_side_by_side(gap, clearance, meets):
    assert overlap(DISC, DISC, (gap * 1e-3, 0, 0), clearance=clearance) == meets


@pytest.mark.parametrize("turn", [0.0, 0.5, 2.0])
def test_rectangles_that_only_touch_do_not_overlap(turn):
    shape = FootprintBrief("rectangle", 10e-3, 20e-3, turn)
    right = 10e-3 * np.array([np.cos(turn), np.sin(turn), 0.0])
    assert not overlap(shape, shape, right)
    assert overlap(shape, shape, right * 0.9999)
    assert not overlap(shape, shape, right * 1.2, clearance=2e-3)
    assert overlap(shape, shape, right * 1.2, clearance=2.001e-3)


def test_the_turn_is_about_the_outward_axis_from_right_to_front():
    """A long plate turned by 45 degrees reaches to the right and front, and to the left and back, of its sensor."""
    plate = FootprintBrief("rectangle", 40e-3, 4e-3, np.pi / 4)
    dot = FootprintBrief("circle", 1e-3, 1e-3)
    assert overlap(plate, dot, (12e-3, 12e-3, 0))
    assert overlap(plate, dot, (-12e-3, -12e-3, 0))
    assert not overlap(plate, dot, (12e-3, -12e-3, 0))


def test_the_larger_clearance_counts():
    for clearances in ([3e-3, 0.0], [0.0, 3e-3]):
        said = [
            footprints_overlap(
                np.array([[0, 1]]),
                np.array([0, 1]),
                [DISC, DISC],
                np.array(clearances),
                np.array([[0, 0, 0], [gap, 0, 0]]),
                np.array([FLAT, FLAT]),
            )[0]
            for gap in (14.9e-3, 15.1e-3)
        ]
        assert said == [True, False]


@settings(max_examples=60, deadline=None)
@given(RECTANGLE, RECTANGLE, OFFSET, OFFSET, st.floats(-1, 1), ANGLE)
def test_nothing_depends_on_where_the_head_lies_or_which_comes_first(first, second, x, y, lean, angle):
    axis = np.array([0.6, 0.0, 0.8])
    frames = (FLAT, rotated(FLAT, np.array([1.0, 0.0, 0.0]), 0.3 * lean))
    there = np.array([x, y, -0.02 * lean * y])
    said = overlap(first, second, there, frames)
    moved = [rotated(frame, axis, angle) for frame in frames]
    # Positions that decide by less than 1 µm may fall either way.
    near = {overlap(wider(first, by), wider(second, by), there, frames) for by in (-1e-6, 1e-6)}
    if len(near) == 1:
        assert overlap(first, second, rotated(there[None], axis, angle)[0], moved) == said
        assert overlap(second, first, -there, frames[::-1]) == said


def test_tilted_neighbours_are_compared_in_the_plane_between_them():
    """Two plates on a ridge, each leaning outwards by 40 degrees: seen along the ridge's own normal, where their half
    widths shrink by cos 40, they clear each other at 10 mm cos 40 and not before."""
    plate = FootprintBrief("rectangle", 10e-3, 10e-3)
    lean = np.radians(40)
    back = np.array([0.0, 1.0, 0.0])
    frames = (rotated(FLAT, back, lean), rotated(FLAT, back, -lean))
    assert frames[1][0, 0] > 0  # the plate on the right leans to the right
    needed = 10e-3 * np.cos(lean)
    assert overlap(plate, plate, (needed * 0.999, 0, 0), frames)
    assert not overlap(plate, plate, (needed * 1.001, 0, 0), frames)
    beside_disc = 5e-3 * np.cos(lean) + DISC.width / 2
    for first, second in ((plate, DISC), (DISC, plate)):
        assert overlap(first, second, (beside_disc * 0.999, 0, 0), frames)
        assert not overlap(first, second, (beside_disc * 1.001, 0, 0), frames)


def test_near_pairs_are_all_that_may_meet():
    rng = np.random.default_rng(3)
    centres = rng.uniform(-0.05, 0.05, (60, 3)) * [1, 1, 0]
    kind = rng.integers(0, 3, 60)
    shapes = [DISC, FootprintBrief("rectangle", 10e-3, 20e-3), None]
    pairs = near_pairs(kind, shapes, np.array([1e-3, 0.0, 9e-3]), centres)
    every = np.array([(i, j) for i in range(60) for j in range(i + 1, 60)])
    said = footprints_overlap(every, kind, shapes, np.array([1e-3, 0.0, 9e-3]), centres, np.tile(FLAT, (60, 1, 1)))
    meeting = {tuple(pair) for pair in every[said]}
    assert meeting
    assert meeting <= {tuple(sorted(pair)) for pair in pairs}
    assert not any(kind[end] == 2 for pair in meeting for end in pair)


def conflicts(laid):
    covered = np.zeros((len(laid), len(laid)), dtype=bool)
    for clique in laid.cliques:
        covered[np.ix_(clique, clique)] = True
    np.fill_diagonal(covered, False)
    return covered


def test_electrode_holders_on_a_head(head, standard):
    """Small discs: the straight distance and the distance in the plane are the same to a fraction of a millimetre."""
    cap = electrodes(sites=SitesBrief(family="10-5"), footprint=FootprintBrief("circle", 20e-3, 20e-3), clearance=2e-3)
    laid = lay_candidates(head, brief(cap), standard)
    away = np.linalg.norm(laid.positions[:, None] - laid.positions, axis=2)
    np.fill_diagonal(away, 1.0)
    excluded = conflicts(laid)
    assert excluded[away < 22e-3 - 1e-6].all()
    assert not excluded[away > 22.5e-3].any()
    assert (away < 22e-3).sum() > 100
    assert any(name.startswith("footprint (") for name in laid.clique_names)


def test_housings_whose_faces_are_footprints_never_meet(head, standard):
    """With the faces as footprints no two housings that may stand together share space: on a convex head they lean
    apart. Boxes by separating axes."""
    face = FootprintBrief("rectangle", 12.4e-3, 16.6e-3)
    stock = magnetometers(sites=SitesBrief(grid_pitch=0.019), footprint=face, clearance=4e-3)
    laid = lay_candidates(head, brief(stock), standard)
    excluded = conflicts(laid)
    assert excluded.any()
    apart = np.linalg.norm(laid.positions[:, None] - laid.positions, axis=2)
    assert apart[excluded].max() < np.hypot(face.width + 4e-3, face.depth + 4e-3) + 3e-3  # nothing else excludes
    free = np.argwhere(np.triu(~excluded, 1))
    sizes = np.tile(stock.housing, (len(free), 1))
    assert not boxes_overlap(laid.housing_pose[free[:, 0]], sizes, laid.housing_pose[free[:, 1]], sizes).any()


def test_a_kind_without_a_footprint_takes_no_room(head, standard):
    stock = (
        electrodes(sites=SitesBrief(family="10-20"), footprint=FootprintBrief("circle", 0.1, 0.1)),
        magnetometers(sites=SitesBrief(grid_pitch=0.04)),
    )
    laid = lay_candidates(head, brief(*stock), standard)
    mixed = conflicts(laid)[np.ix_(laid.kind == 0, laid.kind == 1)]
    cups, heads = (laid.sites.positions[laid.site[laid.kind == kind]] for kind in (0, 1))
    assert not mixed[np.linalg.norm(cups[:, None] - heads, axis=2) > 1e-3].any()
