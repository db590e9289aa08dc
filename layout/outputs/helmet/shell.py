"""A rigid shell over the scalp with a guided hole for every housing, to print; cut and joined by exact booleans."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head, Surface
from layout.outputs.helmet.envelope import Envelope, angles_of, spherical
from layout.outputs.helmet.gaps import box_gaps
from layout.outputs.helmet.meshes import Mesh, binary_stl, box, strokes, strokes_width
from layout.outputs.helmet.sensors import HousedSensor, housed_sensors, stacked
from layout.outputs.result import DesignResult, RankedLayout
from layout.sensing.polygon import sphere_centre
from layout.units import MM

ROOM = (
    3 * MM
)  # between scalp and shell beyond the brief's hair allowance: padding, and a head that is not quite this one
WALL = 3 * MM
FIT = 0.25 * MM  # between a housing and each side of its hole, for printers that lay plastic
COLLAR = 2 * MM  # wall of the collar that guides a housing: the shell alone would let it tilt by some degrees
GUIDED = 0.75  # of a housing's length that its collar holds; the rest stands out, for fingers and cable
LIP = 1 * MM  # a collar stands out of the wall by so much at least
RIM_FRONT = 40 * MM  # above the plane of nasion and preauricular points: above brows and ears of an adult
RIM_BACK = 10 * MM  # above the inion
MARGIN = 5 * MM  # of shell left around a collar; the rim comes down where a sensor sits lower
READABLE = 6 * MM  # of room in front of a number are enough
NOTCH = (3 * MM, 2 * MM)  # width and depth of the notch in a collar's top on the side of x
DIGIT, RAISED, SMALLEST_DIGIT = 6 * MM, 0.6 * MM, 3 * MM  # height of the number on a collar, how far it stands out
_EAR_BACK, _BACK = 0.35, 0.85  # -sin(azimuth) between which the rim comes down behind the ears
_SLACK = 0.03 * MM  # both sides are raised by so much: a facet is measured in its middle and on its edges only
_CLIMB = 0.7  # slope of the rim up from a sensor that pulls it down
_AROUND, _UP, _BELOW = 120, 36, 6  # directions around, from the top to the rim, and below it
_SKIRT, _LOWEST = np.radians(25), np.radians(-85)
_TOLERANCE = 1e-3  # [mm] smaller features that a boolean leaves are taken away


@dataclass(frozen=True)
class Moulded:
    """The scalp of a head, how it is seen from its middle, the middle (3,) [m], the inion's height [m]."""

    scalp: Surface
    envelope: Envelope
    centre: np.ndarray
    inion: float


@dataclass(frozen=True)
class HelmetShell:
    """A shell and what was measured on it, SI units.

    mesh: vertices (n, 3) [m] in the head frame, faces. room: between scalp and shell, hair included. tops (n_sensors,):
    where each collar ends along z of its housing frame. rim: lowest and highest point of the rim (2,) above the plane
    of nasion and preauricular points. lowered: numbers of the sensors for which the rim comes down. undercut [m]: how
    far the scalp above the rim stands out over the opening, seen from above: by so much the shell is too narrow to be
    put on straight. volume [m³]; loose [m³]: what was left out because holes cut it off from the rest.
    """

    mesh: Mesh
    room: float
    tops: np.ndarray
    rim: np.ndarray
    lowered: tuple[int, ...]
    undercut: float
    volume: float
    loose: float


def mould(head: Head) -> Moulded:
    """What all shells of a head share."""
    upper = head.scalp.vertices[head.scalp.vertices[:, 2] > 0]
    centre = sphere_centre(upper)
    return Moulded(head.scalp, Envelope(head.scalp, centre), centre, float(head.landmarks.inion[2]))


