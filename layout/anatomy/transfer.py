"""One sensor on many heads: scalp points carried to another head by their arc fractions."""

from __future__ import annotations

import numpy as np

from layout.anatomy.arcs import arc_fractions, point_at
from layout.anatomy.head import Head


def same_sites(from_head: Head, points: np.ndarray, to_head: Head) -> np.ndarray:
    """Scalp points (n, 3) [m] of one head at the same arc fractions on another, (n, 3) [m] on that head's scalp.

    A cap is cut by such fractions: its holes move with the head. A helmet does not stretch: there the same candidate is
    the same pose, with the gap that the other head leaves (`sensing`'s slots measure it on each head). Raises
    LayoutError where a scalp is not closed or its landmarks do not run over it.
    """
    fractions = arc_fractions(from_head.scalp, from_head.landmarks, points)
    return point_at(to_head.scalp, to_head.landmarks, fractions)
