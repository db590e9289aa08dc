"""The cap template of one layout: gores with everything that is drawn on them, in millimetres."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from layout.anatomy.contours import three_point_contour
from layout.anatomy.head import Head
from layout.anatomy.positions import family_names, find_cz, standard_positions
from layout.anatomy.scalp_points import project
from layout.outputs.cap.gores import Cap, Gore, Holes, flat_path, make_cap
from layout.outputs.cap.holes import DrawnHole, Shape, draw_holes, hole_fronts, hole_rows, hole_shape
from layout.outputs.cap.places import even_steps, line_on_paper, on_paper, spots_on_paper
from layout.outputs.cap.rim import Rim, find_rim
from layout.outputs.result import DesignResult, RankedLayout, SensorRow

NOTCH_STEP = 40e-3  # [m] along a seam


@dataclass(frozen=True)
class Notch:
    """A mark at which two gores meet: its label, place (2,) [m] and outward unit direction (2,) on one gore's paper."""

    label: str
    place: np.ndarray
    outward: np.ndarray


@dataclass(frozen=True)
class Piece:
    """A gore with what is drawn on it; all places [m] on its paper.

    lines: name -> polylines of the midline and the ear line. marks: standard positions by name. ends: what to write
    where a line leaves the cap, and where. notches; seams: name -> polyline; rim: polylines.
    """

    gore: Gore
    holes: tuple[DrawnHole, ...]
    lines: tuple[tuple[str, np.ndarray], ...]
    marks: dict[str, np.ndarray]
    ends: tuple[tuple[str, np.ndarray], ...]
    notches: tuple[Notch, ...]
    seams: dict[str, np.ndarray]
    rim: tuple[np.ndarray, ...]


@dataclass(frozen=True)
class Pattern:
    """The pieces from left to right and what the sheet says about them. rows and shapes: of the holes, by number.

    rim_length [m]: on the scalp. left_out: sensors without a hole.
    """

    cap: Cap
    pieces: tuple[Piece, ...]
    rows: tuple[SensorRow, ...]
    shapes: tuple[Shape, ...]
    rim_length: float
    left_out: tuple[SensorRow, ...]


def make_pattern(result: DesignResult, layout: RankedLayout) -> Pattern:
    """The pattern of a layout that has electrodes, for the result's own head."""
    head = result.head
    rows = hole_rows(layout)
    shapes = [hole_shape(row, result.brief.stock) for row in rows]
    positions = np.array([row.scalp_position for row in rows]).reshape(-1, 3)
    normals = np.array([row.normal for row in rows]).reshape(-1, 3)
    holes = Holes(positions, normals, np.array([shape.reach for shape in shapes]))
    rim = find_rim(head.landmarks, positions, holes.radii)
    cap = make_cap(head.scalp, head.landmarks, rim.above, holes)
    drawn = draw_holes(cap, rows, shapes, spots_on_paper(cap, positions, hole_fronts(rows)))
    lines, ends = _lines(head, rim, cap)
    marks = _marks(head, rim, cap)
    pieces, rim_length = [], 0.0
    for number, gore in enumerate(cap.gores):
        seams = {seam.name: flat_path(gore, seam.path) for seam in cap.seams if number in seam.gores}
        rim_runs = _rim_runs(cap, number)
        rim_length += sum(
            np.linalg.norm(np.diff(cap.surface.vertices[gore.vertices[run]], axis=0), axis=1).sum() for run in rim_runs
        )
        pieces.append(
            Piece(
                gore=gore,
                holes=tuple(drawn[number]),
                lines=tuple((name, line) for name, at, line in lines if at == number),
                marks={name: place for name, (at, place) in marks.items() if at == number},
                ends=tuple((text, place) for text, at, place in ends if at == number),
                notches=_notches(cap, number),
                seams=seams,
                rim=tuple(gore.flat.points[run] for run in rim_runs),
            )
        )
    left_out = tuple(row for row in layout.sensors if row not in rows)
    return Pattern(cap, tuple(pieces), rows, tuple(shapes), float(rim_length), left_out)