def helmet_shell(moulded: Moulded, sensors: tuple[HousedSensor, ...]) -> HelmetShell:
    """The shell for at least one sensor: one piece, closed, nowhere nearer to the scalp than its room."""
    room = ROOM + max(one.hair for one in sensors)
    tops = np.array([max(GUIDED * one.size[2], room + WALL + LIP - one.lift) for one in sensors])
    rim, lowered = _rim(moulded, sensors, room)
    dome, hollow = _dome(moulded, rim, room)
    solids = [_solid(dome)]
    cuts = [_solid(hollow)]
    sides = _free_sides(sensors, tops)
    for one, top, side in zip(sensors, tops, sides, strict=True):
        bottom = -one.lift - 3 * room - WALL  # well inside the hollow, corners too
        section = one.size[:2] + 2 * FIT
        solids.append(_solid(_upright(one.pose, (0.0, 0.0), section + 2 * COLLAR, bottom, top)))
        solids += [_solid(mesh) for mesh in _number(one, top, side, room)]
        cuts.append(_solid(_upright(one.pose, (0.0, 0.0), section, bottom - room, max(top, one.size[2]) + LIP)))
        beside = (section[0] / 2 + COLLAR / 2, 0.0)
        cuts.append(_solid(_upright(one.pose, beside, np.array([1.5 * COLLAR, NOTCH[0]]), top - NOTCH[1], top + LIP)))
    vertices, faces, volume, loose = _joined_and_cut(solids, cuts)
    middle, inside = _rim_points(moulded, rim, (room + WALL / 2, room))
    heights = middle[:, 2]
    return HelmetShell(
        (vertices, faces),
        room,
        tops,
        np.array([heights.min(), heights.max()]),
        lowered,
        _undercut(moulded, rim, inside),
        volume,
        loose,
    )


def helmet_shell_stl(result: DesignResult, layout: RankedLayout, shell: HelmetShell | None = None) -> bytes:
    """The layout's shell as binary STL in mm, head frame; `shell` where it was made already."""
    shell = shell or helmet_shell(mould(result.head), housed_sensors(result, layout))
    vertices, faces = shell.mesh
    return binary_stl((vertices / MM, faces), f"helmet shell, layout {layout.rank}, mm, head frame")


def _azimuths() -> np.ndarray:
    return np.arange(_AROUND) / _AROUND * 2 * np.pi


def _rim(moulded: Moulded, sensors: tuple[HousedSensor, ...], room: float) -> tuple[np.ndarray, tuple[int, ...]]:
    """Elevation (n_around,) of the rim as seen from the centre, and the numbers of the sensors that pull it down."""
    azimuth = _azimuths()
    behind = np.clip((-np.sin(azimuth) - _EAR_BACK) / (_BACK - _EAR_BACK), 0.0, 1.0)
    low = min(moulded.inion + RIM_BACK, RIM_FRONT)
    height = RIM_FRONT + (low - RIM_FRONT) * behind**2 * (3 - 2 * behind) - moulded.centre[2]
    rim = np.zeros(_AROUND)
    for _ in range(4):  # the radius hardly changes with the elevation: this settles to micrometres
        radius = moulded.envelope.radii(spherical(azimuth, rim), (room + WALL / 2,))[:, 0]
        rim = np.arcsin(np.clip(height / radius, -0.99, 0.99))
    lowered = []
    turn = np.arange(96) / 96 * 2 * np.pi
    result = rim
    for one in sensors:
        around = np.hypot(*(one.size[:2] / 2 + FIT + COLLAR)) + MARGIN
        ring = np.stack([around * np.cos(turn), around * np.sin(turn), np.full(96, room + WALL / 2 - one.lift)], axis=1)
        seen, low = angles_of(ring @ one.pose[:3, :3].T + one.pose[:3, 3] - moulded.centre)
        away = np.abs((azimuth[:, None] - seen + np.pi) % (2 * np.pi) - np.pi)
        away = np.maximum(away - 2 * np.pi / _AROUND, 0.0)  # both neighbours of a point of the ring are below it
        needed = (low + _CLIMB * away * np.cos(low)).min(axis=1)
        if (low < np.interp(seen, azimuth, rim, period=2 * np.pi)).any():
            lowered.append(one.row.number)
        result = np.minimum(result, needed)
    return np.maximum(result, _LOWEST), tuple(lowered)


