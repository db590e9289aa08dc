"""All gores of a cap laid out on one sheet, in millimetres with y upwards from the lower left corner."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.outputs.cap.drawing import Circle, Item, moved
from layout.outputs.cap.piece import DrawnPiece

GAP = 4.0  # [mm] between the cut lines of neighbours
_ROW = 1.0  # [mm] height of the strips in which neighbours are compared


@dataclass(frozen=True)
class Sheet:
    """width and height [mm]; pieces: moved to their places."""

    width: float
    height: float
    pieces: tuple[DrawnPiece, ...]

    @property
    def items(self) -> list[Item]:
        """Everything of all pieces."""
        return [item for piece in self.pieces for item in piece.items]

    @property
    def holes(self) -> list[Circle]:
        """The round holes that are whole."""
        return [item for item in self.items if isinstance(item, Circle)]


def lay_out(pieces: list[DrawnPiece]) -> Sheet:
    """A row of pieces from left to right, their middles at one height.

    Neighbours move together until their cut lines, or the words outside them, are GAP apart: bent gores nest.
    """
    height = max(np.ptp(piece.box[:, 1]) for piece in pieces)
    count = int(np.ceil(height / _ROW)) + 1
    right = np.full(count, -np.inf)  # of what is placed, in each row of the sheet
    placed: list[DrawnPiece] = []
    for piece in pieces:
        up = height / 2 - piece.box[:, 1].mean()
        rows, x = _edge_points(piece, up)
        left_edge, right_edge = np.full(count, np.inf), np.full(count, -np.inf)
        np.minimum.at(left_edge, rows, x)
        np.maximum.at(right_edge, rows, x)
        reach = int(GAP / _ROW) + 1
        near = np.lib.stride_tricks.sliding_window_view(np.pad(right, reach, constant_values=-np.inf), 2 * reach + 1)
        shift = max(-piece.box[0, 0], float((near.max(axis=1) + GAP - left_edge).max()))
        right = np.maximum(right, right_edge + shift)
        placed.append(_moved(piece, np.array([shift, up])))
    return Sheet(max(piece.box[1, 0] for piece in placed), height, tuple(placed))


def _edge_points(piece: DrawnPiece, up: float) -> tuple[np.ndarray, np.ndarray]:
    """Rows and x [mm] of points close together on the cut line, and on the box where words stand above or below it."""
    lines = [np.vstack([piece.cut, piece.cut[:1]])]
    low, high = piece.box
    if high[1] > piece.cut[:, 1].max() or low[1] < piece.cut[:, 1].min():
        lines.append(np.array([low, [low[0], high[1]], high, [high[0], low[1]], low]))
    points = []
    for line in lines:
        along = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
        at = np.arange(0.0, along[-1], _ROW / 4)
        points.append(np.column_stack([np.interp(at, along, line[:, k]) for k in range(2)]))
    dense = np.vstack(points)
    return np.floor((dense[:, 1] + up) / _ROW).astype(int).clip(0), dense[:, 0]


def _moved(piece: DrawnPiece, by: np.ndarray) -> DrawnPiece:
    return DrawnPiece(piece.name, tuple(moved(item, by) for item in piece.items), piece.cut + by, piece.box + by)
