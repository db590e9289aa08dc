"""One gore as drawing: stretch, lines to cut and sew, holes with their numbers, marks, words. Millimetres, front up."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.outputs.cap.drawing import (
    CUT,
    HOLE,
    MARK,
    MIDLINE,
    NOTCH,
    PALE,
    RIM,
    SEAM,
    TEXT,
    Circle,
    Fill,
    Item,
    Line,
    Words,
)
from layout.outputs.cap.holes import DrawnHole, place_label
from layout.outputs.cap.pattern import Piece
from layout.units import MM

ALLOWANCE = 6.0  # [mm] of cloth outside the seams and the rim
# Strain on paper [relative] from which a tint is used: paper longer than the scalp orange, shorter blue.
TINTS = (
    (-np.inf, -0.03, "#a9c9ee"),
    (-0.03, -0.015, "#dbe8f7"),
    (0.015, 0.03, "#fbe6cc"),
    (0.03, np.inf, "#f6c48a"),
)
_LETTER = 0.62  # width of a letter in ems, on the wide side
_CAP = 0.73  # height of capitals in ems
_NUMBER, _SMALL, _NAME = 3.4, 2.4, 9.0  # [mm] em


@dataclass(frozen=True)
class DrawnPiece:
    """items: what is drawn; cut: the outermost line (n, 2); box: corners (2, 2) of all of it. [mm]"""

    name: str
    items: tuple[Item, ...]
    cut: np.ndarray
    box: np.ndarray


def draw_piece(piece: Piece) -> DrawnPiece:
    """Everything of a gore, about the middle of its own paper."""
    import shapely

    outline = piece.gore.flat.points[piece.gore.loop] / MM
    area = shapely.Polygon(outline)
    cut = np.array(area.buffer(ALLOWANCE, join_style="mitre", mitre_limit=2.0).exterior.coords)[:-1]
    items: list[Item] = [*_tints(piece)]
    items += [Line(line / MM, MIDLINE) for _, line in piece.lines]
    items += [Line(line / MM, SEAM) for line in piece.seams.values()]
    items += [Line(line / MM, RIM) for line in piece.rim]
    items.append(Line(cut, CUT, closed=True))
    taken: list[shapely.Geometry] = []
    for hole in piece.holes:
        items += _hole(hole)
        taken += [shapely.LineString(line / MM).convex_hull.buffer(0.8) for line in hole.lines]
    items += _notches(piece, taken)
    inside = area.buffer(-0.5)
    items += _hole_words(piece, inside, taken)
    items += _ends(piece, inside, cut, taken)
    items += _marks(piece, inside, taken)
    items += _name(piece, area, taken)
    corners = np.vstack([cut, *(_corners(item) for item in items if isinstance(item, Words))])
    return DrawnPiece(piece.gore.name, tuple(items), cut, np.stack([corners.min(axis=0), corners.max(axis=0)]))


def _tints(piece: Piece) -> list[Fill]:
    """The parts of the gore where a length is off by more than the first limit, a colour each."""
    import shapely

    strain = piece.gore.flat.stretch - 1
    worst = np.take_along_axis(strain, np.abs(strain).argmax(axis=1)[:, None], axis=1)[:, 0]
    triangles = piece.gore.flat.points[piece.gore.faces] / MM
    fills = []
    for low, high, colour in TINTS:
        here = (worst >= low) & (worst < high)
        if here.any():
            area = shapely.union_all(shapely.polygons(triangles[here]), grid_size=1e-3)
            for part in getattr(area, "geoms", [area]):
                rings = [part.exterior, *part.interiors]
                fills.append(Fill(tuple(np.array(ring.coords)[:-1] for ring in rings), colour))
    return fills


def _hole(hole: DrawnHole) -> list[Item]:
    if hole.radius is None:
        return [Line(line / MM, HOLE) for line in hole.lines]
    centre, radius = hole.centre / MM, hole.radius / MM
    ticks = [
        Line(centre + np.outer([radius - 0.8, radius + 0.8], way), MARK)
        for way in ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))
    ]
    return [Circle(centre, radius, HOLE), *ticks]


def _hole_words(piece: Piece, area, taken: list) -> list[Item]:
    """The number in its hole, or beside a small one; the standard position beside it."""
    words: list[Item] = []
    for hole in piece.holes:
        number = str(hole.row.number)
        centre, edge = hole.centre / MM, np.vstack(hole.lines) / MM
        room = np.ptp(edge, axis=0) / 2
        middle = centre if hole.own else (edge.min(axis=0) + edge.max(axis=0)) / 2
        role = {"reference": "ref ", "ground": "gnd "}.get(hole.row.role, "")
        if not hole.own:
            text = f"part of {number}"
        elif min(room) >= 0.5 * _NUMBER * _LETTER * len(number) + 0.6:
            words.append(Words(centre - _by(0, _NUMBER * _CAP / 2), number, _NUMBER, TEXT, bold=True))
            text = role + place_label(hole.row)
        else:
            text = f"{number}: {role}{place_label(hole.row)}"
        words.append(_beside(middle, room, text, area, taken))
    return words


def _beside(middle: np.ndarray, room: np.ndarray, text: str, area, taken: list) -> Words:
    """Small words next to a thing of half sizes `room`, where they stay inside and meet nothing, if there is such."""
    high, gap = _SMALL * _CAP, 1.2
    long = len(text) * _SMALL * _LETTER
    options = []
    for far in (0.0, 3.0, 7.0):
        right, up = room + gap + far
        options += [
            (middle + _by(0, -up - high), "middle"),
            (middle + _by(0, up), "middle"),
            (middle + _by(right, -high / 2), "start"),
            (middle + _by(-right, -high / 2), "end"),
            (middle + _by(min(room[0], long / 2), -up - high), "end"),
            (middle + _by(-min(room[0], long / 2), -up - high), "start"),
            (middle + _by(min(room[0], long / 2), up), "end"),
            (middle + _by(-min(room[0], long / 2), up), "start"),
        ]
    words = [Words(place, text, _SMALL, TEXT, anchor) for place, anchor in options]
    best = min(words, key=lambda one: round(_trouble(one, area, taken), 3))
    taken.append(_box(best))
    return best


def _trouble(words: Words, area, taken: list) -> float:
    box = _box(words)
    return box.area - box.intersection(area).area + sum(box.intersection(one).area for one in taken)


def _corners(words: Words) -> np.ndarray:
    long, high = len(words.text) * words.size * _LETTER, words.size * _CAP
    left = {"start": 0.0, "middle": -long / 2, "end": -long}[words.anchor]
    return words.place + np.array([[left, 0.0], [left + long, high]])


def _box(words: Words):
    import shapely

    (x0, y0), (x1, y1) = _corners(words)
    return shapely.box(x0 - 0.4, y0 - 0.4, x1 + 0.4, y1 + 0.4)


def _notches(piece: Piece, taken: list) -> list[Item]:
    items: list[Item] = []
    for notch in piece.notches:
        place, out = notch.place / MM, notch.outward
        items.append(Line(place + np.outer([0.0, ALLOWANCE], out), NOTCH))
        words = Words(place - 2.6 * out - _by(0, _SMALL * _CAP / 2), notch.label, _SMALL, PALE)
        items.append(words)
        taken.append(_box(words))
    return items


def _marks(piece: Piece, area, taken: list) -> list[Item]:
    """A small cross with its name at each 10-20 position that has no hole."""
    items: list[Item] = []
    for name, place in piece.marks.items():
        spot = place / MM
        if _near_hole(piece, spot):
            continue
        items += [Line(spot + np.outer([-1.5, 1.5], way), MARK) for way in ((1.0, 0.0), (0.0, 1.0))]
        words = _beside(spot, np.array([1.5, 1.5]), name, area, taken)
        items.append(Words(words.place, name, _SMALL, PALE, words.anchor))
    return items


def _near_hole(piece: Piece, spot: np.ndarray) -> bool:
    return any(np.linalg.norm(spot - hole.centre / MM) < 4.0 for hole in piece.holes)


def _ends(piece: Piece, area, cut: np.ndarray, taken: list) -> list[Item]:
    """How far the landmarks are from the ends of midline and ear line: beyond the cut in front and behind, else inside.
    A landmark inside the cap gets a cross.
    """
    items: list[Item] = []
    middle = np.array(area.centroid.coords[0])
    for text, place in piece.ends:
        spot = place / MM
        if "from" in text and text.split()[0] in ("nasion", "inion"):
            front = spot[1] > middle[1]
            y = cut[:, 1].max() + 1.2 if front else cut[:, 1].min() - 1.2 - _SMALL * _CAP
            items.append(Words(np.array([spot[0], y]), text, _SMALL, TEXT))
        else:
            if _near_hole(piece, spot):
                continue
            items += [Line(spot + np.outer([-2.0, 2.0], way), NOTCH) for way in ((0.7, 0.7), (0.7, -0.7))]
            items.append(_beside(spot, np.array([2.0, 2.0]), text, area, taken))
    return items


def _name(piece: Piece, area, taken: list) -> list[Item]:
    """The gore's name and an arrow to the front, where there is most room."""
    import shapely

    x0, y0, x1, y1 = area.bounds
    grid = np.stack(np.meshgrid(np.arange(x0, x1, 3.0), np.arange(y0, y1, 3.0)), axis=-1).reshape(-1, 2)
    points = shapely.points(grid)
    lines = [shapely.LineString(line / MM) for _, line in piece.lines if len(line) > 1]
    busy = shapely.union_all([*taken, *lines, *(shapely.Point(place / MM) for place in piece.marks.values())])
    room = np.minimum(shapely.distance(points, area.exterior), shapely.distance(points, busy))
    room[~shapely.contains(area, points)] = -1.0
    spot = grid[int(np.argmax(room))]
    size = float(np.clip(room.max() * 0.8, 3.0, _NAME))
    foot, tip = spot + _by(0.0, 0.1 * size), spot + _by(0.0, 1.0 * size)
    head = np.array([tip - _by(0.18 * size, 0.3 * size), tip, tip + _by(0.18 * size, -0.3 * size)])
    name = piece.gore.name
    return [
        Line(np.stack([foot, tip]), NOTCH),
        Line(head, NOTCH),
        Words(spot - _by(0.0, 0.75 * size), name, size, TEXT, bold=True),
        Words(spot - _by(0.0, 1.1 * size), "FRONT", 0.32 * size, TEXT),
    ]


def _by(x: float, y: float) -> np.ndarray:
    return np.array([x, y])
