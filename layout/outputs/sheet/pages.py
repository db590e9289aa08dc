"""The placement sheet: what a technician carries to the head with a tape measure and a pen, as a PDF."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING, Literal

from layout.outputs.result import DesignResult, RankedLayout
from layout.outputs.sheet.page_style import (
    HEAD_ROOM,
    MARGIN,
    numbered_canvas,
    printable,
    register_fonts,
    unstamped,
)
from layout.outputs.sheet.page_table import steps_table
from layout.outputs.sheet.page_text import about_the_head, how_to_use
from layout.outputs.sheet.page_views import head_views
from layout.outputs.sheet.rows import Sheet, sheet_of

if TYPE_CHECKING:
    from reportlab.platypus import BaseDocTemplate

Paper = Literal["a4", "letter"]
GUTTER = 18.0  # points between the two columns of text


def placement_sheet_pdf(result: DesignResult, layout: RankedLayout, paper: Paper) -> bytes:
    """The placement sheet of one layout on A4 or Letter, lying; the same result gives the same bytes."""
    return sheet_pdf(sheet_of(result, layout), paper)


def sheet_pdf(sheet: Sheet, paper: Paper) -> bytes:
    """A measured sheet on paper."""
    from reportlab.platypus import NextPageTemplate, PageBreak

    register_fonts()
    file = io.BytesIO()
    document = _document(file, paper, printable(sheet.title))
    width, height = document.width, document.height
    story = [
        *about_the_head(sheet, (width - GUTTER) / 2),
        *how_to_use(sheet),
        NextPageTemplate("whole"),
        PageBreak(),
        head_views(sheet, width, height),
        PageBreak(),
        steps_table(sheet, width),
    ]
    head_line = f"Placement sheet · layout {sheet.rank} · {sheet.head.name} head · {sheet.title}"
    foot_line = "Planning and research only, not a medical device. Distances in mm along the scalp."
    document.build(story, canvasmaker=numbered_canvas(head_line, foot_line))
    return unstamped(file.getvalue())


def _document(file: io.BytesIO, paper: Paper, title: str) -> BaseDocTemplate:
    from reportlab.lib.pagesizes import A4, LETTER, landscape
    from reportlab.platypus import BaseDocTemplate, Frame, PageTemplate

    size = landscape({"a4": A4, "letter": LETTER}[paper])
    document = BaseDocTemplate(
        file,
        pagesize=size,
        leftMargin=MARGIN,
        rightMargin=MARGIN,
        topMargin=MARGIN + HEAD_ROOM,
        bottomMargin=MARGIN,
        title=title,
        **dict.fromkeys(("author", "subject", "creator", "producer"), "scalpsite"),
    )
    none = {"leftPadding": 0, "rightPadding": 0, "topPadding": 0, "bottomPadding": 0}
    column = (document.width - GUTTER) / 2
    left = Frame(MARGIN, MARGIN, column, document.height, id="left", **none)
    right = Frame(MARGIN + column + GUTTER, MARGIN, column, document.height, id="right", **none)
    whole = Frame(MARGIN, MARGIN, document.width, document.height, id="whole", **none)
    document.addPageTemplates([PageTemplate("text", [left, right]), PageTemplate("whole", [whole])])
    return document
