"""The directions from which a head is drawn, without perspective."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class View:
    """Looking along -`toward`. across, up, toward (3,): unit vectors of the head frame to the picture's
    right, to its top and to the viewer (right-handed). ends: what the left, right, top and bottom of the
    picture are ("" if plain)."""

    name: str
    across: np.ndarray
    up: np.ndarray
    toward: np.ndarray
    ends: tuple[str, str, str, str]

    def project(self, points: np.ndarray) -> np.ndarray:
        """(..., 3) in the head frame -> (..., 3): right, up and towards the viewer, same unit."""
        return points @ np.stack([self.across, self.up, self.toward], axis=1)


def _view(name: str, up: tuple, toward: tuple, ends: tuple[str, str, str, str]) -> View:
    up_vector, toward_vector = np.array(up, dtype=float), np.array(toward, dtype=float)
    return View(name, np.cross(up_vector, toward_vector), up_vector, toward_vector, ends)


TOP = _view("from above", (0, 1, 0), (0, 0, 1), ("L", "R", "front", "back"))
LEFT = _view("from the left", (0, 0, 1), (-1, 0, 0), ("← front", "back →", "", ""))
RIGHT = _view("from the right", (0, 0, 1), (1, 0, 0), ("← back", "front →", "", ""))
FRONT = _view("from the front", (0, 0, 1), (0, 1, 0), ("R", "L", "", ""))
BACK = _view("from behind", (0, 0, 1), (0, -1, 0), ("L", "R", "", ""))


def four_views(normals: np.ndarray) -> tuple[View, View, View, View]:
    """Above, left, right, and front or back: whichever shows more of the sensors with these outward normals
    (n, 3)."""
    facing_front = int(np.sum(normals @ FRONT.toward > 0))
    facing_back = int(np.sum(normals @ BACK.toward > 0))
    return TOP, (FRONT if facing_front >= facing_back else BACK), LEFT, RIGHT
