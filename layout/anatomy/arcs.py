"""Arc fractions: a scalp point's identity on other heads.

The planes through the LPA-RPA axis form a pencil. The half plane through a scalp point P cuts the midline
(the plane of nasion, Cz and inion) at M. s is the fraction of M along the midline from nasion (0) to inion
(1), continued with the same unit below both ends: negative in front, above 1 behind. t is the fraction of P
along the contour LPA-M-RPA, 0 at LPA and 1 at RPA. Everything is cut exactly from the mesh, one plane a
point. At LPA and RPA themselves s means nothing.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy.contours import Contour, three_point_contour, three_point_loop
from layout.anatomy.head import Landmarks, Surface
from layout.anatomy.positions import find_cz
from layout.anatomy.scalp_points import project
from layout.errors import LayoutError


class Midline:
    """The closed midline of a scalp, with the pencil of planes through LPA and RPA.

    lpa, rpa (3,) [m] on the scalp; loop: the midline from nasion through Cz and inion back to the nasion.
    """

    def __init__(self, scalp: Surface, landmarks: Landmarks) -> None:
        cz = find_cz(scalp, landmarks)
        ends = project(scalp, np.stack([landmarks.nas, landmarks.lpa, landmarks.rpa, landmarks.inion])).positions
        nas, self.lpa, self.rpa, inion = ends
        self.loop: Contour = three_point_loop(scalp, nas, cz, inion)
        self._middle = (self.lpa + self.rpa) / 2
        axis = (self.rpa - self.lpa) / np.linalg.norm(self.rpa - self.lpa)
        front = nas - self._middle
        front = front - (front @ axis) * axis
        self._front = front / np.linalg.norm(front)
        self._up = np.cross(axis, self._front)
        total = self.loop.lengths[-1]
        below = (total - self.loop.end_length) / 2
        # The loop, opened opposite the arc: from there up the face, over the head and down the neck.
        lengths = self.loop.lengths[:-1]
        lengths = np.where(lengths > total - below, lengths - total, lengths)
        self._lengths = np.unique([-below, *lengths, total - below])
        corners = self.loop.at_length(self._lengths % total)
        angles = np.unwrap(np.arctan2(corners @ self._up - self._middle @ self._up, self._forward(corners)))
        angles += 2 * np.pi * np.round((self._angle_of(nas) - np.interp(0.0, self._lengths, angles)) / (2 * np.pi))
        if angles[-1] <= angles[0]:
            raise LayoutError("landmarks: nasion, Cz and inion must run over the top of the head from front to back")
        # Where the face or neck is not star-shaped about the axis the first crossing counts.
        self._angles = np.maximum.accumulate(angles)
        self._corners = corners

    def _forward(self, points: np.ndarray) -> np.ndarray:
        return (points - self._middle) @ self._front

    def _angle_of(self, points: np.ndarray) -> np.ndarray:
        return np.arctan2((points - self._middle) @ self._up, self._forward(points))

    def fractions(self, points: np.ndarray) -> np.ndarray:
        """s (n,) of points (n, 3) [m]."""
        lowest = self._angles[0]
        angles = lowest + (self._angle_of(points) - lowest) % (2 * np.pi)
        upper = np.clip(np.searchsorted(self._angles, angles), 1, len(self._angles) - 1)
        a, b = self._corners[upper - 1], self._corners[upper]
        # Exact crossing of segment a-b with the plane of the axis and the given angle.
        across = -np.sin(angles)[:, None] * self._front + np.cos(angles)[:, None] * self._up
        high, low = (np.einsum("nd,nd->n", x - self._middle, across) for x in (b, a))
        span = np.where(high - low == 0, 1.0, high - low)
        share = np.clip(-low / span, 0.0, 1.0)
        lengths = self._lengths[upper - 1] + share * (self._lengths[upper] - self._lengths[upper - 1])
        return lengths / self.loop.end_length

    def at(self, fractions: np.ndarray) -> np.ndarray:
        """Midline points (n, 3) [m] at s (n,), which wraps around below the head."""
        return self.loop.at_length((fractions * self.loop.end_length) % self.loop.lengths[-1])


def arc_fractions(scalp: Surface, landmarks: Landmarks, points: np.ndarray) -> np.ndarray:
    """(s, t) of scalp points (n, 3) [m] as (n, 2); see the module's text. Points are taken to lie on the
    scalp.
    """
    points = np.atleast_2d(points)
    midline = Midline(scalp, landmarks)
    s = midline.fractions(points)
    crossings = midline.at(s)
    t = [
        three_point_contour(scalp, midline.lpa, crossing, midline.rpa).fraction_of(point)
        for crossing, point in zip(crossings, points, strict=True)
    ]
    return np.column_stack([s, t])


def point_at(scalp: Surface, landmarks: Landmarks, fractions: np.ndarray) -> np.ndarray:
    """Scalp points (n, 3) [m] at (s, t) (n, 2): the inverse of `arc_fractions`, on this or another head."""
    fractions = np.atleast_2d(fractions)
    midline = Midline(scalp, landmarks)
    crossings = midline.at(fractions[:, 0])
    return np.array(
        [
            three_point_contour(scalp, midline.lpa, crossing, midline.rpa).at(t)
            for crossing, t in zip(crossings, fractions[:, 1], strict=True)
        ]
    )
