"""Laying surfaces flat: what can be developed stays as it is; a gore of a sphere against its closed form."""

import numpy as np
import pytest

from layout.outputs.cap import flatten as cap_flatten
from layout.outputs.cap.flatten import flatten
from layout.outputs.cap.mesh import boundary_loop

RADIUS = 0.09  # m


def _grid(rows: int, columns: int) -> np.ndarray:
    """Triangles of a rectangular net of vertices, numbered row by row."""
    corner = (np.arange(rows - 1)[:, None] * columns + np.arange(columns - 1)).ravel()
    a, b, c, d = corner, corner + 1, corner + columns + 1, corner + columns
    return np.vstack([np.column_stack([a, b, c]), np.column_stack([a, c, d])])


def _border(faces: np.ndarray) -> np.ndarray:
    loop = boundary_loop(faces)
    return np.column_stack([loop, np.roll(loop, -1)])


def _laid(vertices: np.ndarray, faces: np.ndarray, band: float = 0.0):
    return flatten(vertices, faces, _border(faces), band)


def _cone(slope: float) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Part of a cone of half angle `slope` (0: a cylinder): vertices, faces, turn and distance along the wall."""
    turn, along = np.meshgrid(np.linspace(-0.7, 0.7, 15), np.linspace(0.05, 0.2, 12))
    radius = along * np.sin(slope) if slope else np.full(turn.shape, RADIUS)
    vertices = np.stack([radius * np.sin(turn), -radius * np.cos(turn), -along * np.cos(slope)], axis=-1).reshape(-1, 3)
    return vertices, _grid(12, 15), turn.ravel(), along.ravel()


@pytest.mark.parametrize("slope", [0.0, 0.6])
def test_what_can_be_developed_is_not_strained(slope):
    vertices, faces, _, _ = _cone(slope)
    flat = _laid(vertices, faces)
    np.testing.assert_allclose(flat.stretch, 1.0, rtol=0, atol=1e-5)
    assert flat.areas.sum() == pytest.approx(_flat_area(flat.points, faces), rel=1e-5)


def test_a_cone_opens_to_its_sector():
    slope = 0.6
    vertices, faces, turn, along = _cone(slope)
    flat = _laid(vertices, faces)
    opened = np.diff(turn[:2])[0]
    facet = 2 * np.arcsin(np.sin(slope) * np.sin(opened / 2))  # angle of one flat facet of the cone at its tip
    angle = turn / opened * facet
    sector = np.column_stack([along * np.sin(angle), along * np.cos(angle)])
    np.testing.assert_allclose(_distances(flat.points), _distances(sector), rtol=0, atol=1e-6)


def test_seen_from_outside_left_stays_left():
    """x to the right, z up, seen from -y: a piece is not turned over."""
    vertices, faces, _, _ = _cone(0.0)
    faces = faces[:, ::-1] if _outward(vertices, faces) < 0 else faces
    flat = _laid(vertices, faces)
    assert _signed_area(flat.points, faces) > 0


def _gore(count: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """A gore of a sphere in 1/count of its turn, from latitude -50 to 70 degrees: vertices, faces, longitude,
    latitude.
    """
    longitude, latitude = np.meshgrid(np.linspace(-np.pi, np.pi, 13) / count, np.radians(np.linspace(-50, 70, 61)))
    across = np.cos(latitude)
    vertices = RADIUS * np.stack([across * np.sin(longitude), -across * np.cos(longitude), np.sin(latitude)], axis=-1)
    return vertices.reshape(-1, 3), _grid(61, 13), longitude.ravel(), latitude.ravel()


@pytest.mark.parametrize("count", [8, 12])
def test_a_gore_of_a_sphere_has_the_width_and_length_of_the_closed_form(count):
    vertices, faces, _, _ = _gore(count)
    flat = _laid(vertices, faces)
    points = flat.points.reshape(61, 13, 2)
    low, high = flat.stretch.min(), flat.stretch.max()
    widths = np.linalg.norm(np.diff(points, axis=1), axis=2).sum(axis=1)
    expected = 2 * np.pi * RADIUS * np.cos(np.radians(np.linspace(-50, 70, 61))) / count
    assert ((widths > 0.999 * low * expected) & (widths < 1.001 * high * expected)).all()
    middle = np.linalg.norm(np.diff(points[:, 6], axis=0), axis=1).sum()
    assert middle == pytest.approx(RADIUS * np.radians(120), rel=4 / count**2)  # exact for infinitely many gores
    assert flat.areas.sum() == pytest.approx(_flat_area(flat.points, faces), rel=0.01)


def test_no_more_strain_than_the_gore_of_the_globe_makers():
    """The closed form (width of each parallel and length of the middle meridian kept) is one of the maps allowed."""
    vertices, faces, longitude, latitude = _gore(8)
    flat = _laid(vertices, faces)
    closed = np.column_stack([RADIUS * longitude * np.cos(latitude), RADIUS * latitude])
    gradients, areas = cap_flatten._gradients(vertices, faces)
    stretch = cap_flatten.stretches(closed, faces, gradients)
    rms = np.sqrt(np.average(((stretch - 1) ** 2).mean(axis=1), weights=areas))
    assert flat.rms < rms
    assert flat.rms > 0.1 * rms  # a sphere cannot be laid flat: no strain at all would be a lie


def test_strain_falls_with_the_square_of_the_width():
    eight, sixteen = (_laid(*_gore(count)[:2]).rms for count in (8, 16))
    assert eight / sixteen == pytest.approx(4.0, rel=0.1)


def test_principal_stretches_are_those_of_a_known_map():
    vertices, faces, _, _ = _cone(0.0)
    plane = np.column_stack([vertices[:, 0], vertices[:, 2], np.zeros(len(vertices))])
    gradients, _ = cap_flatten._gradients(plane, faces)
    pulled = plane[:, :2] * [1.25, 0.8]
    found = cap_flatten.stretches(pulled, faces, gradients)
    np.testing.assert_allclose(found, np.tile([0.8, 1.25], (len(faces), 1)), rtol=1e-9)


def test_held_edges_keep_their_length():
    vertices, faces, _, _ = _gore(8)
    free, held = _laid(vertices, faces), _laid(vertices, faces, band=10.0)
    edges = _border(faces)
    true = np.linalg.norm(vertices[edges[:, 0]] - vertices[edges[:, 1]], axis=1).sum()
    errors = [
        abs(np.linalg.norm(flat.points[edges[:, 0]] - flat.points[edges[:, 1]], axis=1).sum() - true) / true
        for flat in (free, held)
    ]
    assert errors[1] < 1e-3 < errors[0]


def _distances(points: np.ndarray) -> np.ndarray:
    return np.linalg.norm(points[:, None] - points[None], axis=2)


def _signed_area(points: np.ndarray, faces: np.ndarray) -> float:
    a, b, c = (points[faces[:, k]] for k in range(3))
    return float(((b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0]).sum() / 2)


def _flat_area(points: np.ndarray, faces: np.ndarray) -> float:
    return abs(_signed_area(points, faces))


def _outward(vertices: np.ndarray, faces: np.ndarray) -> float:
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    return float((np.cross(b - a, c - a)[:, :2] * a[:, :2]).sum())
