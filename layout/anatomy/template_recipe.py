"""The numbers behind the embedded template head, in MNI152 millimetres before scaling.

They are a recipe that was tuned once so that the surfaces resemble an average head in an MRI: the layer
thicknesses are plausible values, not taken from a paper. Landmarks and eyes are stated from memory.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

# Raise it whenever a number here or a step in template.py, template_layers.py or cortex.py changes: cached
# heads are then built anew.
VERSION = 1

CENTRE = np.array([0.0, -18.0, 0.0])  # [mm] all surfaces are star-shaped about it
SUBDIVISIONS = 4  # of the icosahedron: 2,562 vertices a surface
SCALE = 0.945  # MNI152 space is some 5 % larger than the average head

# Linear map between the two average brains' spaces (rows; [mm]), from the documentation of the cortex's
# makers.
MNI305_TO_MNI152 = np.array(
    [
        [0.9975, -0.0073, 0.0176, -0.0429],
        [0.0146, 1.0009, -0.0024, 1.5496],
        [-0.0130, -0.0093, 0.9971, 1.1840],
        [0.0, 0.0, 0.0, 1.0],
    ]
)


class Ellipsoid(NamedTuple):
    """Axis-aligned; centre and semi-axes [mm]."""

    centre: tuple[float, float, float]
    semi_axes: tuple[float, float, float]


CEREBELLUM = Ellipsoid((0, -62, -36), (50, 36, 26))
BRAINSTEM = Ellipsoid((0, -30, -40), (16, 16, 28))
FACE = Ellipsoid((0, 8, -40), (60, 76, 48))
NECK = Ellipsoid((0, -45, -40), (60, 62, 48))

HARMONIC_DEGREE = 10
HARMONIC_PENALTY = 2e-3  # times (l (l + 1))²
PIAL_CLEARANCE = 2.0  # [mm] of every pial vertex to the inner skull
LOW_START, LOW_FULL = -0.1, -0.3  # u_z between which face and neck come in
LOW_SMOOTHING = 5  # passes over the creases where they join the scalp


class Anchor(NamedTuple):
    """Layer thicknesses [mm] in one direction; csf lies between the brain's hull and the inner skull."""

    direction: tuple[float, float, float]
    csf: float
    skull: float
    skin: float


ANCHOR_CONCENTRATION = 8.0  # of the von Mises weights that blend the anchors
ANCHORS = {
    "vertex": Anchor((0, 0, 1), 4, 7.5, 8.5),
    "front": Anchor((0, 1, 0.15), 2.5, 7, 6.5),
    "occiput": Anchor((0, -1, 0), 2.5, 7.5, 7.5),
    "left temporal": Anchor((-1, 0.1, -0.1), 1.5, 5, 8),
    "right temporal": Anchor((1, 0.1, -0.1), 1.5, 5, 8),
    "left parietal": Anchor((-0.7, -0.4, 0.6), 2.5, 7, 7.5),
    "right parietal": Anchor((0.7, -0.4, 0.6), 2.5, 7, 7.5),
    "left frontolateral": Anchor((-0.6, 0.7, 0.3), 2, 6.5, 7),
    "right frontolateral": Anchor((0.6, 0.7, 0.3), 2, 6.5, 7),
    "base": Anchor((0, 0, -1), 2, 6, 8),
    "base left": Anchor((-0.7, 0, -0.7), 2, 7, 12),
    "base right": Anchor((0.7, 0, -0.7), 2, 7, 12),
}

# From memory; projected from the centre on the scalp.
NASION = (0, 86, -47)
INION = (0, -120, -26)
PREAURICULAR = (86, -20, -48)  # right; the left is its mirror image
# Centres of the eyeballs, from memory but for y, which was 60: set back so that a globe of 12 mm radius stays
# under the template's face, which has no brow ridge.
EYES = ((-33, 55, -38), (33, 55, -38))
