"""The head frame: origin midway between LPA and RPA, x towards RPA, z up from their plane, y = z × x."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Landmarks


def head_frame(landmarks: Landmarks) -> np.ndarray:
    """Rigid transform (4, 4) from the frame the landmarks are in to the head frame; lengths keep their unit.

    NAS lies in the plane z = 0, off the y axis where the head is asymmetric. Raises ValueError where the
    three fiducial points are (nearly) on one line.
    """
    across = landmarks.rpa - landmarks.lpa
    origin = (landmarks.lpa + landmarks.rpa) / 2
    forward = landmarks.nas - origin
    up = np.cross(across, forward)
    if np.linalg.norm(up) <= 1e-6 * np.linalg.norm(across) * np.linalg.norm(forward):
        raise ValueError("LPA, RPA and NAS must not lie on one line")
    x = across / np.linalg.norm(across)
    z = up / np.linalg.norm(up)
    axes = np.stack([x, np.cross(z, x), z])
    transform = np.eye(4)
    transform[:3, :3] = axes
    transform[:3, 3] = -axes @ origin
    return transform


def apply(transform: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Points (..., 3) through an affine transform (4, 4)."""
    return points @ transform[:3, :3].T + transform[:3, 3]
