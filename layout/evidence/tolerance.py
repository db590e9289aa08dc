"""How exactly a sensor must be placed: how far it may be off before the layout's score drops by a stated share."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq

LEVELS = (0.01, 0.05, 0.10)  # drops, as shares of the value


@dataclass(frozen=True)
class Tolerance:
    """For each level of drop: the least distance that reaches it in any direction, the number of that direction, and
    the distance at which the mean over all directions reaches it. inf (and -1): not within what was tried.
    """

    worst: tuple[float, ...]
    worst_direction: tuple[int, ...]
    mean: tuple[float, ...]


def drops(score: float, scores: np.ndarray) -> np.ndarray:
    """Drops of the scores from `score`, as shares of its size: of the bits, or of the error that grows."""
    return (score - scores) / (abs(score) or 1.0)


def tolerance(distances: np.ndarray, drop: np.ndarray, levels: tuple[float, ...] = LEVELS) -> Tolerance:
    """Tolerances from drops (d, s) at distances (d, s) or (s,) > 0, rising along s, in each of d directions.

    Between the distances a drop is interpolated by monotone cubics from 0 at 0 (Fritsch & Carlson 1980, SIAM J Numer
    Anal 17:238, as scipy has them), and its first crossing of a level is found by bisection. A sensor may gain in some
    directions: it sits on a grid.
    """
    distances = np.broadcast_to(distances, drop.shape)
    worst, direction, mean = [], [], []
    middle = mean_drop(distances, drop)
    for level in levels:
        each = [crossing(along, one, level) for along, one in zip(distances, drop, strict=True)]
        worst.append(min(each))
        direction.append(int(np.argmin(each)) if np.isfinite(min(each)) else -1)
        mean.append(crossing(*middle, level))
    return Tolerance(tuple(worst), tuple(direction), tuple(mean))


def mean_drop(distances: np.ndarray, drop: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(distances (s,), mean drop there over the directions): as far as all directions were tried."""
    last = distances[:, -1].min()
    along = np.append(distances[0][distances[0] < last], last)
    return along, np.mean([drop_curve(*one)(along) for one in zip(distances, drop, strict=True)], axis=0)


def drop_curve(distances: np.ndarray, drop: np.ndarray) -> PchipInterpolator:
    """The drop as a function of the distance, 0 at 0."""
    return PchipInterpolator(np.append(0.0, distances), np.append(0.0, drop))


def crossing(distances: np.ndarray, drop: np.ndarray, level: float) -> float:
    """The first distance at which the interpolated drop reaches the level > 0; inf where it does not."""
    reached = np.flatnonzero(drop >= level)
    if not len(reached):
        return np.inf
    first = int(reached[0])  # monotone between the distances, so there is no crossing before
    below = 0.0 if first == 0 else float(distances[first - 1])
    curve = drop_curve(distances, drop)
    return float(brentq(lambda at: float(curve(at)) - level, below, float(distances[first]), xtol=1e-9))