def _rim_points(moulded: Moulded, rim: np.ndarray, distances: tuple[float, ...]) -> np.ndarray:
    """The rim (k, n_around, 3) [m] at k distances from the scalp."""
    directions = spherical(_azimuths(), rim)
    return moulded.centre + directions * moulded.envelope.radii(directions, distances).T[:, :, None]


def _undercut(moulded: Moulded, rim: np.ndarray, inside: np.ndarray) -> float:
    """How far [m] the scalp above the rim reaches over the opening that the inner edge (n_around, 3) [m] leaves."""
    import shapely

    azimuth, elevation = angles_of(moulded.scalp.vertices - moulded.centre)
    above = moulded.scalp.vertices[elevation > np.interp(azimuth, _azimuths(), rim, period=2 * np.pi)]
    opening = shapely.Polygon(inside[:, :2]).buffer(0)
    return float(shapely.distance(opening, shapely.points(above[:, :2])).max())


def _dome(moulded: Moulded, rim: np.ndarray, room: float) -> tuple[Mesh, Mesh]:
    """The solid under the shell's outer side down to the rim, and the hollow under its inner side, past the rim."""
    share = np.arange(1, _UP + 1)[:, None] / _UP
    elevation = np.pi / 2 - share * (np.pi / 2 - rim)  # rows from near the top to the rim
    lowest = np.maximum(rim - _SKIRT, np.radians(-88))
    below = rim - np.arange(1, _BELOW + 1)[:, None] / _BELOW * (rim - lowest)
    top = np.array([[0.0, 0.0, 1.0]])
    wall = np.concatenate([top, spherical(_azimuths(), elevation).reshape(-1, 3)])
    skirt = spherical(_azimuths(), below).reshape(-1, 3)
    nearest = room + _SLACK
    inner, outer = moulded.envelope.radii(wall, (nearest, nearest + WALL)).T
    under = moulded.envelope.radii(skirt, (nearest,))[:, 0]
    rays, radii = np.concatenate([wall, skirt]), np.concatenate([inner, under])
    rise = _rise(moulded.envelope, rays, radii, _facets(_UP + _BELOW), nearest)
    dome = moulded.centre + wall * (outer + rise[: len(wall)])[:, None]
    hollow = moulded.centre + rays * (radii + rise)[:, None]
    return _cone(dome, _UP, moulded.centre), _cone(hollow, _UP + _BELOW, moulded.centre)


