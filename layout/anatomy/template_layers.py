"""Nested inner skull, outer skull and scalp around a cortex, by the template's recipe."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy import template_recipe as recipe
from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import edges
from layout.anatomy.star_surface import (
    blend,
    hull_radius,
    icosphere,
    lift_over,
    radius_along,
    smooth_radius,
)


@dataclass(frozen=True)
class Layers:
    """Surfaces about the origin [mm]; all share one icosphere's faces (5120, 3)."""

    inner_skull: np.ndarray
    outer_skull: np.ndarray
    scalp: np.ndarray
    faces: np.ndarray


def build_layers(pial: np.ndarray) -> Layers:
    """Surfaces [mm] about recipe.CENTRE around pial vertices (n, 3) [mm, MNI152].

    The brain's hull (with its mirror image, cerebellum and brainstem) is smoothed by spherical harmonics;
    each layer is the one below moved along its vertex normals by a thickness field (moving along the rays
    instead would pinch the gaps where the surface slants); the inner skull is raised where the cortex comes
    too close; low down the scalp is drawn out to a rough face and neck.
    """
    directions, faces = icosphere(recipe.SUBDIVISIONS)
    cortex = pial - recipe.CENTRE
    brain = np.vstack(
        [
            cortex,
            cortex * [-1, 1, 1],
            shell(recipe.CEREBELLUM, directions),
            shell(recipe.BRAINSTEM, directions),
        ]
    )
    hull = smooth_radius(directions, hull_radius(brain, directions), recipe.HARMONIC_DEGREE, recipe.HARMONIC_PENALTY)
    csf, skull, skin = thickness(directions)
    inner = _offset(hull[:, None] * directions, faces, csf)
    inner = lift_over(inner, faces, cortex, recipe.PIAL_CLEARANCE)
    outer = _offset(inner, faces, skull)
    scalp = with_face_and_neck(_offset(outer, faces, skin), faces, directions)
    return Layers(inner, outer, scalp, faces)


def project_on_scalp(layers: Layers, point: tuple[float, float, float]) -> np.ndarray:
    """Where the ray from the centre through `point` [mm, MNI152] meets the scalp (3,) [mm, MNI152]."""
    ray = np.array(point, dtype=float) - recipe.CENTRE
    ray /= np.linalg.norm(ray)
    radius, _ = radius_along(layers.scalp, layers.faces, ray[None])
    return radius[0] * ray + recipe.CENTRE


def shell(ellipsoid: recipe.Ellipsoid, directions: np.ndarray) -> np.ndarray:
    """Points (n, 3) [mm, about recipe.CENTRE] of an ellipsoid in directions (n, 3) from its own centre."""
    return np.array(ellipsoid.centre) + np.array(ellipsoid.semi_axes) * directions - recipe.CENTRE


def thickness(directions: np.ndarray) -> np.ndarray:
    """Fluid, skull and skin (3, n) [mm] in directions (n, 3) from recipe.CENTRE."""
    anchors = np.array([anchor.direction for anchor in recipe.ANCHORS.values()], dtype=float)
    values = np.array([anchor[1:] for anchor in recipe.ANCHORS.values()], dtype=float)
    return blend(directions, anchors, values, recipe.ANCHOR_CONCENTRATION).T


def _offset(vertices: np.ndarray, faces: np.ndarray, distance: np.ndarray) -> np.ndarray:
    return vertices + distance[:, None] * Surface(vertices, faces).normals


def with_face_and_neck(scalp: np.ndarray, faces: np.ndarray, directions: np.ndarray) -> np.ndarray:
    """A star-shaped scalp (n, 3) [mm, about recipe.CENTRE] drawn out low down to a rough face and neck.

    directions (m, 3): of the points of the face's and neck's ellipsoids.
    """
    radius = np.linalg.norm(scalp, axis=1)
    rays = scalp / radius[:, None]
    body = np.vstack([scalp, shell(recipe.FACE, directions), shell(recipe.NECK, directions)])
    drawn_out = hull_radius(body, rays)
    fade = np.clip((recipe.LOW_START - rays[:, 2]) / (recipe.LOW_START - recipe.LOW_FULL), 0, 1)
    fade = fade * fade * (3 - 2 * fade)
    radius = (1 - fade) * radius + fade * drawn_out
    neighbours = edges(faces, len(radius))
    count = neighbours.sum(axis=1)
    for _ in range(recipe.LOW_SMOOTHING):
        radius = radius + 0.5 * fade * (neighbours @ radius / count - radius)
    return radius[:, None] * rays
