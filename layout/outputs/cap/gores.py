"""A scalp above a rim, cut into gores that run from the forehead to the nape, and each laid flat."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from layout.anatomy.contours import three_point_contour
from layout.anatomy.head import Landmarks, Surface
from layout.anatomy.positions import find_cz
from layout.anatomy.scalp_points import project
from layout.outputs.cap.flatten import Flat, flatten
from layout.outputs.cap.mesh import boundary_loop, cut, halved, largest_part

SEAM_NAMES = "BDGHJKQS"  # with a notch's number behind them none reads as an electrode, such as A1, C3, F4
COUNTS = (7, 9)  # gores tried, in this order; 5 were 7 to 9 % off on the average head
LIMIT = 0.05  # the fewest gores are taken whose lengths are right within this but for 0.2 % of the area
_BEYOND = 0.002
AXIS_BELOW = 60e-3  # [m] the seams' planes meet in a line from front to back, this far under nasion and inion
_LONGEST = 6.5e-3  # [m] edge of the mesh that is laid flat
_BAND = 6e-3  # [m] see `flatten`: along the border, where a sewer needs the true length most
_SEAM_BAND = 0.2  # [m] the same, for seams that must match their neighbours'
# How far a seam may move away from holes: shift in widths of a gore, lean about its own line and turn [rad].
_SHIFTS = np.linspace(-0.3, 0.3, 31)
_LEANS = np.radians(np.linspace(-14.0, 14.0, 15))
_YAWS = np.radians(np.linspace(-10.0, 10.0, 11))
_NARROWEST = 14e-3  # [m] width of a gore at its ends on forehead and nape
_ENOUGH = 6e-3  # [m] more room beside a seam is worth nothing
_WIDEST = 0.3  # of the even width that a gore may be wider over the top
_TIP = 10e-3  # [m] that a seam may move on forehead and nape for nothing
_FLARE = 0.1  # room given up for each metre more
_WIDTH_FIRST = 10.0  # room given up for each metre that a gore is too narrow or too wide
_LEAST = 2e-3  # [m] less room than this counts several times
_CUT_HOLE = 4.0
_EVENNESS = 0.5e-3  # [m] of room given up for a seam that stays where even gores would have it
Above = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True)
class Holes:
    """Round holes: positions (n, 3) [m] on the scalp, outward unit normals (n, 3), radii (n,) [m]."""

    positions: np.ndarray
    normals: np.ndarray
    radii: np.ndarray


@dataclass(frozen=True)
class Gore:
    """One piece: name; vertices (n,) numbers in the cut mesh; faces (m, 3) into them; flat: on paper, front up, seen
    from outside; loop (k,): its border, counter-clockwise, as numbers into `vertices`.
    """

    name: str
    vertices: np.ndarray
    faces: np.ndarray
    flat: Flat
    loop: np.ndarray


@dataclass(frozen=True)
class Seam:
    """Where two gores meet: name; gores: their numbers, left and right; path (n,): vertices of the cut mesh from front
    to back; length [m] on the scalp; flat_lengths (2,) [m]: on paper, on the left and the right gore.
    """

    name: str
    gores: tuple[int, int]
    path: np.ndarray
    length: float
    flat_lengths: tuple[float, float]


@dataclass(frozen=True)
class Cap:
    """The cap in gores from left to right. surface: the cut mesh above the rim; gore_of_face (n_faces,): numbers."""

    surface: Surface
    gore_of_face: np.ndarray
    gores: tuple[Gore, ...]
    seams: tuple[Seam, ...]
    clearance: np.ndarray

    def beyond(self, limit: float) -> float:
        """Share of the area where some length on paper has a larger relative error than `limit`."""
        strain = np.concatenate([np.abs(gore.flat.stretch - 1).max(axis=1) for gore in self.gores])
        areas = np.concatenate([gore.flat.areas for gore in self.gores])
        return float(areas[strain > limit].sum() / areas.sum())

    @property
    def rms(self) -> float:
        """Root of the area-weighted mean square strain of all gores; see `Flat.rms`."""
        areas = np.array([gore.flat.areas.sum() for gore in self.gores])
        return float(np.sqrt(np.average([gore.flat.rms**2 for gore in self.gores], weights=areas)))


def gore_names(count: int) -> tuple[str, ...]:
    """L2, L1, C, R1, R2: an odd number of names from left to right."""
    half = count // 2
    return (*(f"L{k}" for k in range(half, 0, -1)), "C", *(f"R{k}" for k in range(1, half + 1)))


def make_cap(scalp: Surface, landmarks: Landmarks, above: Above, holes: Holes) -> Cap:
    """The cap in as few gores as keep lengths right within LIMIT, or else the truest of those that are tried."""
    tried = []
    for count in COUNTS:
        tried.append(cut_cap(scalp, landmarks, above, holes, count))
        if tried[-1].beyond(LIMIT) <= _BEYOND:
            return tried[-1]
    return min(tried, key=lambda cap: cap.beyond(LIMIT))


def cut_cap(scalp: Surface, landmarks: Landmarks, above: Above, holes: Holes, count: int) -> Cap:
    """Cut and flatten a scalp into `count` gores, an odd number.

    above: height of points (n, 3) [m] over the rim, positive inside the cap. holes: what the seams avoid as far as they
    may move. Raises ValueError where a gore is not one piece.
    """
    surface = halved(scalp, _LONGEST)
    vertices, faces, inside = cut(surface.vertices, surface.faces, above(surface.vertices))
    faces = faces[inside]
    faces = faces[largest_part(faces)]
    planes, clearance = seam_planes(scalp, landmarks, above, holes, count)
    for normal, offset in planes:
        vertices, faces, _ = cut(vertices, faces, vertices @ normal - offset)
    centres = vertices[faces].mean(axis=1)
    gore_of_face = sum((centres @ normal > offset).astype(int) for normal, offset in planes)
    gore_of_face = _without_islands(faces, gore_of_face, count)
    gores = [_gore(name, vertices, faces[gore_of_face == number]) for number, name in enumerate(gore_names(count))]
    paths = [_shared_path(vertices, gores[k], gores[k + 1]) for k in range(count - 1)]
    gores = _with_even_seams(vertices, gores, paths)
    seams = [_seam(SEAM_NAMES[k], vertices, gores, k, path) for k, path in enumerate(paths)]
    return Cap(Surface(vertices, faces), gore_of_face, tuple(gores), tuple(seams), clearance)


def _without_islands(faces: np.ndarray, gore_of_face: np.ndarray, count: int) -> np.ndarray:
    """The same numbers (n_faces,), with corners that a winding rim parts from their gore given to the one beside it."""
    result = gore_of_face.copy()
    for _ in range(count):  # an island may first go to another island
        for number in range(count):
            mine = np.flatnonzero(result == number)
            island = mine[~largest_part(faces[mine])]
            for face in island:
                beside = result[(np.isin(faces, faces[face]).sum(axis=1) == 2) & (result != number)]
                if len(beside):
                    result[face] = beside[0]
    return result


def seam_planes(
    scalp: Surface, landmarks: Landmarks, above: Above, holes: Holes, count: int
) -> tuple[list[tuple[np.ndarray, float]], np.ndarray]:
    """Planes (normal towards the right, offset [m]) of the count - 1 seams from left to right, and how far the nearest
    hole's edge stays from each (count - 1,) [m], negative where a seam meets a hole.

    Mirrored seams have mirrored planes. They divide the arc over the top between both rims evenly and meet in a line
    under the head; then each pair shifts, leans and turns within narrow limits to where it is farthest from holes.
    """
    ends = project(scalp, np.stack([landmarks.lpa, landmarks.rpa])).positions
    arc = three_point_contour(scalp, ends[0], find_cz(scalp, landmarks), ends[1])
    fractions = np.linspace(0, 1, 1001)
    inside = fractions[above(arc.at(fractions)) > 0]
    width = (inside[-1] - inside[0]) / count
    middle = (landmarks.nas + landmarks.inion) / 2 - [0.0, 0.0, AXIS_BELOW]
    along = landmarks.nas - landmarks.inion
    along = along / np.linalg.norm(along)
    side = np.cross(along, [0.0, 0.0, 1.0])
    side /= np.linalg.norm(side)
    frame = np.stack([side, along, np.cross(side, along)])
    shift, lean, yaw = (grid.ravel() for grid in np.meshgrid(_SHIFTS, _LEANS, _YAWS, indexing="ij"))
    moved = np.abs(shift) / _SHIFTS.max() + np.abs(lean) / _LEANS.max() + np.abs(yaw) / _YAWS.max()
    tips = three_point_contour(scalp, landmarks.nas, arc.at(0.5), landmarks.inion).at(fractions)
    tips = tips[above(tips) > 0][[0, -1]]  # where the midline leaves the cap on forehead and nape
    half = -_NARROWEST / 2 * np.ones(2)  # from there to the seam before
    before = -shift  # of the seam before: its mirror image on the other side of the midline
    planes: list[tuple[np.ndarray, float]] = []
    gaps: list[float] = []
    for k in range(count // 2):  # from the middle outwards
        from_middle = (k + 0.5 + shift) * width
        gap, reach = np.full(len(shift), np.inf), np.full((len(shift), 2), np.inf)
        pair = []
        for sign in (-1, 1):
            points = arc.at(0.5 + sign * from_middle)
            base = (points - middle) @ frame.T
            angle = np.arctan2(base[:, 0], base[:, 2]) + sign * lean
            normals = np.stack([np.cos(angle), sign * np.tan(yaw), -np.sin(angle)], axis=1)
            normals = normals / np.linalg.norm(normals, axis=1, keepdims=True) @ frame
            offsets = np.einsum("nd,nd->n", normals, points)
            own = _clearance(normals, offsets, holes)
            gap = np.minimum(gap, own)
            reach = np.minimum(reach, sign * (offsets[:, None] - normals @ tips.T))
            pair.append((normals, offsets, own))
        wrong = np.maximum(half + _NARROWEST - reach, 0.0).sum(axis=1)
        wrong += width * arc.end_length * np.maximum(shift - before - _WIDEST, 0.0)
        flared = np.maximum(np.abs(reach - reach[len(reach) // 2]) - _TIP, 0.0).sum(axis=1)
        room = np.minimum(gap, _ENOUGH) + _CUT_HOLE * np.minimum(gap - _LEAST, 0.0)
        best = int(np.argmax(room - _EVENNESS * moved - _FLARE * flared - _WIDTH_FIRST * wrong))
        half, before = reach[best], shift[best]
        (left, right), (left_gap, right_gap) = (
            [(one[0][best], float(one[1][best])) for one in pair],
            [float(one[2][best]) for one in pair],
        )
        planes, gaps = [left, *planes, right], [left_gap, *gaps, right_gap]
    return planes, np.array(gaps)


def _clearance(normals: np.ndarray, offsets: np.ndarray, holes: Holes) -> np.ndarray:
    """Distance [m] along the scalp from each plane (n,) to the nearest hole's edge, taking the scalp there as flat."""
    if len(holes.positions) == 0:
        return np.full(len(offsets), np.inf)
    off = np.abs(normals @ holes.positions.T - offsets[:, None])
    slant = np.sqrt(np.maximum(1 - (normals @ holes.normals.T) ** 2, 1e-6))
    return (off / slant - holes.radii).min(axis=1)


