"""Whether a point of MNI152 lies at the cortex of the template head: asked before a brief about it is written."""

from __future__ import annotations

import numpy as np

from layout.anatomy.build import build_head
from layout.anatomy.frame import apply
from layout.anatomy.region_files import SIDES
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
from layout.brief.objects import HeadBrief
from layout.errors import BriefError
from layout.units import MM

NEAR = 12.0  # mm: a ball of 15 mm then holds cortex on the largest head, too, where distances are a fifth longer


def check_near_cortex(centre: tuple[float, float, float], side: str) -> None:
    """Raises BriefError where a point [mm, MNI152] is farther than NEAR from the template's cortex on a side."""
    head = build_head(HeadBrief("template", DEFAULT_CONDUCTIVITIES[3]))
    point = apply(head.mni_to_head, np.array(centre) * MM)
    counts = np.isin(head.cortex.side, SIDES[side])
    away = np.linalg.norm(head.cortex.positions[counts] - point, axis=1).min() / MM
    if away > NEAR:
        said = " ".join(f"{one:g}" for one in centre)
        raise BriefError(
            f'A region must lie within {NEAR:g} mm of the average cortex, but "{said}" is {away:.0f} mm from it.'
        )
