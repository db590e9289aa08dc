"""The size of a head as callipers and a tape would find it."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from scipy.spatial import ConvexHull

from layout.anatomy.contours import plane_loops
from layout.anatomy.head import Head

MIDDLE = 3e-3  # m either side of the midline
BROW = (20e-3, 45e-3)  # m above the fiducial plane: where the glabella is looked for
ABOVE_EARS = 15e-3  # m above the fiducial plane


class HeadSize(NamedTuple):
    """length, breadth, circumference [m]."""

    length: float
    breadth: float
    circumference: float


def head_size(head: Head) -> HeadSize:
    """Length from the glabella to the farthest midline point behind, breadth above the ears, tape round both ends.

    The glabella is the foremost midline point 20 to 45 mm above the fiducial plane; the tape (convex hull of the plane
    cut) runs level from ear to ear. A head that is a sphere has its diameter and its great circle.
    """
    if head.sphere is not None:
        diameter = 2.0 * float(head.sphere[1][-1])
        return HeadSize(diameter, diameter, np.pi * diameter)
    points = head.scalp.vertices
    middle = points[np.abs(points[:, 0]) < MIDDLE]
    brow = middle[(middle[:, 1] > 0) & (middle[:, 2] > BROW[0]) & (middle[:, 2] < BROW[1])]
    glabella = brow[np.argmax(brow[:, 1])]
    behind = middle[middle[:, 1] < 0]
    reach = np.linalg.norm(behind - glabella, axis=1)
    along = (behind[np.argmax(reach)] - glabella) / reach.max()
    up = np.cross([1.0, 0.0, 0.0], -along)
    up /= np.linalg.norm(up)
    cut = np.vstack(plane_loops(head.scalp, up, float(up @ glabella)))
    tape = ConvexHull(np.stack([cut[:, 0], cut @ along], axis=1)).area  # in two dimensions: the perimeter
    breadth = np.ptp(points[points[:, 2] > ABOVE_EARS, 0])
    return HeadSize(float(reach.max()), float(breadth), float(tape))
