"""The holes of a cap: their shape from the stock, their place on the head, and what is drawn of them on each gore."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.scalp_points import tangents_at
from layout.brief.objects_stock import StockBrief
from layout.outputs.cap.gores import Cap, Gore, flat_path
from layout.outputs.plain import fixed, one_line
from layout.outputs.result import RankedLayout, SensorRow
from layout.units import MM

USUAL_DIAMETER = 10 * MM  # where the brief gives no size; our own choice, said on the sheet
EARLOBES = ("A1", "A2")  # worn as clips: no place on a cap
_CORNERS = 72  # of the polygon that stands for a circle where a seam cuts it


@dataclass(frozen=True)
class Shape:
    """A hole: a circle of diameter width = depth [m], or a rectangle of width to its right and depth to its front [m],
    turned by `turn` [rad] against the clock as seen from outside. assumed: the brief gives no size.
    """

    round: bool
    width: float
    depth: float
    turn: float = 0.0
    assumed: bool = False

    @property
    def reach(self) -> float:
        """Largest distance [m] of its edge from its centre."""
        return self.width / 2 if self.round else float(np.hypot(self.width, self.depth)) / 2


@dataclass(frozen=True)
class DrawnHole:
    """A hole, or the part of it that one gore has, on that gore's paper.

    centre (2,) [m], outside the gore for a part of a neighbour's hole; radius [m] of a whole round hole, else None;
    lines: what is to be drawn, polylines (n, 2) [m] (closed where whole).
    """

    row: SensorRow
    centre: np.ndarray
    radius: float | None
    lines: tuple[np.ndarray, ...]
    own: bool


def hole_rows(layout: RankedLayout) -> tuple[SensorRow, ...]:
    """The sensors that need a hole; none where the layout has no electrodes (its sensors sit in a helmet)."""
    if all(row.kind_type != "electrode" for row in layout.sensors):
        return ()
    return tuple(row for row in layout.sensors if row.site not in EARLOBES)


def hole_shape(row: SensorRow, stock: tuple[StockBrief, ...]) -> Shape:
    """The footprint the brief gives, else an electrode's disc, else the face of a housing, else 10 mm."""
    electrodes = [one for one in stock if one.kind == "electrode"]
    entry = stock[row.kind_number] if row.kind_number >= 0 else electrodes[0]
    if entry.footprint is not None:
        one = entry.footprint
        return Shape(one.shape == "circle", one.width, one.depth, one.turn)
    if entry.kind != "electrode":
        return Shape(False, entry.housing[0], entry.housing[1])
    if entry.disc_diameter > 0:
        return Shape(True, entry.disc_diameter, entry.disc_diameter)
    return Shape(True, USUAL_DIAMETER, USUAL_DIAMETER, assumed=True)


def place_label(row: SensorRow) -> str:
    """The standard position of a hole, or how far the nearest one is."""
    name = one_line(row.nearest_name)
    return name if row.nearest_offset < 0.5 * MM else f"{fixed(row.nearest_offset / MM, 0)} mm from {name}"


def draw_holes(
    cap: Cap, rows: tuple[SensorRow, ...], shapes: list[Shape], spots: list[tuple[int, np.ndarray, np.ndarray]]
) -> list[list[DrawnHole]]:
    """Per gore the holes and parts of holes on it.

    spots: per row the gore's number, the place (2,) [m] on its paper and the unit direction (2,) in which the hole's
    front points there; see `cap_places`.
    """
    import shapely

    areas = [shapely.Polygon(gore.flat.points[gore.loop]) for gore in cap.gores]
    drawn: list[list[DrawnHole]] = [[] for _ in cap.gores]
    for row, shape, (number, centre, front) in zip(rows, shapes, spots, strict=True):
        outline = _outline(shape, centre, front)
        if areas[number].contains(shapely.Polygon(outline)):
            radius = shape.width / 2 if shape.round else None
            drawn[number].append(DrawnHole(row, centre, radius, (outline,), True))
            continue
        drawn[number].append(DrawnHole(row, centre, None, _inside(outline, areas[number]), True))
        for seam in cap.seams:
            if number in seam.gores:
                other = seam.gores[1 - seam.gores.index(number)]
                moved = _across(cap.gores[number], cap.gores[other], seam.path, np.vstack([centre, outline]))
                parts = _inside(moved[1:], areas[other])
                if parts:
                    drawn[other].append(DrawnHole(row, moved[0], None, parts, False))
    return drawn


def hole_fronts(rows: tuple[SensorRow, ...]) -> np.ndarray:
    """Unit directions (n, 3) on the scalp in which the holes' fronts point: to the front of the head."""
    return tangents_at(np.array([row.normal for row in rows]))[:, 0]


def _outline(shape: Shape, centre: np.ndarray, front: np.ndarray) -> np.ndarray:
    """Closed polyline (n, 2) [m], its first point repeated."""
    right = np.array([front[1], -front[0]])
    if shape.round:
        angle = np.linspace(0, 2 * np.pi, _CORNERS + 1)
        local = shape.width / 2 * np.column_stack([np.cos(angle), np.sin(angle)])
    else:
        local = np.array([[1, 1], [-1, 1], [-1, -1], [1, -1], [1, 1]]) * [shape.width / 2, shape.depth / 2]
        cos, sin = np.cos(shape.turn), np.sin(shape.turn)
        local = local @ np.array([[cos, sin], [-sin, cos]])
    return centre + local[:, :1] * right + local[:, 1:] * front


def _inside(line: np.ndarray, area) -> tuple[np.ndarray, ...]:
    import shapely

    part = shapely.LineString(line).intersection(area)
    parts = shapely.line_merge(part) if part.geom_type == "MultiLineString" else part
    return tuple(
        np.array(one.coords) for one in getattr(parts, "geoms", [parts]) if one.geom_type == "LineString" and one.length
    )


def _across(one: Gore, two: Gore, path: np.ndarray, points: np.ndarray) -> np.ndarray:
    """Points (n, 2) [m] on one gore's paper as they lie on the other's, both laid together along the seam beside the
    first point.
    """
    here, there = flat_path(one, path), flat_path(two, path)
    distance = np.linalg.norm(here - points[0], axis=1)
    nearest = int(np.argmin(distance))
    low, high = max(nearest - 1, 0), min(nearest + 1, len(path) - 1)
    from_middle, to_middle = (here[low] + here[high]) / 2, (there[low] + there[high]) / 2
    a, b = here[high] - here[low], there[high] - there[low]
    turn = np.arctan2(a[0] * b[1] - a[1] * b[0], a @ b)
    cos, sin = np.cos(turn), np.sin(turn)
    return (points - from_middle) @ np.array([[cos, sin], [-sin, cos]]) + to_middle