def _lines(head: Head, rim: Rim, cap: Cap):
    """Midline and ear line on the gores, (name, gore, polyline), and what stands at their ends, (text, gore, place)."""
    marks = head.landmarks
    points = project(head.scalp, np.stack([marks.nas, marks.lpa, marks.rpa, marks.inion])).positions
    nas, lpa, rpa, inion = points
    cz = find_cz(head.scalp, marks)
    lines, ends = [], []
    for name, start, end, names in (
        ("midline", nas, inion, ("nasion", "inion")),
        ("ear line", lpa, rpa, ("ear", "ear")),
    ):
        contour = three_point_contour(head.scalp, start, cz, end)
        steps = even_steps(contour.end_length)
        places = contour.at_length(steps)
        inside = np.flatnonzero(rim.above(places) > 0)
        first, last = inside[0], inside[-1]
        lines += [(name, gore, line) for gore, line in line_on_paper(cap, places[first : last + 1])]
        gores, flat = on_paper(cap, places[[first, last]])
        below = (steps[first], contour.end_length - steps[last])
        ends += [
            (what if way < 1e-3 else f"{what} {1e3 * way:.0f} mm from here", int(gore), place)
            for what, way, gore, place in zip(names, below, gores, flat, strict=True)
        ]
    return lines, ends


def _marks(head: Head, rim: Rim, cap: Cap) -> dict[str, tuple[int, np.ndarray]]:
    """The 10-20 positions (with Fpz and Oz) inside the cap: name -> gore and place."""
    found = standard_positions(head.scalp, head.landmarks, "10-10")
    wanted = [*family_names("10-20")[:-2], "Fpz", "Oz"]  # without the earlobes
    points = np.array([found[name] for name in wanted])
    inside = rim.above(points) > 0
    gores, places = on_paper(cap, points[inside])
    names = [name for name, kept in zip(wanted, inside, strict=True) if kept]
    return {name: (int(gore), place) for name, gore, place in zip(names, gores, places, strict=True)}


def _rim_runs(cap: Cap, number: int) -> list[np.ndarray]:
    """The parts of a gore's border that no seam covers, as numbers into its vertices."""
    gore = cap.gores[number]
    seam_edges = set()
    for seam in cap.seams:
        if number in seam.gores:
            local = np.searchsorted(gore.vertices, seam.path).tolist()
            seam_edges |= set(pairwise(local)) | set(pairwise(local[::-1]))
    loop = gore.loop.tolist()
    free = [edge not in seam_edges for edge in zip(loop, [*loop[1:], loop[0]], strict=True)]
    start = next(k for k in range(len(loop)) if free[k] and not free[k - 1])
    runs: list[list[int]] = []
    for k in range(start, start + len(loop)):
        here = k % len(loop)
        if not free[here]:
            continue
        if not free[here - 1]:
            runs.append([loop[here]])
        runs[-1].append(loop[(here + 1) % len(loop)])
    return [np.array(run) for run in runs]


def _notches(cap: Cap, number: int) -> tuple[Notch, ...]:
    gore = cap.gores[number]
    notches = []
    for seam in cap.seams:
        if number not in seam.gores:
            continue
        along = np.concatenate(
            [[0.0], np.cumsum(np.linalg.norm(np.diff(cap.surface.vertices[seam.path], axis=0), axis=1))]
        )
        line = flat_path(gore, seam.path)
        count = int((seam.length - NOTCH_STEP / 2) // NOTCH_STEP)
        for k in range(1, count + 1):
            at = k * NOTCH_STEP
            place = np.array([np.interp(at, along, line[:, d]) for d in range(2)])
            edge = min(int(np.searchsorted(along, at)), len(line) - 1)
            along_seam = line[edge] - line[edge - 1]
            outward = np.array([along_seam[1], -along_seam[0]]) / np.linalg.norm(along_seam)
            # Paths run from front to back: the gore left of the seam lies on their right.
            if seam.gores[0] == number:
                outward = -outward
            notches.append(Notch(f"{seam.name}{k}", place, outward))
    return tuple(notches)
