"""A cap on the synthetic head of made_result, with electrodes all over it, drawn once for all tests."""

from dataclasses import replace
from functools import cache

import numpy as np
from made_result import _rows, make_result

from layout.outputs.cap.pattern import Pattern, make_pattern
from layout.outputs.cap.piece import draw_piece
from layout.outputs.cap.template import CAP_A4, CAP_LETTER, CAP_SVG, _pdf, _svg
from layout.outputs.result import DesignResult


@cache
def cap_result(count: int = 40) -> DesignResult:
    """One layout of `count` electrodes, none nearer than 14 mm to another."""
    made = make_result("electrode")
    positions = made.candidates.sites.positions
    chosen: list[int] = []
    for one in np.random.default_rng(5).permutation(len(positions)):
        if all(np.linalg.norm(positions[one] - positions[other]) > 0.014 for other in chosen):
            chosen.append(int(one))
    rows = _rows(made.candidates, tuple(sorted(chosen[:count])), made.brief.stock)
    return replace(made, layouts=(replace(made.layouts[0], sensors=rows),))


@cache
def cap_pattern() -> Pattern:
    """The pattern of that layout."""
    result = cap_result()
    return make_pattern(result, result.layouts[0])


@cache
def cap_written() -> dict[str, bytes | str]:
    """Its files by name, as `cap_files` makes them of the pattern above."""
    result = cap_result()
    layout, pattern = result.layouts[0], cap_pattern()
    pieces = [draw_piece(piece) for piece in pattern.pieces]
    pdfs = {
        name: _pdf(result, layout, pattern, pieces, paper) for name, paper in ((CAP_A4, "a4"), (CAP_LETTER, "letter"))
    }
    return {**pdfs, CAP_SVG: _svg(result, layout, pattern, pieces)}
