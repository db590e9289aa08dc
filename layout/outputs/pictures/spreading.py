"""Moves numbered discs apart so that every number can be read."""

from __future__ import annotations

import numpy as np


def spread_apart(anchors: np.ndarray, distance: float, rounds: int = 400) -> np.ndarray:
    """Disc centres (n, 2) at least about `distance` from each other and as near to `anchors` (n, 2) as that
    allows.

    Pairs that are too close push each other apart, then everything is drawn a little back to its anchor, less
    and less. The same input gives the same output; discs that were never too close stay on their anchors.
    """
    places = np.array(anchors, dtype=float)
    count = len(places)
    if count < 2:
        return places
    # equal anchors would push in no direction: part them by a hair, each its own way
    turn = np.arange(count) * np.pi * (3 - np.sqrt(5))
    hair = 1e-4 * distance * np.stack([np.cos(turn), np.sin(turn)], axis=1)
    places += np.where(_has_close(places, distance)[:, None], hair, 0.0)
    for step in range(rounds):
        gap = places[:, None] - places[None]
        length = np.linalg.norm(gap, axis=2)
        np.fill_diagonal(length, np.inf)
        push = np.clip(1.02 * distance - length, 0, None) / 2
        close = length < distance
        if not close.any():
            break
        direction = gap / length[..., None]
        places += 0.5 * np.einsum("ij,ijk->ik", push * close, direction)
        pull = 0.05 * max(0.0, 1 - 1.5 * step / rounds)
        places += pull * (anchors - places)
    return places


def _has_close(places: np.ndarray, distance: float) -> np.ndarray:
    length = np.linalg.norm(places[:, None] - places[None], axis=2)
    np.fill_diagonal(length, np.inf)
    return (length < distance).any(axis=1)
