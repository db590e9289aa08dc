"""Zones drawn as polygons on the scalp, their edges arcs of great circles about the middle of the head."""

from __future__ import annotations

import numpy as np

from layout.errors import BriefError

_WIDEST = np.radians(80.0)  # a corner farther from the polygon's middle: the polygon is (nearly) a hemisphere or more
_RIM = 1e-4  # of the distance to the middle of the head, about 0.01 mm: sites on the rim are inside


def sphere_centre(points: np.ndarray) -> np.ndarray:
    """Centre (3,) [m] of the sphere that fits points (n, 3) [m] best, by linear least squares on its equation."""
    table = np.column_stack([2 * points, np.ones(len(points))])
    return np.linalg.lstsq(table, (points**2).sum(axis=1), rcond=None)[0][:3]


def in_polygon(points: np.ndarray, corners: np.ndarray, centre: np.ndarray, name: str) -> np.ndarray:
    """Which points (n, 3) [m] lie in or on the polygon with these corners (c, 3) [m], in order (n,) bool.

    Points and corners are seen from `centre` (3,) [m] as directions and laid by gnomonic projection into the plane that
    touches the sphere in the polygon's middle (the mean direction of its corners): there arcs of great circles are
    straight, so that the test is exact for every polygon that stays within 80 degrees of its middle. The inside is the
    side that holds no antipode. Raises BriefError, naming the zone, for a larger polygon, one whose edges cross, and
    one without any area.
    """
    import shapely

    seen = corners - centre
    seen = seen / np.maximum(np.linalg.norm(seen, axis=1, keepdims=True), 1e-12)
    middle = seen.mean(axis=0)
    size = np.linalg.norm(middle)
    middle = middle / max(size, 1e-12)
    away = np.arccos(np.clip(seen @ middle, -1.0, 1.0))
    if size < 1e-6 or away.max() > _WIDEST:
        widest = 180 if size < 1e-6 else np.degrees(away.max())
        raise BriefError(
            f"places.zones {name!r}: corners must lie within {np.degrees(_WIDEST):.0f} degrees of their middle, seen "
            f"from the middle of the head, but the farthest is {widest:.0f} degrees away"
        )
    across = np.linalg.svd(middle[None])[2][1:]
    outline = shapely.Polygon((seen @ across.T) / (seen @ middle)[:, None])
    if not outline.is_valid or outline.area < 1e-9:
        raise BriefError(
            f"places.zones {name!r}: corners must go round a part of the scalp without crossing edges, but they do not"
        )
    toward = (points - centre) @ middle
    ahead = toward > 1e-9 * np.linalg.norm(points - centre, axis=1)
    flat = ((points - centre) @ across.T) / np.where(ahead, toward, 1.0)[:, None]
    return ahead & shapely.intersects_xy(outline.buffer(_RIM), flat[:, 0], flat[:, 1])
