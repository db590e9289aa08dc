"""Gaps between surfaces, against the closed form of concentric spheres."""

import numpy as np
import pytest

from layout.anatomy.head import Surface
from layout.anatomy.nesting import FARTHEST, depth_inside, move_inside, nest
from layout.anatomy.star_surface import icosphere
from layout.errors import FileError

GAP = 2e-3


def ball(radius, subdivisions=3):
    directions, faces = icosphere(subdivisions)
    return Surface(radius * directions, faces)


def gaps(inner, outer):
    return depth_inside(outer, inner.vertices).min(), -depth_inside(inner, outer.vertices).max()


def test_depth_is_the_difference_of_radii():
    directions, _ = icosphere(2)
    for radius in (0.08, 0.1):
        # Vertices of the coarser sphere lie over vertices of the finer one.
        assert depth_inside(ball(0.09), radius * directions) == pytest.approx(0.09 - radius, abs=6e-5)  # faces are flat


def test_surfaces_far_enough_apart_are_left_alone():
    inner, outer = ball(0.08), ball(0.085)
    same, notes = nest("a within b", inner, outer, GAP)
    assert same is inner
    assert notes == []
    points, notes = move_inside("points", inner.vertices, outer, GAP)
    assert points is inner.vertices
    assert notes == []


def test_too_thin_a_gap_is_widened_by_what_lacks():
    inner, outer = ball(0.084), ball(0.085)
    moved, (note,) = nest("a within b", inner, outer, GAP)
    assert note.startswith("a within b: 642 of 642 vertices of the inner one were moved inwards by at most 1.")
    assert min(gaps(moved, outer)) >= GAP
    assert np.linalg.norm(moved.vertices, axis=1) == pytest.approx(0.083, abs=2e-4)


@pytest.mark.parametrize("fine", ["inner", "outer"])
def test_a_dent_of_the_outer_between_the_inner_ones_vertices(fine):
    """One mesh is much finer than the other, and the outer one has a dent as narrow as the coarse one's faces."""
    inner, outer = ball(0.08, 5 if fine == "inner" else 2), ball(0.085, 5 if fine == "outer" else 3)
    coarse = ball(0.08, 2)
    middle = coarse.vertices[coarse.faces[7]].mean(axis=0)
    middle = outer.vertices[np.argmax(outer.vertices @ middle)] / 0.085
    dent = np.exp(-np.sum((outer.vertices / 0.085 - middle) ** 2, axis=1) / 0.06**2)
    outer = Surface(outer.vertices * (1 - 0.06 * dent)[:, None], outer.faces)
    if fine == "outer":
        before, after = gaps(inner, outer)
        assert before > GAP > after
    moved, _ = nest("a within b", inner, outer, GAP)
    assert min(gaps(moved, outer)) >= GAP
    away = np.linalg.norm(moved.vertices - inner.vertices, axis=1)
    assert 0 < (away > 0).sum() < len(away) / 3
    assert away.max() < FARTHEST


def test_what_needs_more_is_refused():
    with pytest.raises(FileError, match=r"^a within b: must lie inside .* but it is 12 mm short\.$"):
        nest("a within b", ball(0.095), ball(0.085), GAP)
    moved, _ = nest("a within b", ball(0.095), ball(0.085), GAP, farthest=0.02)
    assert min(gaps(moved, ball(0.085))) >= GAP
