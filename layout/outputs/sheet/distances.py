"""What a tape finds on a head: where each sensor of a layout lies, seen from landmarks, standard positions and others.

Distances are exact geodesics of the scalp's mesh: a taut tape on a head that is nowhere hollow.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.arcs import Midline
from layout.anatomy.contours import three_point_contour
from layout.anatomy.geodesics import geodesic_distances
from layout.anatomy.head import Head, Surface
from layout.anatomy.head_size import head_size
from layout.anatomy.mesh_graph import face_vectors
from layout.anatomy.nearby_geodesics import distances_within, nearest_along
from layout.anatomy.positions import family_names, find_cz, standard_positions
from layout.anatomy.scalp_points import normals_at, project
from layout.outputs.result import SensorRow
from layout.outputs.sheet.words import offset_words
from layout.units import MM, PERCENT

LANDMARKS = ("nasion", "left ear", "right ear", "inion")  # as in SensorRow.landmark_distance
MARKS = (*LANDMARKS, "Cz")  # where tapes start
NEIGHBOURS = 3
READING = np.array([1.0, 1.0, 1.0, 1.0, 3.0]) * MM  # a tape's error at any length: Cz is found by tape itself
STRETCH = 1 * PERCENT  # and per length
SHORTEST = 5 * MM  # of a tape
DIP = 1 * MM  # how far a tape may run below its lower end and the lowest landmark
LEVEL_STEP = 5 * MM
LOOKS_DOWN = -0.7  # faces with less upward normals are the cut through the neck, or the chin from below
EYE = 14 * MM  # radius about an eye, seen from the front, that a tape keeps out of
SAME = 0.2 * MM  # a detour so small is none
SAME_SHARE = 0.003
ON_IT = 1e-3 * MM
EARLOBES = ("A1", "A2")


@dataclass(frozen=True)
class Offset:
    """A standard position and the way from it to a sensor: length [m] along the scalp; words: its parts, "" at none."""

    name: str
    length: float
    words: str


@dataclass(frozen=True)
class Fix:
    """Two landmarks from which tapes fix a sensor, and a third to check it.

    pair: rows of MARKS, the shorter way first; check: of the third, None where no tape can take its way; lengths
    [m]: along the scalp to each of these; crossing [rad]: angle between the pair's ways at the sensor, 0 to pi/2, as on
    a sphere.
    """

    pair: tuple[int, int]
    check: int | None
    lengths: dict[int, float]
    crossing: float


@dataclass(frozen=True)
class OnArcs:
    """A sensor on the two arcs of a cap. along and across: the fractions of SensorRow.arc_fractions; along_length [m]
    from the nasion over the midline, across_length [m] from the left preauricular point along the arc over that point
    of the midline, across_whole [m] all of that arc.
    """

    along: float
    across: float
    along_length: float
    across_length: float
    across_whole: float


@dataclass(frozen=True)
class HeadMeasures:
    """The head's own lengths [m]: nasion to inion and ear to ear over Cz, and the level circumference (None where the
    scalp has no brow to lay the tape on).
    """

    nasion_inion: float
    ear_to_ear: float
    circumference: float | None


class Tape:
    """Measures on one head; what holds for all its sensors is found once."""

    def __init__(self, head: Head) -> None:
        self.head = head
        self.midline = Midline(head.scalp, head.landmarks)
        self.vertex = find_cz(head.scalp, head.landmarks)
        self.standard = standard_positions(head.scalp, head.landmarks, "10-5")
        self._known = [name for name in family_names("10-10") if name not in EARLOBES]
        self._known_places = np.array([self.standard[name] for name in self._known])
        marks = head.landmarks
        points = np.stack([marks.nas, marks.lpa, marks.rpa, marks.inion, self.vertex])
        self._landmarks = project(head.scalp, points).positions

    def measures(self) -> HeadMeasures:
        """The lengths to compare with the person's."""
        across = three_point_contour(self.head.scalp, self.midline.lpa, self.vertex, self.midline.rpa)
        try:
            circumference = head_size(self.head).circumference
        except ValueError:  # no vertex where the brow or the back of the head is looked for
            circumference = None
        return HeadMeasures(self.midline.loop.end_length, across.end_length, circumference)

    def offsets(self, row: SensorRow) -> tuple[Offset, ...]:
        """The way from the nearest 10-5 position, and from the nearest 10-10 position where that is another."""
        nearest = self._offset(row.nearest_name, row.scalp_position)
        if row.nearest_name in self._known:
            return (nearest,)
        which, _ = nearest_along(self.head.scalp, row.scalp_position, self._known_places, 1)
        return nearest, self._offset(self._known[int(which[0])], row.scalp_position)

    def _offset(self, name: str, place: np.ndarray) -> Offset:
        start = self.standard[name]
        if np.linalg.norm(place - start) < ON_IT:
            return Offset(name, 0.0, "")
        _, lengths = nearest_along(self.head.scalp, place, start[None], 1)
        normal = normals_at(self.head.scalp, project(self.head.scalp, start))[0]
        return Offset(name, float(lengths[0]), offset_words(normal, place - start, float(lengths[0])))

    def arcs(self, row: SensorRow) -> OnArcs:
        """The sensor's fractions as lengths on this head."""
        along, across = (float(value) for value in row.arc_fractions)
        over = self.midline.at(np.array([along]))[0]
        whole = three_point_contour(self.head.scalp, self.midline.lpa, over, self.midline.rpa).end_length
        return OnArcs(along, across, along * self.midline.loop.end_length, across * whole, whole)

    def fixes(self, sensors: tuple[SensorRow, ...]) -> tuple[Fix, ...]:
        """For each sensor the two landmarks that fix it best, and the shortest way of the others.

        Best: the least error of the crossing point, sqrt(e1² + e2²) / sin(angle), for tapes that err by
        READING + STRETCH x length. Landmarks whose shortest way no tape can take (under the chin, across the neck) are
        left out; so are ways over an eye, unless too few are left without them.
        """
        places = np.array([row.scalp_position for row in sensors])
        lengths, free, pleasant = self._ways(sensors, places)
        return tuple(self._fix(*one) for one in zip(sensors, lengths, free, pleasant, strict=True))

    def _ways(self, sensors: tuple[SensorRow, ...], places: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Distances (n, 5) [m] from MARKS along the scalp, which of these ways a tape can take (n, 5), and which of
        those keep out of the eyes (n, 5).
        """
        levels = self._levels(places)
        above = np.empty((len(places), len(MARKS)))
        for level in np.unique(levels):
            rows = levels == level
            above[rows] = geodesic_distances(_above(self.head.scalp, level), self._landmarks, places[rows])
        lengths = np.column_stack([[row.landmark_distance for row in sensors], above[:, -1]])
        free = (np.abs(above - lengths) <= SAME + SAME_SHARE * lengths) & (lengths >= SHORTEST)
        return lengths, free, free & ~_over_an_eye(self.head.eyes, self._landmarks, places)

    def _fix(self, row: SensorRow, lengths: np.ndarray, free: np.ndarray, pleasant: np.ndarray) -> Fix:
        ways = self._landmarks - row.scalp_position
        ways = ways - (ways @ row.normal)[:, None] * row.normal
        ways /= np.maximum(np.linalg.norm(ways, axis=1, keepdims=True), 1e-12)
        errors = READING + STRETCH * lengths
        marks = next(np.flatnonzero(some) for some in (pleasant, free, lengths >= SHORTEST) if some.sum() >= 2)
        first, second = (marks[side] for side in np.triu_indices(len(marks), 1))
        cosine = np.clip(np.abs(np.einsum("nd,nd->n", ways[first], ways[second])), 0.0, 1.0)
        spread = np.hypot(errors[first], errors[second]) / np.maximum(np.sqrt(1.0 - cosine**2), 1e-9)
        best = int(np.argmin(spread.round(9)))
        pair = sorted((int(first[best]), int(second[best])), key=lambda mark: lengths[mark])
        others = [int(mark) for mark in np.flatnonzero(pleasant) if mark not in pair]
        others = others or [int(mark) for mark in np.flatnonzero(free) if mark not in pair]
        check = min(others, key=lambda mark: lengths[mark]) if others else None
        used = {mark: float(lengths[mark]) for mark in (*pair, check) if mark is not None}
        return Fix((pair[0], pair[1]), check, used, float(np.arccos(cosine[best])))

    def neighbours(self, sensors: tuple[SensorRow, ...], at: int) -> tuple[tuple[int, float], ...]:
        """The nearest others of the layout along the scalp: (row of `sensors`, distance [m]), nearest first.

        Those that only a way under the chin or across the neck makes near are left out.
        """
        others = [i for i in range(len(sensors)) if i != at]
        start, places = sensors[at].scalp_position, np.array([sensors[i].scalp_position for i in others]).reshape(-1, 3)
        which, lengths = nearest_along(self.head.scalp, start, places, NEIGHBOURS)
        free = self._free(start, places[which], lengths)
        return tuple(
            (others[int(i)], float(length)) for i, length, one in zip(which, lengths, free, strict=True) if one
        )

    def _free(self, start: np.ndarray, places: np.ndarray, lengths: np.ndarray) -> np.ndarray:
        """Whether ways (n,) of these lengths from `start` to places (n, 3) keep above their lowest level."""
        level = self._levels(np.vstack([start[None], places])).min()
        deepest = start[2] + places[:, 2] - 2 * level
        free = lengths < deepest  # too short to go down there and up again
        if not free.all():
            above = distances_within(_above(self.head.scalp, level), start, places[~free], lengths.max() + SAME)
            free[~free] = above - lengths[~free] <= SAME
        return free

    def _levels(self, places: np.ndarray) -> np.ndarray:
        """Height (n,) [m] below which no tape to a place (n, 3) may run, in steps."""
        lowest = np.minimum(places[:, 2], self._landmarks[:, 2].min())
        return LEVEL_STEP * np.floor(lowest / LEVEL_STEP + 1e-6) - DIP


def _above(scalp: Surface, level: float) -> Surface:
    """The faces that reach above a height [m], less those that look down."""
    normals, _ = face_vectors(scalp)
    faces = scalp.faces[(scalp.vertices[scalp.faces][:, :, 2].max(axis=1) >= level) & (normals[:, 2] > LOOKS_DOWN)]
    used, numbers = np.unique(faces, return_inverse=True)
    return Surface(scalp.vertices[used], numbers.reshape(-1, 3))


def _over_an_eye(eyes: np.ndarray, landmarks: np.ndarray, places: np.ndarray) -> np.ndarray:
    """Which straight ways (n, m) from landmarks (m, 3) to places (n, 3) pass within EYE of an eye, from the front."""
    across = np.array([0, 2])
    start, way = landmarks[None], places[:, None] - landmarks[None]
    flat = way[..., across]
    over = np.zeros(way.shape[:2], dtype=bool)
    for eye in eyes:
        share = np.einsum("nmd,nmd->nm", eye[across] - start[..., across], flat)
        share = np.clip(share / np.maximum(np.einsum("nmd,nmd->nm", flat, flat), 1e-12), 0.0, 1.0)
        passed = start + share[..., None] * way
        beside = np.linalg.norm((passed - eye)[..., across], axis=2)
        over |= (beside < EYE) & (passed[..., 1] > 0.5 * eye[1])
    return over
