"""The cap template on paper: two sheets of text with the page map, then the tiled pages at true size."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import numpy as np

from layout.outputs.cap.drawing import MARK, NOTCH, Circle, Fill, Item, Line, Style, Words, reach
from layout.outputs.cap.sheet import Sheet
from layout.outputs.cap.tiles import BAND, MARGIN, OVERLAP, Tile, Tiling, joins
from layout.outputs.sheet.page_style import BOLD, PLAIN, printable, register_fonts

if TYPE_CHECKING:
    from reportlab.pdfgen.canvas import Canvas

POINT = 72 / 25.4  # points in a millimetre
BAR = 100.0  # [mm]
_BAR = Style("check", 0.2, "#000000")
_EDGE = Style("mark", 0.2, "#000000", (2.0, 2.0))
_MAP = 90.0  # [mm] least height that the page map is given
_TEXT, _LEAD = 3.3, 4.6  # [mm] size and line distance of running text


def template_pdf(
    sheets: list[tuple[Sheet, Tiling]],
    title: str,
    steps: tuple[str, ...],
    notes: tuple[str, ...],
    holes: list[str],
    foot: str,
) -> bytes:
    """The whole document; the same input gives the same bytes."""
    from reportlab.pdfgen.canvas import Canvas

    register_fonts()
    file = io.BytesIO()
    first = sheets[0][1]
    width, height = first.page * POINT
    canvas = Canvas(file, pagesize=(width, height), invariant=1)
    canvas.setTitle(printable(title))
    for pin in (canvas.setAuthor, canvas.setCreator, canvas.setProducer, canvas.setSubject):
        pin("scalpsite")
    canvas.setViewerPreference("PrintScaling", "None")
    front = _Text(canvas, first, title, foot)
    front.first_page(steps, notes)
    front.hole_pages(holes, sheets)
    for sheet, tiling in sheets:
        for tile in tiling.tiles:
            _tile_page(canvas, sheet, tiling, tile, title)
    canvas.save()
    return file.getvalue()


def _tile_page(canvas: Canvas, sheet: Sheet, tiling: Tiling, tile: Tile, title: str) -> None:
    canvas.saveState()
    canvas.scale(POINT, POINT)
    canvas.saveState()
    low, part = tiling.origin, tiling.part
    clip = canvas.beginPath()
    clip.rect(*low, *part)
    canvas.clipPath(clip, stroke=0)
    canvas.translate(*(low - tile.corner))
    for item in sheet.items:
        box = reach(item)
        if (box[1] > tile.corner).all() and (box[0] < tile.corner + part).all():
            draw(canvas, item)
    for label, place in joins(tiling):
        _diamond(canvas, label, place)
    canvas.restoreState()
    _edges(canvas, tiling, tile)
    check_bars(canvas, low - 4.0)
    x = low[0] + BAR + 4.0
    room = MARGIN + BAND + part[0] - x
    draw(canvas, Words(np.array([x, low[1] - 9.0]), f"page {tile.name}", 4.2, anchor="start", bold=True))
    draw(canvas, Words(np.array([x, low[1] - 4.0]), _fitted(printable(title, 400), 2.3, room), 2.3, anchor="start"))
    canvas.restoreState()
    canvas.showPage()


def _edges(canvas: Canvas, tiling: Tiling, tile: Tile) -> None:
    """The part's own edges: dashed where to cut (left and below, over a neighbour), dotted grey where to lie under."""
    x0, y0 = tiling.origin
    x1, y1 = tiling.origin + tiling.part
    left, right = tiling.at(tile.row, tile.column - 1), tiling.at(tile.row, tile.column + 1)
    above, below = tiling.at(tile.row - 1, tile.column), tiling.at(tile.row + 1, tile.column)
    if left:
        draw(canvas, Line(np.array([[x0, y0], [x0, y1]]), _EDGE))
    if below:
        draw(canvas, Line(np.array([[x0, y0], [x1, y0]]), _EDGE))
    if right:
        draw(canvas, Line(np.array([[x1 - OVERLAP, y0], [x1 - OVERLAP, y1]]), MARK))
    if above:
        draw(canvas, Line(np.array([[x0, y1 - OVERLAP], [x1, y1 - OVERLAP]]), MARK))


