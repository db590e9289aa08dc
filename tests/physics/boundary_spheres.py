"""Layered spheres as boundary elements, sensors around them and the measures of the field."""

import numpy as np

from layout.anatomy.head import Surface
from layout.physics.boundary_elements import BoundaryModel
from layout.physics.boundary_meshes import geodesic_sphere, volume

RADII = np.array([80e-3, 85e-3, 92e-3])  # Rush & Driscoll 1968, from memory
SIGMA = np.array([0.33, 0.33 / 80, 0.33])
STANDOFF = 6.5e-3


def sphere_model(frequency: int, radii=RADII, conductivities=SIGMA) -> BoundaryModel:
    """Spheres of 10 f² + 2 nodes each whose polyhedra have the spheres' volumes."""
    sphere = geodesic_sphere(frequency)
    grow = (4 * np.pi / 3 / volume(sphere)) ** (1 / 3)
    return BoundaryModel(
        tuple(Surface(grow * radius * sphere.vertices, sphere.faces) for radius in radii), tuple(conductivities)
    )


def directions(rng, n: int) -> np.ndarray:
    vectors = rng.normal(size=(n, 3))
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


def magnetometers(rng, n: int, radius=RADII[-1] + STANDOFF):
    """Points (3 n, 3) and axes: n radial ones, then the two tangential ones at the same places."""
    radial = directions(rng, n)
    first = np.cross(radial, directions(rng, n))
    first /= np.linalg.norm(first, axis=1, keepdims=True)
    return np.tile(radius * radial, (3, 1)), np.concatenate([radial, first, np.cross(radial, first)])


def dipoles_at(rng, depth: float, n: int, inner=RADII[0]):
    """Sources (n, 3) at a depth, radial and tangential moments (n, 3)."""
    outward = directions(rng, n)
    across = np.cross(outward, directions(rng, n))
    return (inner - depth) * outward, outward, across / np.linalg.norm(across, axis=1, keepdims=True)


def rdm_and_mag(found: np.ndarray, exact: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Per column: RDM* = |u/|u| - v/|v||, MAG = |u|/|v| (Meijs et al. 1989, from memory)."""
    lengths = np.linalg.norm(found, axis=0), np.linalg.norm(exact, axis=0)
    return np.linalg.norm(found / lengths[0] - exact / lengths[1], axis=0), lengths[0] / lengths[1]