def _gore(name: str, vertices: np.ndarray, faces: np.ndarray) -> Gore:
    used, inverse = np.unique(faces, return_inverse=True)
    local = inverse.reshape(-1, 3)
    loop = boundary_loop(local)
    edges = np.column_stack([loop, np.roll(loop, -1)])
    flat = flatten(vertices[used], local, edges, _BAND)
    return Gore(name, used, local, _front_up(flat, vertices[used], local), loop)


def _front_up(flat: Flat, vertices: np.ndarray, faces: np.ndarray) -> Flat:
    """Turned so that the head's front is up on paper on the whole, centred about the middle of its box."""
    a, b, c = (flat.points[faces[:, k]] for k in range(3))
    height = vertices[:, 1][faces]
    # Area-weighted mean gradient of y: sum over faces of y times the edge opposite, turned by a right angle.
    edges = np.stack([c - b, a - c, b - a], axis=1)
    gradient = np.einsum("fk,fkd->d", height, np.stack([-edges[..., 1], edges[..., 0]], axis=-1))
    up = gradient / np.linalg.norm(gradient)
    turn = np.array([[up[1], -up[0]], [up[0], up[1]]])
    points = flat.points @ turn.T
    points = points - (points.min(axis=0) + points.max(axis=0)) / 2
    return Flat(points, flat.stretch, flat.areas)