def _diamond(canvas: Canvas, label: str, place: np.ndarray) -> None:
    corners = place + 3.0 * np.array([[0, 1], [1, 0], [0, -1], [-1, 0]])
    draw(canvas, Line(corners, NOTCH, closed=True))
    draw(canvas, Line(corners[[0, 2]], NOTCH))
    draw(canvas, Line(corners[[1, 3]], NOTCH))
    draw(canvas, Words(place + np.array([0.0, 3.6]), label, 1.9))


def check_bars(canvas: Canvas, corner: np.ndarray) -> None:
    """Two bars of exactly 100 mm, to the right and upwards from a corner (2,) [mm] on the paper."""
    x, y = corner
    draw(canvas, Line(np.array([[x, y + BAR], [x, y], [x + BAR, y]]), _BAR))
    for at in (np.array([[x - 1.5, y + BAR], [x + 1.5, y + BAR]]), np.array([[x + BAR, y - 1.5], [x + BAR, y + 1.5]])):
        draw(canvas, Line(at, _BAR))
    draw(canvas, Words(np.array([x + BAR / 2, y - 3.0]), "check: 100 mm between the middles of the end strokes", 2.3))
    draw(canvas, Words(np.array([x - 1.5, y + BAR / 2]), "check: 100 mm", 2.3, turn=90.0))


def draw(canvas: Canvas, item: Item) -> None:
    """One item on a canvas whose unit is the millimetre."""
    if isinstance(item, Words):
        canvas.saveState()
        canvas.setFillColor(item.style.colour)
        canvas.setFont(BOLD if item.bold else PLAIN, item.size)
        canvas.translate(*item.place)
        canvas.rotate(item.turn)
        put = {"start": canvas.drawString, "middle": canvas.drawCentredString, "end": canvas.drawRightString}
        put[item.anchor](0, 0, printable(item.text, 400))
        canvas.restoreState()
        return
    path = canvas.beginPath()
    if isinstance(item, Fill):
        for ring in item.rings:
            _trace(path, ring, True)
        canvas.setFillColor(item.colour)
        canvas.drawPath(path, stroke=0, fill=1, fillMode=0)
        return
    canvas.setStrokeColor(item.style.colour)
    canvas.setLineWidth(item.style.width)
    canvas.setDash(list(item.style.dash))
    if isinstance(item, Circle):
        canvas.circle(*item.centre, item.radius, stroke=1, fill=0)
        return
    _trace(path, item.points, item.closed)
    canvas.drawPath(path, stroke=1, fill=0)


def _trace(path, points: np.ndarray, closed: bool) -> None:
    path.moveTo(*points[0])
    for point in points[1:]:
        path.lineTo(*point)
    if closed:
        path.close()


def _fitted(text: str, size: float, room: float) -> str:
    from reportlab.pdfbase.pdfmetrics import stringWidth

    if stringWidth(text, PLAIN, size) <= room:
        return text
    while text and stringWidth(text + "…", PLAIN, size) > room:
        text = text[:-1]
    return text.rstrip() + "…"


