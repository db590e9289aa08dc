"""The head from five sides in lines, with the numbers of the sensors: the placement sheet's page of drawings."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from layout.anatomy.arcs import Midline
from layout.anatomy.contours import three_point_contour
from layout.anatomy.head import Head
from layout.anatomy.positions import family_names
from layout.anatomy.scalp_points import normals_at, project
from layout.outputs.pictures.depth_image import seen_faces
from layout.outputs.pictures.spreading import spread_apart
from layout.outputs.pictures.views import BACK, FRONT, LEFT, RIGHT, TOP, View
from layout.outputs.result import SensorRow
from layout.outputs.sheet.distances import EARLOBES, LANDMARKS
from layout.outputs.sheet.page_style import BOLD, PLAIN, draw_mark
from layout.outputs.sheet.rows import Sheet

if TYPE_CHECKING:
    from reportlab.pdfgen.canvas import Canvas
    from reportlab.platypus import Flowable

PIXEL = 1e-3  # m, for the outline only
EDGE = 6e-3  # m around the head
FACING = 0.3  # cosine between a sensor's normal and the line of sight from which on it is drawn
BEHIND = -0.6  # cosine under which a landmark is on the far side
DIAMOND = 3.0  # points
FINDER_SIZES = (6.8, 6.2, 5.6, 5.0, 4.4, 3.8)  # points: the largest that fits
CAPTION = 12.0  # points over each view
MM_PT = 72 / 25.4
RADIUS = {40: 2.3 * MM_PT, 80: 1.9 * MM_PT, 1000: 1.6 * MM_PT}  # of the marks, up to so many sensors
GRID = ((TOP, FRONT, BACK), (LEFT, RIGHT))  # the sixth field holds the key
ENDS = {"L": "left", "R": "right"}

Box = tuple[float, float, float, float]  # left, bottom, right, top [points]


def head_views(sheet: Sheet, width: float, height: float) -> Flowable:
    """The page of drawings as one block of width x height [points]."""
    from reportlab.platypus import Flowable

    class Views(Flowable):
        def wrap(self, *_) -> tuple[float, float]:
            return width, height

        def draw(self) -> None:
            _draw(self.canv, sheet, width, height)

    return Views()


def _draw(canvas: Canvas, sheet: Sheet, width: float, height: float) -> None:
    field_width, field_height = width / 3, height / 2
    flats = {view.name: view.project(sheet.head.scalp.vertices) for row in GRID for view in row}
    widest = max(np.ptp(flat[:, 0]) for flat in flats.values()) + 2 * EDGE
    highest = max(np.ptp(flat[:, 1]) for flat in flats.values()) + 2 * EDGE
    scale = min((field_width - 8) / widest, (field_height - CAPTION - 4) / highest)  # points per metre
    lines = _lines(sheet.head)
    where = _drawn_in(sheet)
    for r, views in enumerate(GRID):
        for c, view in enumerate(views):
            left, bottom = c * field_width, height - (r + 1) * field_height
            flat = flats[view.name]
            centre = (flat.min(axis=0) + flat.max(axis=0))[:2] / 2
            origin = np.array([left + field_width / 2, bottom + (field_height - CAPTION) / 2]) - scale * centre
            page = _Page(canvas, view, origin, scale, (left, bottom, left + field_width, bottom + field_height))
            _draw_view(page, sheet, flat, lines, where)
    _draw_key(canvas, sheet, (2 * field_width, 0.0, width, field_height), scale)


class _Page:
    """One view on the paper: where points of the head come to lie, and which places are taken by print."""

    def __init__(self, canvas: Canvas, view: View, origin: np.ndarray, scale: float, field: Box) -> None:
        self.canvas, self.view, self.origin, self.scale, self.field = canvas, view, origin, scale, field
        self.taken: list[Box] = []

    def place(self, points: np.ndarray) -> np.ndarray:
        """(n, 3) [m] -> (n, 2) [points]."""
        return self.origin + self.scale * self.view.project(np.atleast_2d(points))[:, :2]

    def label(
        self, x: float, y: float, text: str, size: float, font: str = PLAIN, spots: str = "rlud", clear: float = 0.0
    ) -> None:
        """Text beside (x, y), `clear` of it, at the first spot (right, left, up, down; c: there) that is free."""
        wide = self.canvas.stringWidth(text, font, size)
        gap = max(0.55 * size, clear + 2)
        middle = y - 0.36 * size
        start = {
            "r": (x + gap, middle),
            "l": (x - gap - wide, middle),
            "u": (x - wide / 2, y + gap),
            "d": (x - wide / 2, y - gap - 0.75 * size),
            "c": (x - wide / 2, middle),
        }
        for spot in spots:
            left, base = start[spot]
            box = (left - 0.5, base - 0.3 * size, left + wide + 0.5, base + 1.0 * size)
            inside = box[0] >= self.field[0] and box[2] <= self.field[2]
            if inside and not any(_meet(box, other) for other in self.taken):
                self.taken.append(box)
                self.canvas.saveState()
                self.canvas.setFillGray(1)
                self.canvas.rect(left, base - 0.2 * size, wide, size, stroke=0, fill=1)
                self.canvas.restoreState()
                self.canvas.setFont(font, size)
                self.canvas.drawString(left, base, text)
                return


def _draw_view(page: _Page, sheet: Sheet, flat: np.ndarray, lines: list, where: dict[int, set[str]]) -> None:
    canvas, view = page.canvas, page.view
    left, bottom, right, top = page.field
    canvas.saveState()
    canvas.setFillGray(0)
    page.label(left + 2, top - 6, view.name, 8.5, BOLD, "r")
    canvas.setStrokeGray(0.25)
    canvas.setLineWidth(0.9)
    for outline in _outlines(flat, sheet.head.scalp.faces):
        _stroke(canvas, page.origin + page.scale * outline)
    canvas.setStrokeGray(0.5)
    canvas.setLineWidth(0.5)
    canvas.setDash(2, 2)
    for points, normals in lines:
        facing = normals @ view.toward > 0.12
        for run in np.split(np.arange(len(points)), np.flatnonzero(np.diff(facing)) + 1):
            if facing[run[0]] and len(run) > 1:
                _stroke(canvas, page.place(points[run]))
    canvas.setDash()
    rows = [step.sensor for step in sheet.steps if view.name in where[step.sensor.number]]
    seen = _landmarks_seen(page, sheet.head)
    _draw_diamonds(page, seen)
    _draw_sensors(page, rows, len(sheet.steps))
    _name_landmarks(page, seen)
    _draw_standard(page, sheet)
    middle = (left + right) / 2
    canvas.setFillGray(0.2)
    for text, x, y, spot in zip(
        view.ends,
        (left + 2, right - 2, middle, middle),
        (bottom + 9, bottom + 9, top - 6, bottom + 9),
        "rlcc",
        strict=True,
    ):
        page.label(x, y, ENDS.get(text, text), 7.5, spots=spot)
    canvas.restoreState()


def _draw_sensors(page: _Page, rows: list[SensorRow], total: int) -> None:
    if not rows:
        return
    canvas = page.canvas
    radius = next(size for most, size in RADIUS.items() if total <= most)
    anchors = page.place(np.array([row.scalp_position for row in rows]))
    left, bottom, right, top = page.field
    places = spread_apart(anchors, 2.15 * radius)
    places = np.clip(places, [left + radius, bottom + radius], [right - radius, top - CAPTION - radius])
    canvas.setStrokeGray(0)
    canvas.setFillGray(0)
    for anchor, place in zip(anchors, places, strict=True):
        if np.linalg.norm(place - anchor) > 0.3 * radius:
            canvas.setLineWidth(0.6)
            canvas.line(*anchor, *place)
            canvas.circle(*anchor, 0.9, stroke=0, fill=1)
    for row, (x, y) in zip(rows, places, strict=True):
        draw_mark(canvas, x, y, radius, row)
        page.taken.append((x - radius, y - radius, x + radius, y + radius))


def _landmarks_seen(page: _Page, head: Head) -> list[tuple[str, float, float, bool]]:
    """Name, place on the paper and whether it faces the viewer, of each landmark that is not on the far side."""
    marks = head.landmarks
    points = np.stack([marks.nas, marks.lpa, marks.rpa, marks.inion])
    facing = normals_at(head.scalp, project(head.scalp, points)) @ page.view.toward
    return [
        (name, float(x), float(y), bool(cosine > 0.5))
        for name, cosine, (x, y) in zip(LANDMARKS, facing, page.place(points), strict=True)
        if cosine >= BEHIND
    ]


def _draw_diamonds(page: _Page, seen: list[tuple[str, float, float, bool]]) -> None:
    canvas = page.canvas
    canvas.setFillGray(1)
    canvas.setStrokeGray(0)
    canvas.setLineWidth(0.9)
    for _, x, y, _ in seen:
        shape = canvas.beginPath()
        shape.moveTo(x, y + DIAMOND)
        for dx, dy in ((DIAMOND, 0), (0, -DIAMOND), (-DIAMOND, 0)):
            shape.lineTo(x + dx, y + dy)
        shape.close()
        canvas.drawPath(shape, stroke=1, fill=1)


def _name_landmarks(page: _Page, seen: list[tuple[str, float, float, bool]]) -> None:
    """Names beside the diamonds, or beside the mark of a sensor that sits on one."""
    for name, x, y, faces in seen:
        diamond = (x - DIAMOND, y - DIAMOND, x + DIAMOND, y + DIAMOND)
        covering = [box for box in page.taken if _meet(diamond, box)]
        clear = max([abs(box[2] - box[0]) / 2 for box in covering], default=0.0)
        page.taken.append(diamond)
        page.canvas.setFillGray(0)
        page.label(x, y, name, 7, BOLD, "drlu" if faces else "rldu", clear)


def _draw_standard(page: _Page, sheet: Sheet) -> None:
    """Small crosses at the 10-20 positions, named where there is room."""
    names = [name for name in family_names("10-20") if name not in EARLOBES]
    points = np.array([sheet.standard[name] for name in names])
    normals = normals_at(sheet.head.scalp, project(sheet.head.scalp, points))
    canvas = page.canvas
    for name, normal, (x, y) in zip(names, normals, page.place(points), strict=True):
        cross = (x - 1.6, y - 1.6, x + 1.6, y + 1.6)
        if normal @ page.view.toward < 0.4 or any(_meet(cross, other) for other in page.taken):
            continue
        canvas.setStrokeGray(0.3)
        canvas.setLineWidth(0.6)
        canvas.line(x - 1.6, y, x + 1.6, y)
        canvas.line(x, y - 1.6, x, y + 1.6)
        page.taken.append(cross)
        canvas.setFillGray(0.3)
        page.label(x, y, name, 6)


def _draw_key(canvas: Canvas, sheet: Sheet, field: Box, scale: float) -> None:
    """What the signs mean, and a bar of 50 mm at the drawings' scale."""
    left, bottom, right, top = field
    x, y, step = left + 16, top - CAPTION - 4, 13.5
    rows = [one.sensor for one in sheet.steps]
    canvas.setFillGray(0)
    canvas.setFont(BOLD, 8.5)
    canvas.drawString(left + 6, y + 6, "key")
    entries = []
    for text, fits in (
        ("electrode, with the sensor's number", lambda row: row.kind_type == "electrode" and not row.role),
        ("reference", lambda row: row.role == "reference"),
        ("ground", lambda row: row.role == "ground"),
        ("sensor in a housing, with its number", lambda row: row.kind_type != "electrode"),
    ):
        example = next((row for row in rows if fits(row)), None)
        if example is not None:
            entries.append((example, text))
    for example, text in entries:
        y -= step
        draw_mark(canvas, x, y, 5.5, example)
        canvas.setFont(PLAIN, 7.5)
        canvas.drawString(x + 12, y - 2.7, text)
    for text in (
        "+ 10-20 position    ◇ landmark",
        "- - midline; arc from ear to ear over Cz",
        "a mark moved for room keeps a line to its place",
    ):
        y -= step
        canvas.drawString(x - 5, y - 2.7, text)
    y -= step
    canvas.setLineWidth(1.6)
    canvas.line(x - 5, y, x - 5 + 50e-3 * scale, y)
    canvas.drawString(x + 50e-3 * scale + 1, y - 2.7, "50 mm straight")
    y -= 1.3 * step
    canvas.setFont(BOLD, 7.5)
    canvas.drawString(x - 5, y, "find a sensor: no. → step")
    _draw_finder(canvas, sheet, (x - 5, bottom, right, y - 3))


