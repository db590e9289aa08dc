"""What is drawn, in millimetres with y upwards: lines, fills and words, apart from the format they go to."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np


@dataclass(frozen=True)
class Style:
    """layer: group it belongs to; width [mm] and dash [mm] of lines; colour as #rrggbb."""

    layer: str
    width: float
    colour: str
    dash: tuple[float, ...] = ()


CUT = Style("cut", 0.35, "#000000")
SEAM = Style("seam", 0.25, "#000000", (3.0, 1.5))
RIM = Style("rim", 0.35, "#000000", (6.0, 1.2, 1.0, 1.2))
HOLE = Style("hole", 0.35, "#000000")
MARK = Style("mark", 0.2, "#555555")
NOTCH = Style("mark", 0.3, "#000000")
MIDLINE = Style("mark", 0.2, "#555555", (1.0, 1.0))
TEXT = Style("text", 0.0, "#000000")
PALE = Style("text", 0.0, "#555555")


@dataclass(frozen=True)
class Line:
    """points (n, 2) [mm]."""

    points: np.ndarray
    style: Style
    closed: bool = False


@dataclass(frozen=True)
class Circle:
    """centre (2,) and radius [mm]."""

    centre: np.ndarray
    radius: float
    style: Style


@dataclass(frozen=True)
class Fill:
    """Rings (n, 2) [mm] of one area, filled by the even-odd rule."""

    rings: tuple[np.ndarray, ...]
    colour: str


@dataclass(frozen=True)
class Words:
    """One line of text: place (2,) [mm] of its baseline; size [mm] of the letters' em; anchor start, middle or end."""

    place: np.ndarray
    text: str
    size: float
    style: Style = TEXT
    anchor: str = "middle"
    bold: bool = False
    turn: float = 0.0  # degrees against the clock


Item = Line | Circle | Fill | Words


def moved(item: Item, by: np.ndarray) -> Item:
    """The item shifted by (2,) [mm]."""
    if isinstance(item, Line):
        return replace(item, points=item.points + by)
    if isinstance(item, Circle):
        return replace(item, centre=item.centre + by)
    if isinstance(item, Fill):
        return replace(item, rings=tuple(ring + by for ring in item.rings))
    return replace(item, place=item.place + by)


def reach(item: Item) -> np.ndarray:
    """Corners (2, 2) [mm] of a box around the item, generous for words."""
    if isinstance(item, Line):
        return np.stack([item.points.min(axis=0), item.points.max(axis=0)])
    if isinstance(item, Circle):
        return np.stack([item.centre - item.radius, item.centre + item.radius])
    if isinstance(item, Fill):
        return np.stack([item.rings[0].min(axis=0), item.rings[0].max(axis=0)])
    return np.stack([item.place - item.size * len(item.text), item.place + item.size * len(item.text)])