class _Text:
    """The pages of words in front of the tiled ones."""

    def __init__(self, canvas: Canvas, tiling: Tiling, title: str, foot: str) -> None:
        self.canvas, self.tiling, self.title, self.foot = canvas, tiling, title, foot
        self.left, self.right = MARGIN + BAND, tiling.page[0] - MARGIN
        self.top, self.bottom = tiling.page[1] - MARGIN, MARGIN + BAND
        self.at = self.top

    def first_page(self, steps: tuple[str, ...], notes: tuple[str, ...]) -> None:
        self._begin()
        for number, step in enumerate(steps, 1):
            self._paragraph(step, f"{number}.")
        self.at -= 1.5
        for note in notes:
            self._paragraph(note, "–")
        self._end()

    def hole_pages(self, holes: list[str], sheets: list[tuple[Sheet, Tiling]]) -> None:
        columns = 2
        width = (self.right - self.left) / columns
        rows = int((self.top - self.bottom - 26.0) / _LEAD)
        for start in range(0, len(holes), rows * columns):
            self._begin()
            self._line(f"Holes: number, position, gore, size ({len(holes)} in all)", bold=True)
            self.at -= 1.0
            page = holes[start : start + rows * columns]
            per = -(-len(page) // columns) if len(page) > 12 else len(page)
            for k, text in enumerate(page):
                place = np.array([self.left + width * (k // per), self.at - _LEAD * (k % per)])
                self._words(place, _fitted(printable(text, 400), _TEXT, width - 4.0))
            self.at -= _LEAD * (per + 1)
            if start + rows * columns < len(holes):
                self._end()
        if self.at - self.bottom < _MAP:
            self._end()
            self._begin()
        self._map(sheets)
        self._end()

    def _begin(self) -> None:
        self.canvas.saveState()
        self.canvas.scale(POINT, POINT)
        self.at = self.top - 5.0
        for line in self._wrapped(self.title, 4.6, 0.9 * (self.right - self.left)):
            self._line(line, size=4.6, bold=True)
        self.at -= 2.5

    def _end(self) -> None:
        corner = self.tiling.origin - 4.0
        check_bars(self.canvas, corner)
        x = corner[0] + BAR + 6.0
        for row, text in enumerate(self._wrapped(self.foot, 2.3, self.right - x)):
            draw(self.canvas, Words(np.array([x, corner[1] - 0.5 - 3.2 * row]), text, 2.3, anchor="start"))
        self.canvas.restoreState()
        self.canvas.showPage()

    def _words(self, place: np.ndarray, text: str, size: float = _TEXT, bold: bool = False) -> None:
        draw(self.canvas, Words(place, text, size, anchor="start", bold=bold))

    def _line(self, text: str, size: float = _TEXT, bold: bool = False) -> None:
        self._words(
            np.array([self.left, self.at]),
            _fitted(printable(text, 400), size, (self.right - self.left) * 0.93),
            size,
            bold,
        )
        self.at -= _LEAD * size / _TEXT

    def _paragraph(self, text: str, mark: str) -> None:
        self._words(np.array([self.left, self.at]), mark)
        for line in self._wrapped(text, _TEXT, self.right - self.left - 7.0):
            self._words(np.array([self.left + 7.0, self.at]), line)
            self.at -= _LEAD
        self.at -= 0.8

    def _wrapped(self, text: str, size: float, room: float) -> list[str]:
        from reportlab.lib.utils import simpleSplit

        return simpleSplit(printable(text, 2000), PLAIN, size, room)

    def _map(self, sheets: list[tuple[Sheet, Tiling]]) -> None:
        """The pages and the gores on them, as large as fits."""
        boxes = []
        for _, tiling in sheets:
            corners = np.vstack([tile.corner for tile in tiling.tiles])
            boxes.append(np.stack([corners.min(axis=0), corners.max(axis=0) + tiling.part]))
        sizes = np.array([np.ptp(box, axis=0) for box in boxes])
        gap = 3.0
        room = np.array([self.right - self.left - gap * (len(sheets) - 1), self.at - self.bottom - 6.0])
        scale = min(room[0] / sizes[:, 0].sum(), room[1] / sizes[:, 1].max())
        self._line(
            "The pages and their gores, from the left of the head to its right, front up, seen from outside:", bold=True
        )
        canvas, x = self.canvas, self.left
        for (sheet, tiling), box, size in zip(sheets, boxes, scale * sizes, strict=True):
            canvas.saveState()
            canvas.translate(x, self.at + 1.0 - size[1])
            for piece in sheet.pieces:
                draw(canvas, Line(scale * (piece.cut - box[0]), MARK, closed=True))
                draw(canvas, Words(scale * (piece.box.mean(axis=0) - box[0]), piece.name, 2.6))
            for tile in tiling.tiles:
                corner, part = scale * (tile.corner - box[0]), scale * tiling.part
                draw(canvas, Line(corner + part * np.array([[0, 0], [1, 0], [1, 1], [0, 1]]), NOTCH, closed=True))
                draw(canvas, Words(corner + 1.0 + scale * OVERLAP, tile.name, 3.6, anchor="start", bold=True))
            canvas.restoreState()
            x += size[0] + gap