def _draw_finder(canvas: Canvas, sheet: Sheet, field: Box) -> None:
    """Number of each sensor -> its step, so that a number is found in a table that is sorted by steps."""
    left, bottom, right, top = field
    entries = sorted((step.sensor.number, step.step) for step in sheet.steps)
    for size in FINDER_SIZES:
        columns = int((right - left) / (5.8 * size))
        rows = -(-len(entries) // columns)
        if rows * 1.2 * size <= top - bottom:
            break
    canvas.setFont(PLAIN, size)
    for place, (number, step) in enumerate(entries):
        column, row = divmod(place, rows)
        canvas.drawString(left + column * 5.8 * size, top - (row + 1) * 1.2 * size, f"{number} → {step}")


def _drawn_in(sheet: Sheet) -> dict[int, set[str]]:
    """Number of a sensor -> the views that show it: all that it faces, and always its best."""
    views = [view for row in GRID for view in row]
    where = {}
    for step in sheet.steps:
        facing = np.array([step.sensor.normal @ view.toward for view in views])
        where[step.sensor.number] = {
            view.name for view, cosine in zip(views, facing, strict=True) if cosine >= min(FACING, facing.max())
        }
    return where


def _lines(head: Head) -> list[tuple[np.ndarray, np.ndarray]]:
    """Points (n, 3) [m] and normals (n, 3) of the midline and of the arc over Cz."""
    midline = Midline(head.scalp, head.landmarks)
    vertex = midline.at(np.array([0.5]))[0]
    across = three_point_contour(head.scalp, midline.lpa, vertex, midline.rpa)
    steps = np.linspace(0.0, 1.0, 120)
    return [
        (points, normals_at(head.scalp, project(head.scalp, points)))
        for points in (midline.at(steps), across.at(steps))
    ]


def _outlines(flat: np.ndarray, faces: np.ndarray) -> list[np.ndarray]:
    """The closed lines (n, 2) [m] round what is seen of a mesh whose vertices are projected to flat (n, 3)."""
    from contourpy import contour_generator
    from scipy.ndimage import gaussian_filter

    low = flat[:, :2].min(axis=0) - 5 * PIXEL
    columns, rows = np.ceil((np.ptp(flat[:, :2], axis=0) + 10 * PIXEL) / PIXEL).astype(int)
    pixels = np.column_stack([(flat[:, :2] - low) / PIXEL - 0.5, flat[:, 2]])
    seen = seen_faces(pixels, faces, (int(rows), int(columns)))[0] >= 0
    smooth = gaussian_filter(seen.astype(float), 1.5)
    lines = contour_generator(z=smooth).lines(0.5)
    return [low + (np.asarray(line) + 0.5) * PIXEL for line in lines]


def _stroke(canvas: Canvas, points: np.ndarray) -> None:
    path = canvas.beginPath()
    path.moveTo(*points[0])
    for point in points[1:]:
        path.lineTo(*point)
    canvas.drawPath(path, stroke=1, fill=0)


def _meet(a: Box, b: Box) -> bool:
    return a[0] < b[2] and b[0] < a[2] and a[1] < b[3] and b[1] < a[3]
