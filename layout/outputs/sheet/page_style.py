"""How the placement sheet looks: fonts, paragraphs, page frame with "page n of m", marks of sensors. Black on white."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING
from xml.sax.saxutils import escape

from layout.outputs.plain import one_line, shortened
from layout.outputs.result import SensorRow

if TYPE_CHECKING:
    from reportlab.lib.styles import ParagraphStyle
    from reportlab.pdfgen.canvas import Canvas

PLAIN, BOLD = "DejaVuSans", "DejaVuSans-Bold"
MARGIN = 28.0  # points, as are all lengths of this module
HEADING = 11.0  # of text this large or larger: stays with what follows
HEAD_ROOM = 22.0  # for the line on top of every page
GREY = 0.35  # of fine print: dark enough to be photocopied
BOX = "□"  # stands for a character that the font lacks
STAMPS = (
    b"ReportLab Generated PDF document (opensource)",
    b"ReportLab generated PDF document -- digest (opensource)",
)


@cache
def register_fonts() -> None:
    """Make DejaVu Sans known to the page maker; it comes with matplotlib and covers Latin, Greek and Cyrillic."""
    import matplotlib
    from reportlab.pdfbase import pdfmetrics
    from reportlab.pdfbase.ttfonts import TTFont

    folder = Path(matplotlib.get_data_path()) / "fonts" / "ttf"
    for name in (PLAIN, BOLD):
        pdfmetrics.registerFont(TTFont(name, folder / f"{name}.ttf"))
    pdfmetrics.registerFontFamily(PLAIN, normal=PLAIN, bold=BOLD, italic=PLAIN, boldItalic=BOLD)


def printable(text: str, length: int = 200) -> str:
    """`text` on one line of at most `length` characters, with BOX for what the font lacks."""
    from reportlab.pdfbase import pdfmetrics

    register_fonts()
    known = pdfmetrics.getFont(BOLD).face.charToGlyph
    return "".join(c if ord(c) in known else BOX for c in shortened(one_line(text), length))


def marked_up(text: str, length: int = 200) -> str:
    """`text` made `printable` and safe inside a paragraph's markup."""
    return escape(printable(text, length))


@cache
def style(size: float, bold: bool = False, space_before: float = 0.0, indent: float = 0.0) -> ParagraphStyle:
    """A paragraph of this size [points]."""
    from reportlab.lib.styles import ParagraphStyle

    register_fonts()
    return ParagraphStyle(
        f"{size}-{bold}-{space_before}-{indent}",
        fontName=BOLD if bold else PLAIN,
        fontSize=size,
        leading=1.25 * size,
        spaceBefore=space_before,
        leftIndent=indent,
        splitLongWords=1,
        keepWithNext=size >= HEADING,
    )


def numbered_canvas(head_line: str, foot_line: str) -> type[Canvas]:
    """A canvas that prints both lines and "page n of m" on every page, and leaves no date in the file."""
    from reportlab.pdfgen.canvas import Canvas

    register_fonts()

    class Numbered(Canvas):
        def __init__(self, *args, **kwargs) -> None:
            super().__init__(*args, **{**kwargs, "invariant": 1, "initialFontName": PLAIN, "lang": "en"})
            self._pages = []

        def showPage(self) -> None:  # noqa: N802
            self._pages.append(dict(self.__dict__))
            self._startPage()

        def save(self) -> None:
            for number, page in enumerate(self._pages, 1):
                self.__dict__.update(page)
                self._frame(f"page {number} of {len(self._pages)}")
                super().showPage()
            super().save()

        def _frame(self, numbering: str) -> None:
            width, height = self._pagesize
            top, bottom = height - MARGIN - 9, MARGIN - 12
            self.setFillGray(0)
            self.setFont(PLAIN, 8)
            room = width - 2 * MARGIN - self.stringWidth(numbering, PLAIN, 8) - 12
            self.drawRightString(width - MARGIN, top, numbering)
            self.setFont(BOLD, 9)
            self.drawString(MARGIN, top, fitted(head_line, BOLD, 9, room))
            self.setLineWidth(0.8)
            self.line(MARGIN, top - 5, width - MARGIN, top - 5)
            self.setFont(PLAIN, 7)
            self.drawString(MARGIN, bottom, fitted(foot_line, PLAIN, 7, width - 2 * MARGIN))

    return Numbered


def unstamped(pdf: bytes) -> bytes:
    """The file without the library's comments; their length stays, and with it every offset in the file."""
    for stamp in STAMPS:
        pdf = pdf.replace(stamp, b" " * len(stamp))
    return pdf


def fitted(text: str, font: str, size: float, room: float) -> str:
    """`text` cut to `room` [points], with an ellipsis where it was cut."""
    from reportlab.pdfbase.pdfmetrics import stringWidth

    text = printable(text, 400)
    if stringWidth(text, font, size) <= room:
        return text
    while text and stringWidth(text + "…", font, size) > room:
        text = text[:-1]
    return text.rstrip() + "…"


def draw_mark(canvas: Canvas, x: float, y: float, radius: float, row: SensorRow) -> None:
    """A sensor's number in its mark: disc for electrodes, square for housings; white with a ring for the reference,
    white with two rings for the ground.
    """
    canvas.saveState()
    canvas.setStrokeGray(0)
    white = row.role in ("reference", "ground")
    canvas.setFillGray(1.0 if white else 0.0)
    canvas.setLineWidth(0.22 * radius if row.role == "reference" else 0.1 * radius)
    if row.kind_type == "electrode":
        canvas.circle(x, y, radius, stroke=1, fill=1)
        if row.role == "ground":
            canvas.circle(x, y, 0.8 * radius, stroke=1, fill=0)
    else:
        side = 0.92 * radius
        canvas.roundRect(x - side, y - side, 2 * side, 2 * side, 0.25 * radius, stroke=1, fill=1)
    text = str(row.number)
    size = radius * {1: 1.25, 2: 1.1}.get(len(text), 0.85)
    canvas.setFillGray(0.0 if white else 1.0)
    canvas.setFont(BOLD, size)
    canvas.drawCentredString(x, y - 0.365 * size, text)
    canvas.restoreState()
