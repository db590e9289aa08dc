"""Parts of the scalp by name: built-in zones, zones of the brief, and what a stock entry may use of them."""

from __future__ import annotations

import numpy as np

from layout.anatomy.arcs import Midline
from layout.anatomy.head import Head
from layout.anatomy.positions import canonical_name
from layout.anatomy.scalp_points import first_hit, project
from layout.brief.objects import PlacesBrief, StockBrief, ZoneBrief
from layout.errors import BriefError
from layout.sensing.names import near_names
from layout.sensing.polygon import in_polygon, sphere_centre

BUILT_IN = ("eyes", "ears", "neck", "face", "forehead")
SAME_PLACE = 1e-3  # [m] places nearer than this are one
_EAR_BACK = 5e-3  # [m] the outer ear lies behind the preauricular point
_EAR_LINE = -15e-3  # [m] z of the head's lower edge at the ears, 15 mm under the preauricular level
_SLACK = 2e-3  # [m] so that Iz and positions on the nasion-ear ring stay on the head
_TOO_LOW = -60e-3  # [m] z below which the scalp mesh is neck or jaw wherever it is
# Bare skin ends between AFpz (0.15 of the midline) with AF7 (0.12) inside and F7 (0.16) in the hair.
_HAIRLINE = 0.14
_TEMPLE = np.radians(50.0)  # azimuth from the front


def zone_mask(
    head: Head,
    places: PlacesBrief,
    zone_name: str,
    points: np.ndarray,
    standard: dict[str, np.ndarray],
    names: tuple[str, ...] = (),
) -> np.ndarray:
    """Which of the scalp points (n, 3) [m] lie in a zone (n,) bool.

    eyes: balls of `places.eye_radius` about the scalp in front of the eyeballs, and the face. face: in front
    of the ears and below the line from the ears to the eyes or the nasion, whichever is lower. ears: balls
    of `places.ear_radius` about points 5 mm behind LPA and RPA. neck: behind the ears and below the plane
    from 15 mm under them to the inion, and everything 60 mm below the fiducial plane. forehead: bare skin,
    less than 0.14 of the midline above the nasion and within 50° of the front. A zone of the brief: balls
    about its positions, a polygon (see sensing.polygon), or sites by name: `names` of the points where they have
    any, or standard positions within 1 mm. Raises BriefError for an unknown zone or position.
    """
    own = {zone.name: zone for zone in places.zones}
    clash = [name for name in own if name in BUILT_IN]
    if clash:
        raise BriefError(f"places.zones: name must not be that of a built-in zone, but {clash[0]!r} was given")
    if zone_name in own:
        return _own_zone(own[zone_name], points, standard, names)
    if zone_name == "eyes":
        fronts = first_hit(head.scalp, head.eyes, np.tile([0.0, 1.0, 0.0], (len(head.eyes), 1)))
        missed = np.isnan(fronts).any(axis=1)
        fronts[missed] = project(head.scalp, head.eyes).positions[missed]
        return _in_balls(points, fronts, places.eye_radius) | _face(head, points)
    if zone_name == "face":
        return _face(head, points)
    if zone_name == "ears":
        centres = np.stack([head.landmarks.lpa, head.landmarks.rpa]) - [0.0, _EAR_BACK, 0.0]
        return _in_balls(points, centres, places.ear_radius)
    if zone_name == "neck":
        behind = (points[:, 1] <= 0) & (points[:, 2] < _lower_edge(head, points[:, 1]))
        return behind | (points[:, 2] < _TOO_LOW)
    if zone_name == "forehead":
        azimuth = np.arctan2(np.abs(points[:, 0]), points[:, 1])
        low = Midline(head.scalp, head.landmarks).fractions(points) < _HAIRLINE
        return low & (azimuth <= _TEMPLE) & ~_face(head, points)
    known = [*BUILT_IN, *own]
    raise BriefError(
        f"zone must be one of {', '.join(known)}, but {zone_name!r} was given{near_names(zone_name, known)}"
    )