def _shared_path(vertices: np.ndarray, one: Gore, two: Gore) -> np.ndarray:
    """Vertices of the cut mesh (n,) on the border that two gores share, from front to back."""
    loop, other = one.vertices[one.loop], two.vertices[two.loop]
    edges = set(zip(np.roll(other, -1).tolist(), other.tolist(), strict=True))
    shared = np.array([edge in edges for edge in zip(loop.tolist(), np.roll(loop, -1).tolist(), strict=True)])
    starts = np.flatnonzero(shared & ~np.roll(shared, 1))
    if len(starts) != 1:
        raise ValueError(f"gores {one.name} and {two.name} must share one line, but they share {len(starts)}")
    path = loop[(starts[0] + np.arange(shared.sum() + 1)) % len(loop)]
    return path[::-1] if vertices[path[0], 1] < vertices[path[-1], 1] else path


def _with_even_seams(vertices: np.ndarray, gores: list[Gore], paths: list[np.ndarray]) -> list[Gore]:
    """The gores flattened once more, with every seam's edges held at the mean of their two lengths on paper."""
    result = []
    for number, gore in enumerate(gores):
        edges, lengths = [], []
        for seam in (number - 1, number):
            if 0 <= seam < len(paths):
                both = [
                    np.linalg.norm(np.diff(flat_path(gores[seam + k], paths[seam]), axis=0), axis=1) for k in (0, 1)
                ]
                local = np.searchsorted(gore.vertices, paths[seam])
                edges.append(np.column_stack([local[:-1], local[1:]]))
                lengths.append((both[0] + both[1]) / 2)
        points = vertices[gore.vertices]
        flat = flatten(points, gore.faces, np.vstack(edges), _SEAM_BAND, np.concatenate(lengths), gore.flat.points)
        result.append(replace(gore, flat=_front_up(flat, points, gore.faces)))
    return result


def _seam(name: str, vertices: np.ndarray, gores: list[Gore], left: int, path: np.ndarray) -> Seam:
    flat = [line_length(flat_path(gores[left + k], path)) for k in (0, 1)]
    return Seam(name, (left, left + 1), path, line_length(vertices[path]), (flat[0], flat[1]))


def line_length(points: np.ndarray) -> float:
    """Length of a polyline (n, d)."""
    return float(np.linalg.norm(np.diff(points, axis=0), axis=1).sum())


def flat_path(gore: Gore, path: np.ndarray) -> np.ndarray:
    """Where vertices (n,) of the cut mesh lie on a gore's paper (n, 2) [m]."""
    return gore.flat.points[np.searchsorted(gore.vertices, path)]
