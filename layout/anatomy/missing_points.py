"""Inion and eyes where a person's files do not give them: placed by a stated rule, as on the template head."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head, Landmarks, Surface
from layout.anatomy.scalp_points import first_hit
from layout.errors import FileError

OUTSIDE = 0.5  # m from the origin: outside any head


def place_inion(scalp: Surface, template: Head) -> tuple[np.ndarray, str]:
    """A point (3,) [m] on the back midline at the template's angle from the ear line, and the sentence that says so.

    The bump itself cannot be found in a smooth scalp. Raises FileError where the midline's back is not there.
    """
    y, z = template.landmarks.inion[1:]
    way = np.array([0.0, y, z]) / np.hypot(y, z)
    hit = first_hit(scalp, OUTSIDE * way[None], -way[None])[0]
    if not np.isfinite(hit).all():
        raise FileError("landmarks: the inion must be given, for the scalp has no back on its midline where to put it.")
    angle = np.degrees(np.arctan2(z, -y))
    return hit, (
        f"The inion was not given: it was put on the midline, {angle:.0f}° above the plane of nasion and ears as on "
        "the template; standard positions along the back of the head depend on it (10 mm there move Oz by some 9 mm, "
        "Cz by 5)."
    )


def place_eyes(landmarks: Landmarks, template: Head) -> tuple[np.ndarray, str]:
    """Centres (2, 3) [m] of the eyeballs relative to NAS as on the template, in proportion to the two heads' widths and
    nasion distances, and the sentence that says so.
    """
    wide = landmarks.rpa[0] / template.landmarks.rpa[0]
    deep = landmarks.nas[1] / template.landmarks.nas[1]
    scale = np.array([wide, deep, (wide * deep) ** 0.5])
    eyes = landmarks.nas + scale * (template.eyes - template.landmarks.nas)
    return eyes, "The eyes were not given: they lie relative to nasion and ears as on the template."
