"""A sheet larger than the paper, cut into overlapping pages: where each page lies and where pages meet."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from layout.outputs.cap.piece import DrawnPiece
from layout.outputs.cap.sheet import Sheet, lay_out

Paper = Literal["a4", "letter"]
SIZES = {"a4": (210.0, 297.0), "letter": (215.9, 279.4)}  # [mm] ISO 216; ANSI Y14.1
MARGIN = 10.0  # [mm] nothing is drawn nearer to the paper's edge
BAND = 11.0  # [mm] left of and below the part of the sheet, for check bars and words
OVERLAP = 12.0  # [mm] of the sheet that neighbouring pages share
_CUT_COST = 6e-3  # pages for a millimetre of gore cut by a page's edge
_SHIFTS = 21  # places of the pages under the sheet that are tried, along each side


@dataclass(frozen=True)
class Tile:
    """One page: its name; row from the top and column from the left, from 1; corner (2,) [mm]: lower left of its part
    of the sheet.
    """

    name: str
    row: int
    column: int
    corner: np.ndarray


@dataclass(frozen=True)
class Tiling:
    """page and part (2,) [mm]: sizes of the paper and of the part of the sheet on it; tiles: those with something on
    them, row by row; rows and columns: of the whole grid; cut [mm]: what the edges of pages cut of gores and holes.
    """

    page: np.ndarray
    part: np.ndarray
    rows: int
    columns: int
    tiles: tuple[Tile, ...]
    cut: float

    @property
    def origin(self) -> np.ndarray:
        """Lower left corner (2,) [mm] of the sheet's part on the paper."""
        return np.array([MARGIN + BAND, MARGIN + BAND])

    def at(self, row: int, column: int) -> Tile | None:
        """The page at this place of the grid, if it is there."""
        return next((tile for tile in self.tiles if (tile.row, tile.column) == (row, column)), None)


def part_of(paper: Paper, lying: bool) -> np.ndarray:
    """Width and height (2,) [mm] of the part of a sheet that fits on a page."""
    return np.array(SIZES[paper])[:: -1 if lying else 1] - 2 * MARGIN - BAND


def tile_sheet(sheet: Sheet, paper: Paper, lying: bool, name: str) -> Tiling:
    """The pages of a sheet called `name`, moved under it to where their edges cut the least of gores and holes."""
    import shapely

    part = part_of(paper, lying)
    step = part - OVERLAP
    size = np.array([sheet.width, sheet.height])
    columns, rows = np.maximum(np.ceil((size - OVERLAP) / step).astype(int), 1)
    slack = np.array([columns, rows]) * step + OVERLAP - size
    areas = [shapely.Polygon(piece.cut) for piece in sheet.pieces]
    drawn = shapely.union_all(areas)
    holes = shapely.union_all([shapely.Point(hole.centre).buffer(hole.radius) for hole in sheet.holes])
    start, cut = np.empty(2), 0.0
    for axis, count in enumerate((columns, rows)):
        shifts = np.linspace(0.0, slack[axis], _SHIFTS)
        cost = [
            sum(_cut_by(drawn, holes, axis, -shift + k * step[axis] + OVERLAP / 2, size) for k in range(1, count))
            for shift in shifts
        ]
        # The middle one of those that cut least.
        best = np.flatnonzero(np.array(cost) <= min(cost) + 1e-9)
        start[axis] = -shifts[best[len(best) // 2]]
        cut += min(cost)
    tiles = []
    for row in range(1, rows + 1):
        for column in range(1, columns + 1):
            corner = start + np.array([column - 1, rows - row]) * step
            if drawn.intersects(shapely.box(*corner, *(corner + part))):
                parts = [name, *([str(row)] if rows > 1 else []), *([str(column)] if columns > 1 else [])]
                tiles.append(Tile(".".join(parts), row, column, corner))
    return Tiling(part + 2 * MARGIN + BAND, part, int(rows), int(columns), tuple(tiles), cut)


def _cut_by(drawn, holes, axis: int, at: float, size: np.ndarray) -> float:
    """How much [mm] a page's edge at x (axis 0) or y (1) cuts: length in the gores, and five times that in holes."""
    import shapely

    ends = np.array([[at, 0.0], [at, size[1]]]) if axis == 0 else np.array([[0.0, at], [size[0], at]])
    line = shapely.LineString(ends)
    return line.intersection(drawn).length + 5.0 * line.intersection(holes).length


def best_pages(pieces: list[DrawnPiece], paper: Paper) -> list[tuple[Sheet, Tiling]]:
    """Neighbouring gores gathered on sheets, each with its pages: in all the fewest pages, then the fewest cuts.

    A sheet of several gores is one page wide. All pages stand upright, or all lie.
    """
    choices = []
    for lying in (False, True):
        best: list[tuple[float, list[list[DrawnPiece]]]] = [(0.0, [])]  # of the first pieces
        for end in range(1, len(pieces) + 1):
            options = []
            for start in range(end):
                group = pieces[start:end]
                sheet = lay_out(group)
                if len(group) > 1 and sheet.width > part_of(paper, lying)[0]:
                    continue
                tiling = tile_sheet(sheet, paper, lying, "")
                cost = len(tiling.tiles) + tiling.cut * _CUT_COST
                options.append((best[start][0] + cost, [*best[start][1], group]))
            best.append(min(options, key=lambda one: one[0]))
        choices.append((*best[-1], lying))
    _, groups, lying = min(choices, key=lambda one: one[0])
    sheets = [lay_out(group) for group in groups]
    return [(sheet, tile_sheet(sheet, paper, lying, str(k))) for k, sheet in enumerate(sheets, 1)]


def joins(tiling: Tiling) -> list[tuple[str, np.ndarray]]:
    """Marks at which neighbouring pages meet: label and place (2,) [mm] on the sheet, in the middle of the overlap."""
    found = []
    half = OVERLAP / 2
    for tile in tiling.tiles:
        right, below = tiling.at(tile.row, tile.column + 1), tiling.at(tile.row + 1, tile.column)
        for share in (0.25, 0.75):
            if right:
                found.append((f"{tile.name} | {right.name}", tile.corner + tiling.part * [1, share] - [half, 0]))
            if below:
                found.append((f"{tile.name} | {below.name}", tile.corner + tiling.part * [share, 0] + [0, half]))
    return found
