"""The closed integrals over triangles, against product quadrature, known solid angles and splitting in four."""

import itertools
from math import factorial

import numpy as np
import pytest
import trimesh

from layout.anatomy.head import Surface
from layout.physics.boundary_integrals import (
    APART,
    APART_WEIGHTS,
    CLOSE,
    CLOSE_WEIGHTS,
    area_shares,
    dipole_terms,
    double_layer,
    elements_of,
    mass_matrix,
    single_layer,
    solid_angles,
)
from layout.physics.boundary_meshes import geodesic_sphere

OCTANT = elements_of(Surface(np.eye(3), np.array([[0, 1, 2]])))


def ball(radius, frequency=4):
    sphere = geodesic_sphere(frequency)
    return elements_of(Surface(radius * sphere.vertices, sphere.faces))


def tetrahedron(rng):
    points = rng.normal(size=(4, 3))
    if np.linalg.det(points[1:] - points[0]) < 0:
        points[[0, 1]] = points[[1, 0]]
    return elements_of(Surface(points, np.array([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]])))


def on_triangle(n=60):
    """Gauss-Legendre points of a square folded on the triangle: shares (n², 3) and weights."""
    x, w = np.polynomial.legendre.leggauss(n)
    x, w = (x + 1) / 2, w / 2
    u, v = (part.ravel() for part in np.meshgrid(x, x))
    return np.stack([1 - u, u * (1 - v), u * v], axis=1), 2 * u * np.outer(w, w).ravel()


@pytest.mark.parametrize(("shares", "weights", "degree"), [(APART, APART_WEIGHTS, 2), (CLOSE, CLOSE_WEIGHTS, 6)])
def test_quadrature_is_exact_to_its_degree(shares, weights, degree):
    """∫ ψ_0^i ψ_1^j = 2 i! j!/(i+j+2)! of the area."""

    def error(i, j):
        exact = 2 * factorial(i) * factorial(j) / factorial(i + j + 2)
        return abs(weights @ (shares[:, 0] ** i * shares[:, 1] ** j) - exact)

    powers = [(i, j) for i, j in itertools.product(range(degree + 1), repeat=2) if i + j <= degree]
    assert max(error(i, j) for i, j in powers) < 1e-13
    assert error(degree + 1, 0) > 1e-6


@pytest.mark.parametrize("seed", range(3))
def test_closed_integrals_against_product_quadrature(seed):
    rng = np.random.default_rng(seed)
    elements = tetrahedron(rng)
    point = 2.5 * rng.normal(size=3) + [3, 0, 0]
    shares, weights = on_triangle()
    single, angle, terms = np.zeros(4), 0.0, np.zeros((4, 3))
    for f, corners in enumerate(elements.faces):
        y = shares @ elements.vertices[corners] - point
        far = np.linalg.norm(y, axis=1)
        area = elements.areas[f]
        single[f] = area * (weights @ (1 / far))
        angle += area * (weights @ (y @ elements.normals[f] / far**3))
        for a, corner in enumerate(corners):
            terms[corner] += area / (4 * np.pi) * (weights * shares[:, a] / far**3) @ y
    np.testing.assert_allclose(single_layer(point, elements)[0], single, rtol=1e-10)
    np.testing.assert_allclose(solid_angles(point, elements)[0], angle, rtol=0, atol=1e-10)
    np.testing.assert_allclose(dipole_terms(point, elements)[0], terms, rtol=0, atol=1e-10 * np.abs(terms).max())


def test_solid_angles_known():
    """Octant: π/2 (derived; van Oosterom & Strackee 1983). Closed: 4π inside, 0 outside, π/2 at a cube's corner."""
    assert solid_angles(np.zeros(3), OCTANT)[0] == pytest.approx(np.pi / 2, abs=1e-14)
    elements = tetrahedron(np.random.default_rng(7))
    inside = np.random.default_rng(1).dirichlet(np.ones(4), 20) @ elements.vertices
    np.testing.assert_allclose(solid_angles(inside, elements), 4 * np.pi, rtol=1e-12)
    np.testing.assert_allclose(solid_angles(5 + inside, elements), 0, atol=1e-12)
    cube = trimesh.creation.box()
    corner = solid_angles(np.asarray(cube.vertices), elements_of(Surface(np.asarray(cube.vertices), cube.faces)))
    np.testing.assert_allclose(corner, np.pi / 2, rtol=1e-12)


@pytest.mark.parametrize("height", [1e-2, 1e-5, 1e-9, 0.0])
def test_dipole_terms_of_a_triangle_are_those_of_its_four_parts(height):
    """Additive however near the dipole is, which no quadrature could be."""
    corners = np.array([[0.0, 0, 0], [1, 0.1, 0], [0.2, 0.9, 0]])
    middles = (corners + np.roll(corners, -1, axis=0)) / 2
    whole = elements_of(Surface(corners, np.array([[0, 1, 2]])))
    parts = elements_of(Surface(np.vstack([corners, middles]), np.array([[0, 3, 5], [1, 4, 3], [2, 5, 4], [3, 4, 5]])))
    spread = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1], [0.5, 0.5, 0], [0, 0.5, 0.5], [0.5, 0, 0.5]])
    point = np.array([0.31, 0.17, -height])
    found = dipole_terms(point, parts)[0]
    expected = dipole_terms(point, whole)[0]
    np.testing.assert_allclose(spread.T @ found, expected, rtol=0, atol=1e-9 * np.abs(expected).max())


def test_rows_of_the_double_layer_hold_the_solid_angle():
    """Half the full angle on the surface itself, none from outside, all of it from inside; quadrature to 1e-3."""
    inner, outer = ball(0.08), ball(0.085)
    for tested, seen, share in ((inner, inner, 0.5), (outer, inner, 0.0), (inner, outer, 1.0)):
        areas = mass_matrix(tested) @ np.ones(len(tested.vertices))
        np.testing.assert_allclose(double_layer(tested, seen).sum(axis=1) / areas, share, atol=1e-3)


def test_double_layer_multiplies_harmonics_as_on_a_sphere():
    """On a sphere the double layer has the eigenvalue 1/(2 (2 l + 1)) for degree l (classical; derived from Green)."""
    sphere = ball(1.0, 8)
    x, y, z = sphere.vertices.T
    mass = mass_matrix(sphere)
    for values, l_degree in ((z, 1), (x * y, 2), (z**2 - (x**2 + y**2) / 2, 2)):
        applied = np.linalg.solve(mass.toarray(), double_layer(sphere, sphere) @ values)
        share = (values @ applied) / (values @ values)
        assert share == pytest.approx(0.5 / (2 * l_degree + 1), rel=0.03)


def test_mass_and_shares():
    sphere = ball(0.09)
    assert (mass_matrix(sphere) @ np.ones(len(sphere.vertices))).sum() == pytest.approx(sphere.areas.sum(), rel=1e-12)
    assert area_shares(sphere).sum() == pytest.approx(1)
    linear = sphere.vertices[:, 2]
    shares, weights = on_triangle(4)
    expected = sum(
        area * (weights @ (shares @ linear[face]) ** 2) for face, area in zip(sphere.faces, sphere.areas, strict=True)
    )
    assert linear @ (mass_matrix(sphere) @ linear) == pytest.approx(expected, rel=1e-12, abs=0)
