"""Ellipsoidal heads for tests of the physics."""

import numpy as np
import trimesh

from layout.anatomy.head import Head, Landmarks, Sources, Surface


def make_head(semi_axes, centre, sphere=None, subdivisions=4, gaps=(6e-3, 7e-3)) -> Head:
    """An ellipsoidal inner skull with outer skull and scalp pushed out along its normals."""
    ball = trimesh.creation.icosphere(subdivisions=subdivisions)
    inner = Surface(ball.vertices * semi_axes + centre, ball.faces)
    outward = (ball.vertices / semi_axes) / np.linalg.norm(ball.vertices / semi_axes, axis=1, keepdims=True)
    outer = Surface(inner.vertices + gaps[0] * outward, ball.faces)
    scalp = Surface(outer.vertices + gaps[1] * outward, ball.faces)
    cortex_points = 0.9 * ball.vertices * semi_axes + centre
    n = len(cortex_points)
    front = np.array([0, semi_axes[1] + sum(gaps), 0])
    return Head(
        name="test",
        scalp=scalp,
        outer_skull=outer,
        inner_skull=inner,
        landmarks=Landmarks(front, np.array([-0.08, 0, 0]), np.array([0.08, 0, 0]), -front),
        cortex=Sources(cortex_points, outward, np.full(n, 1e-6), np.sign(cortex_points[:, 0]), ball.faces),
        eyes=centre + np.array([[-0.03, 0.07, -0.03], [0.03, 0.07, -0.03]]),
        sphere=sphere,
    )
