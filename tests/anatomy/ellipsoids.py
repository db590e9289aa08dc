"""Synthetic scalps: ellipsoids with landmarks on their equator, and exact arc lengths of ellipses."""

import numpy as np
import trimesh

from layout.anatomy.head import Landmarks, Surface


def ellipsoid(semi_axes=(1.0, 1.0, 1.0), subdivisions=4) -> Surface:
    mesh = trimesh.creation.icosphere(subdivisions=subdivisions)
    return Surface(np.asarray(mesh.vertices) * np.array(semi_axes), np.asarray(mesh.faces))


def equator_landmarks(semi_axes=(1.0, 1.0, 1.0)) -> Landmarks:
    a, b, _ = semi_axes
    return Landmarks(
        nas=np.array([0.0, b, 0.0]),
        lpa=np.array([-a, 0.0, 0.0]),
        rpa=np.array([a, 0.0, 0.0]),
        inion=np.array([0.0, -b, 0.0]),
    )


def ellipse_fraction(horizontal: float, vertical: float, x: float, z: float) -> float:
    """Fraction of the upper half ellipse's length from (horizontal, 0) to the direction of (x, z)."""
    end = np.arctan2(max(z, 0.0) / vertical, x / horizontal)
    angles = np.linspace(0, np.pi, 400_001)
    speed = np.hypot(horizontal * np.sin(angles), vertical * np.cos(angles))
    lengths = np.concatenate([[0], np.cumsum((speed[1:] + speed[:-1]) / 2 * np.diff(angles))])
    return float(np.interp(end, angles, lengths) / lengths[-1])


def quarter_ellipse(a: float, b: float) -> float:
    """Length of a quarter of an ellipse."""
    from scipy.special import ellipe

    return float(max(a, b) * ellipe(1 - (min(a, b) / max(a, b)) ** 2))