def allowed(
    head: Head,
    places: PlacesBrief,
    entry: StockBrief,
    points: np.ndarray,
    standard: dict[str, np.ndarray],
    key: str = "stock",
    names: tuple[str, ...] = (),
) -> tuple[np.ndarray, dict[str, int]]:
    """Which points (n, 3) [m] a stock entry may use (n,) bool, and how many each rule takes away.

    A point is out when any zone of `keep_out` has it, or when `only_in` is given and none of its zones has
    it. `key` is the entry's place in the brief, for the error: BriefError for an unknown zone or position. names: of
    the points, where they have any.
    """
    fine = np.ones(len(points), dtype=bool)
    lost: dict[str, int] = {}
    for zone in entry.keep_out:
        inside = _named(head, places, zone, points, standard, f"{key}.keep_out", names)
        lost[zone] = int(inside.sum())
        fine &= ~inside
    if entry.only_in:
        inside = np.zeros(len(points), dtype=bool)
        for zone in entry.only_in:
            inside |= _named(head, places, zone, points, standard, f"{key}.only_in", names)
        lost["outside " + " and ".join(entry.only_in)] = int((~inside).sum())
        fine &= inside
    return fine, lost


def _named(
    head: Head,
    places: PlacesBrief,
    zone: str,
    points: np.ndarray,
    standard: dict[str, np.ndarray],
    key: str,
    names: tuple[str, ...],
) -> np.ndarray:
    """`zone_mask`, with the brief's key in front of a complaint about the zone's name."""
    try:
        return zone_mask(head, places, zone, points, standard, names)
    except BriefError as problem:
        text = str(problem)
        raise BriefError(f"{key}: {text}" if text.startswith("zone must") else text) from None


def _own_zone(
    zone: ZoneBrief, points: np.ndarray, standard: dict[str, np.ndarray], names: tuple[str, ...]
) -> np.ndarray:
    if zone.corners:
        corners = [
            _position(corner, standard, zone.name, "corners") if isinstance(corner, str) else np.array(corner)
            for corner in zone.corners
        ]
        # The earlobes are no scalp positions, and not every caller's table has them.
        on_scalp = np.array([point for name, point in standard.items() if name not in ("A1", "A2")])
        return in_polygon(points, np.array(corners), sphere_centre(on_scalp), zone.name)
    if zone.positions:
        wanted = {name for given in zone.positions for name in (given, canonical_name(given))}
        # A site that shares its name with another has its entry's name behind an @.
        named = np.array([bool({name, name.rpartition("@")[0]} & wanted) for name in names], dtype=bool)
        places = [standard[name] for name in wanted if name in standard]
        near = _in_balls(points, np.array(places), SAME_PLACE) if places else np.zeros(len(points), dtype=bool)
        return near | named if len(named) else near
    centres = [_position(name, standard, zone.name, "around") for name in zone.around]
    return _in_balls(points, np.array(centres), zone.radius)


def _position(name: str, standard: dict[str, np.ndarray], zone: str, key: str) -> np.ndarray:
    present = canonical_name(name)
    if present not in standard:
        raise BriefError(
            f"places.zones {zone!r}: {key} must name standard positions, but {name!r} was given"
            f"{near_names(name, list(standard))}"
        )
    return standard[present]


def _in_balls(points: np.ndarray, centres: np.ndarray, radius: float) -> np.ndarray:
    return (np.linalg.norm(points[:, None] - centres[None], axis=2) <= radius).any(axis=1)


def _lower_edge(head: Head, y: np.ndarray) -> np.ndarray:
    """z [m] of the head's lower edge at y [m]: inion, under the ears, eyes or nasion."""
    inion = head.landmarks.inion
    eye_y, eye_z = head.eyes[:, 1].mean(), head.eyes[:, 2].mean()
    front = min(eye_z, head.landmarks.nas[2])
    return np.interp(y, [inion[1], 0.0, eye_y], [inion[2] - _SLACK, _EAR_LINE, front - _SLACK])


def _face(head: Head, points: np.ndarray) -> np.ndarray:
    return (points[:, 1] > 0) & (points[:, 2] < _lower_edge(head, points[:, 1]))
