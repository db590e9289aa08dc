"""Polygons on the scalp against the winding of great-circle arcs, and what cannot be a polygon."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.brief.objects import PlacesBrief, ZoneBrief
from layout.errors import BriefError
from layout.sensing.polygon import in_polygon, sphere_centre
from layout.sensing.zones import zone_mask

CENTRE = np.array([0.01, -0.02, 0.03])
RADIUS = 0.09


def on_sphere(n, seed):
    points = np.random.default_rng(seed).normal(size=(n, 3))
    return CENTRE + RADIUS * points / np.linalg.norm(points, axis=1, keepdims=True)


def winding(points, corners):
    """Sum of the signed angles under which the arcs between corners are seen from points of the sphere [turns]."""
    p = (points - CENTRE) / RADIUS
    c = (corners - CENTRE) / np.linalg.norm(corners - CENTRE, axis=1, keepdims=True)
    toward = c - (p @ c.T)[:, :, None] * p[:, None]  # first direction of the arc from each point to each corner
    following = np.roll(toward, -1, axis=1)
    across = np.einsum("ncd,nd->nc", np.cross(toward, following), p)
    return np.arctan2(across, np.einsum("ncd,ncd->nc", toward, following)).sum(axis=1) / (2 * np.pi)


def star(turns, radii, tilt):
    """Corners round a pole at the given polar angles, turned by `tilt` from the top."""
    around = np.cumsum(turns) / np.sum(turns) * 2 * np.pi
    local = np.stack([np.sin(radii) * np.cos(around), np.sin(radii) * np.sin(around), np.cos(radii)], axis=1)
    turn = np.array([[np.cos(tilt), 0, np.sin(tilt)], [0, 1, 0], [-np.sin(tilt), 0, np.cos(tilt)]])
    return CENTRE + RADIUS * local @ turn.T


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.tuples(st.floats(0.6, 1.4), st.floats(0.15, 0.9)), min_size=4, max_size=9),
    st.floats(0, np.pi),
    st.integers(0, 1000),
)
def test_inside_is_where_the_arcs_wind_round(shape, tilt, seed):
    corners = star(*np.array(shape).T, tilt)
    points = on_sphere(300, seed)
    inside = in_polygon(points, corners, CENTRE, "zone")
    # A point on the far side sees the arcs wind round its antipode: the polygon lies within a hemisphere.
    near_side = (points - CENTRE) @ (corners - CENTRE).mean(axis=0) > 0
    wound = near_side & (np.abs(np.round(winding(points, corners))) == 1)
    clear = off_edges(points, corners) > 1e-3  # the rim counts as inside
    assert np.array_equal(inside[clear], wound[clear])


def off_edges(points, corners):
    """Distance (n,) [rad] of points from the nearest great circle through neighbouring corners."""
    c = corners - CENTRE
    normals = np.cross(c, np.roll(c, -1, axis=0))
    normals = normals / np.linalg.norm(normals, axis=1, keepdims=True)
    return np.abs((points - CENTRE) / RADIUS @ normals.T).min(axis=1)


def test_an_octant_is_an_eighth_of_the_sphere():
    corners = CENTRE + RADIUS * np.eye(3)
    points = on_sphere(4000, 1)
    inside = in_polygon(points, corners, CENTRE, "zone")
    clear = np.abs(points - CENTRE).min(axis=1) > 2e-5  # the rim counts as inside
    assert np.array_equal(inside[clear], (points - CENTRE > 0).all(axis=1)[clear])
    assert np.array_equal(in_polygon(points, corners[::-1], CENTRE, "zone"), inside)


def test_corners_and_edges_belong_to_it():
    corners = CENTRE + RADIUS * np.array([[0.0, 0.6, 0.8], [0.6, 0.0, 0.8], [-0.6, 0.0, 0.8]])
    halves = corners + np.roll(corners, -1, axis=0) - 2 * CENTRE
    halves = CENTRE + RADIUS * halves / np.linalg.norm(halves, axis=1, keepdims=True)
    assert in_polygon(np.vstack([corners, halves]), corners, CENTRE, "zone").all()


def test_heights_above_the_sphere_do_not_matter():
    corners = star(np.ones(5), np.full(5, 0.6), 0.4)
    points = on_sphere(200, 2)
    lifted = CENTRE + 1.3 * (points - CENTRE)
    assert np.array_equal(*(in_polygon(p, corners, CENTRE, "zone") for p in (points, lifted)))


@pytest.mark.parametrize(
    ("corners", "said"),
    [
        (star(np.ones(6), np.full(6, np.radians(85)), 0.3), "within 80 degrees.* 85 degrees away"),
        (CENTRE + RADIUS * np.array([[1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0]]), "within 80 degrees.* 180 degrees"),
        (star(np.ones(4), np.full(4, 0.5), 0.2)[[0, 2, 1, 3]], "without crossing edges"),
        (CENTRE + RADIUS * np.array([[0, 0.1, 1], [0, 0.2, 1], [0, 0.3, 1]]), "without crossing edges"),
    ],
)
def test_what_is_no_polygon(corners, said):
    with pytest.raises(BriefError, match=f"places.zones 'lune': corners.*{said}") as caught:
        in_polygon(on_sphere(3, 1), corners, CENTRE, "lune")
    assert "\n" not in str(caught.value)


def test_centre_of_a_sphere_is_found():
    assert np.allclose(sphere_centre(on_sphere(50, 4)), CENTRE, rtol=0, atol=1e-12)


def test_a_polygon_of_standard_positions_and_points(head, standard):
    """Between the hairline and the crown, with the head's front left corner given as a point."""
    f7 = tuple(standard["F7"])
    places = PlacesBrief(zones=(ZoneBrief("front", corners=("AF7", "AF8", "F8", "Cz", f7)),))
    points = np.array(list(standard.values()))
    inside = zone_mask(head, places, "front", points, standard)
    found = {name for name, is_in in zip(standard, inside, strict=True) if is_in}
    assert {"AF7", "AF8", "F8", "F7", "Cz", "AFz", "Fz", "F3", "F4", "FCz"} <= found
    assert not {"Fpz", "C3", "C4", "T7", "Pz", "Oz", "FC5", "Iz"} & found


def test_a_corner_that_is_no_position(head, standard):
    places = PlacesBrief(zones=(ZoneBrief("front", corners=("AF7", "AF88", "F8")),))
    with pytest.raises(
        BriefError, match=r"'front': corners must name standard positions, but 'AF88'.*near names: .*AF8"
    ):
        zone_mask(head, places, "front", np.zeros((1, 3)), standard)


def test_a_zone_of_named_places(head, standard):
    places = PlacesBrief(zones=(ZoneBrief("some", positions=("T5", "Cz", "S003")),))
    points = np.array([standard["P7"], standard["Cz"], standard["Fz"], standard["Oz"], standard["Pz"]])
    assert zone_mask(head, places, "some", points, standard).tolist() == [True, True, False, False, False]
    names = ("P7", "S001", "S003", "S003@spare", "S004")
    assert zone_mask(head, places, "some", points, standard, names).tolist() == [True, True, True, True, False]
