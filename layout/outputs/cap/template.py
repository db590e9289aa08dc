"""The cap template of a layout: tiled PDF pages on A4 and Letter, and one SVG sheet for a cutter, all at true size."""

from __future__ import annotations

from layout.outputs.cap.holes import hole_rows
from layout.outputs.cap.pattern import Pattern, make_pattern
from layout.outputs.cap.pdf import template_pdf
from layout.outputs.cap.piece import DrawnPiece, draw_piece
from layout.outputs.cap.sheet import lay_out
from layout.outputs.cap.svg import sheet_svg
from layout.outputs.cap.tiles import Paper, best_pages
from layout.outputs.cap.words import FOOT, hole_list, steps, weaknesses
from layout.outputs.plain import shortened
from layout.outputs.result import DesignResult, RankedLayout

CAP_A4, CAP_LETTER, CAP_SVG = "cap-template-a4.pdf", "cap-template-letter.pdf", "cap-template.svg"
CAP_FILES = (CAP_A4, CAP_LETTER, CAP_SVG)


def cap_files(result: DesignResult, layout: RankedLayout) -> dict[str, bytes | str]:
    """The three files by name; none for a layout without electrodes, whose sensors a helmet carries."""
    if not hole_rows(layout):
        return {}
    pattern = make_pattern(result, layout)
    pieces = [draw_piece(piece) for piece in pattern.pieces]
    return {
        CAP_A4: _pdf(result, layout, pattern, pieces, "a4"),
        CAP_LETTER: _pdf(result, layout, pattern, pieces, "letter"),
        CAP_SVG: _svg(result, layout, pattern, pieces),
    }


def cap_template_pdf(result: DesignResult, layout: RankedLayout, paper: Paper) -> bytes:
    """The template of a layout with electrodes as tiled pages; the same result gives the same bytes."""
    pattern = make_pattern(result, layout)
    return _pdf(result, layout, pattern, [draw_piece(piece) for piece in pattern.pieces], paper)


def cap_template_svg(result: DesignResult, layout: RankedLayout) -> str:
    """The template of a layout with electrodes on one sheet; the same result gives the same text."""
    pattern = make_pattern(result, layout)
    return _svg(result, layout, pattern, [draw_piece(piece) for piece in pattern.pieces])


def _pdf(result: DesignResult, layout: RankedLayout, pattern: Pattern, pieces: list[DrawnPiece], paper: Paper) -> bytes:
    notes = weaknesses(result, pattern)
    return template_pdf(
        best_pages(pieces, paper), _title(result, layout), steps(pattern), notes, hole_list(pattern), FOOT
    )


def _svg(result: DesignResult, layout: RankedLayout, pattern: Pattern, pieces: list[DrawnPiece]) -> str:
    lines = (*steps(pattern)[2:], *weaknesses(result, pattern), FOOT)
    return sheet_svg(lay_out(pieces), _title(result, layout), lines)


def _title(result: DesignResult, layout: RankedLayout) -> str:
    return f"Cap template, layout {layout.rank}: {shortened(result.brief.title, 80)}"
