"""Where a cap ends: a line round the head that leaves face and ears free and goes under every hole."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Landmarks

# Azimuth [degrees from the front] and height [m above the plane of nasion and preauricular points] on a head whose
# nasion and inion are 190 mm apart: over the brows, over the ears, down to the inion. Our own choice.
_AZIMUTH = (0.0, 40.0, 75.0, 105.0, 140.0, 180.0)
_HEIGHT = (24e-3, 28e-3, 28e-3, 27e-3, 8e-3, 3e-3)
_LENGTH = 190e-3  # [m]
_RAMP = 14e-3  # [m] length over which the rim comes back up beside a hole
CLEAR = 8e-3  # [m] least width of cap between a hole's edge and the rim


@dataclass(frozen=True)
class Rim:
    """Height of the rim over the azimuth about an upright axis.

    centre (2,) [m]: x and y of the axis; size: length of the head over that of the standard one; holes (n, 3) [m] and
    room (n,) [m]: what must lie above the rim, and by how much.
    """

    centre: np.ndarray
    size: float
    holes: np.ndarray
    room: np.ndarray

    def above(self, points: np.ndarray) -> np.ndarray:
        """Height (n,) [m] of points (n, 3) [m] above the rim, negative outside the cap."""
        out = points[:, :2] - self.centre
        azimuth = np.arctan2(out[:, 0], out[:, 1])
        return points[:, 2] - self._height(azimuth, np.linalg.norm(out, axis=1))

    def _height(self, azimuth: np.ndarray, radius: np.ndarray) -> np.ndarray:
        from scipy.interpolate import PchipInterpolator

        both = [-a for a in _AZIMUTH[:0:-1]] + list(_AZIMUTH)
        heights = [*_HEIGHT[:0:-1], *_HEIGHT]
        height = self.size * PchipInterpolator(np.radians(both), heights)(azimuth)
        for hole, room in zip(self.holes, self.room, strict=True):
            out = hole[:2] - self.centre
            turn = np.abs((azimuth - np.arctan2(out[0], out[1]) + np.pi) % (2 * np.pi) - np.pi)
            beside = np.clip((turn * np.maximum(radius, 1e-3) - room) / _RAMP, 0.0, 1.0)
            lowest = hole[2] - room
            eased = (1 + np.cos(np.pi * beside)) / 2  # 1 under the hole, 0 where the rim is its own again
            height = np.minimum(height, height + eased * (lowest - height))
        return height


def find_rim(landmarks: Landmarks, holes: np.ndarray, radii: np.ndarray) -> Rim:
    """The rim of a cap with holes (n, 3) [m] of the given radii (n,) [m]."""
    centre = (landmarks.nas + landmarks.inion)[:2] / 2
    size = np.linalg.norm(landmarks.nas - landmarks.inion) / _LENGTH
    return Rim(centre, float(size), holes, radii + CLEAR)