def _rise(envelope: Envelope, rays: np.ndarray, radii: np.ndarray, facets: np.ndarray, distance: float) -> np.ndarray:
    """How far corners (n,) must go out along their rays (n, 3), so that no facet is nearer to the scalp than `distance`
    at its middle or at the middle of an edge: flat facets cut the corners of what stands out between the rays.
    """
    corners = rays * radii[:, None]
    edges = np.unique(np.sort(facets[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1), axis=0)
    rise = np.zeros(len(radii))
    for parts in (edges, facets):
        middle = corners[parts].mean(axis=1)
        reach = np.linalg.norm(middle, axis=1)
        lacking = envelope.radii(middle / reach[:, None], (distance,))[:, 0] - reach
        np.maximum.at(rise, parts.ravel(), np.repeat(lacking, parts.shape[1]))
    return rise


def _cone(points: np.ndarray, rows: int, apex: np.ndarray) -> Mesh:
    """A closed mesh from a top point and `rows` rings of points below it, the last ring closed towards the apex."""
    here = np.arange(_AROUND)
    last = 1 + (rows - 1) * _AROUND
    under = np.column_stack([last + here, np.full(_AROUND, len(points)), last + (here + 1) % _AROUND])
    return np.vstack([points, apex]), np.concatenate([_facets(rows), under])


def _facets(rows: int) -> np.ndarray:
    """Triangles (m, 3) between a top point and `rows` rings of points below it."""
    here = np.arange(_AROUND)
    there = (here + 1) % _AROUND
    facets = [np.column_stack([np.zeros(_AROUND, int), 1 + here, 1 + there])]
    for row in range(rows - 1):
        high, low = 1 + row * _AROUND, 1 + (row + 1) * _AROUND
        facets.append(np.column_stack([high + here, low + here, low + there]))
        facets.append(np.column_stack([high + here, low + there, high + there]))
    return np.concatenate(facets)


def _upright(pose: np.ndarray, middle: tuple[float, float], section: np.ndarray, low: float, high: float) -> Mesh:
    """A box along z of a pose, from z = low to high, of the given section about `middle` in x and y."""
    placed = pose.copy()
    placed[:3, 3] += pose[:3, :3] @ np.array([*middle, low])
    return box(placed, np.array([*section, high - low]))


def _side_pose(one: HousedSensor, side: int, height: float) -> np.ndarray:
    """A collar's side as a frame: z out of it, y up along the housing, x to the reader's right; origin at `height`.

    side: quarters of a turn about the housing's z, 0 the side of x.
    """
    angle = side * np.pi / 2
    out = np.array([np.cos(angle), np.sin(angle), 0.0]).round()
    frame = np.eye(4)
    frame[:3, :3] = np.column_stack([np.cross([0.0, 0.0, 1.0], out), [0.0, 0.0, 1.0], out])
    half = one.size[side % 2] / 2 + FIT + COLLAR
    frame[:3, 3] = half * out + [0.0, 0.0, height]
    return one.pose @ frame


def _free_sides(sensors: tuple[HousedSensor, ...], tops: np.ndarray) -> np.ndarray:
    """The side (n,) of each collar on which its number can be read: with room in front of it, rather up than down."""
    poses, sizes = stacked(sensors)
    best = []
    for number, (one, top) in enumerate(zip(sensors, tops, strict=True)):
        others = np.delete(np.arange(len(sensors)), number)
        sides = np.array([_side_pose(one, side, top - DIGIT) for side in range(4)])
        slabs, count = np.array([DIGIT, DIGIT, RAISED]), len(others)
        room = [
            box_gaps(np.tile(side, (count, 1, 1)), np.tile(slabs, (count, 1)), poses[others], sizes[others]).min(
                initial=READABLE
            )
            for side in sides
        ]
        best.append(int(np.argmax(np.round(np.array(room) + READABLE * sides[:, 2, 2], 6))))
    return np.array(best)


def _number(one: HousedSensor, top: float, side: int, room: float) -> list[Mesh]:
    """The sensor's number, raised on the given side of its collar; nothing where the collar is too low for it."""
    wide = one.size[(side + 1) % 2] + 2 * (FIT + COLLAR) - 2 * MM
    height = min(DIGIT, top - NOTCH[1] - (room + WALL - one.lift) - 2 * MM)
    height *= min(1.0, wide / strokes_width(one.row.number, height)) if height > 0 else 0.0
    if height < SMALLEST_DIGIT:
        return []
    frame = _side_pose(one, side, top - NOTCH[1] - 0.5 * MM - height / 2)  # below the notch
    return [
        _upright(frame, (left + wide / 2, low + tall / 2), np.array([wide, tall]), -COLLAR / 2, RAISED)
        for left, low, wide, tall in strokes(one.row.number, height)
    ]


def _solid(mesh: Mesh):
    from manifold3d import Manifold, Mesh64

    vertices, faces = mesh
    return Manifold(Mesh64(np.ascontiguousarray(vertices / MM), faces.astype(np.uint64)))


def _joined_and_cut(solids: list, cuts: list) -> tuple[np.ndarray, np.ndarray, float, float]:
    """Vertices [m], faces, volume and loose volume [m³] of the union of `solids` less all `cuts`."""
    from manifold3d import Manifold, OpType

    whole = Manifold.batch_boolean(solids, OpType.Add)
    whole = Manifold.batch_boolean([whole, *cuts], OpType.Subtract).set_tolerance(_TOLERANCE)
    pieces = sorted(whole.decompose(), key=lambda piece: piece.volume())
    shell = pieces.pop()
    mesh = shell.to_mesh64()
    loose = sum(max(piece.volume(), 0.0) for piece in pieces)  # below 0: a bubble, which is filled
    return mesh.vert_properties[:, :3] * MM, mesh.tri_verts.astype(int), shell.volume() * MM**3, loose * MM**3
