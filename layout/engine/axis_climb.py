"""Climbing any smooth score of several axes at once, where no closed form gives the best axis.

Riemannian gradient steps on a product of unit spheres with Barzilai and Borwein's step length and Armijo's test (Absil,
Mahony & Sepulchre 2008, Optimization Algorithms on Matrix Manifolds, ch. 4; Iannazzo & Porcelli 2018, IMA J Numer
Anal 38:495, from memory); an axis that leaves its tilt limit is set back on the rim.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

ScoreAndGradient = Callable[[np.ndarray], tuple[float, np.ndarray]]


def within_tilt(axes: np.ndarray, normal: np.ndarray, cosine: np.ndarray) -> np.ndarray:
    """The nearest unit axes (k, 3) with |u·n| >= cosine (k,), n unit normals (k, 3); cosine 0 is no limit."""
    axes = axes / np.linalg.norm(axes, axis=1)[:, None]
    along = np.einsum("ki,ki->k", axes, normal)
    across = axes - along[:, None] * normal
    length = np.linalg.norm(across, axis=1)
    sign = np.where(along < 0, -1.0, 1.0)
    sine = np.sqrt(np.maximum(0.0, 1.0 - cosine**2))
    scale = np.divide(sine, length, out=np.zeros_like(sine), where=length > 0)
    rim = (sign * cosine)[:, None] * normal + scale[:, None] * across
    return np.where((np.abs(along) < cosine)[:, None], rim, axes)


def climb_axes(
    score_and_gradient: ScoreAndGradient,
    axes: np.ndarray,
    normal: np.ndarray | None = None,
    cosine: np.ndarray | None = None,
    *,
    iterations: int = 200,
    tolerance: float = 1e-9,
) -> tuple[np.ndarray, float]:
    """Axes (k, 3) of unit length at a local maximum of a score near the given ones, and the score.

    score_and_gradient(axes) gives the score and its gradient (k, 3) as a function of free vectors at unit axes; the
    score never falls on the way. Stops when a step gains less than `tolerance` (relative).
    """
    normal = np.zeros_like(axes) if normal is None else normal
    cosine = np.zeros(len(axes)) if cosine is None else cosine
    axes = within_tilt(axes, normal, cosine)
    score, slope = score_and_gradient(axes)
    slope = slope - np.einsum("ki,ki->k", slope, axes)[:, None] * axes
    stride = 0.1 / max(float(np.linalg.norm(slope, axis=1).max(initial=0.0)), 1e-300)
    idle = 0
    for _ in range(iterations):
        steepness = float((slope**2).sum())
        if steepness == 0.0:
            break
        for _ in range(40):
            trial = within_tilt(axes + stride * slope, normal, cosine)
            new_score, new_slope = score_and_gradient(trial)
            if new_score >= score + 1e-4 * float((slope * (trial - axes)).sum()):
                break
            stride *= 0.3
        else:
            break
        new_slope = new_slope - np.einsum("ki,ki->k", new_slope, trial)[:, None] * trial
        moved, turned = trial - axes, new_slope - slope
        curvature = -float((moved * turned).sum())
        longest = 1.0 / max(float(np.linalg.norm(new_slope, axis=1).max()), 1e-300)
        stride = min(float((moved**2).sum()) / curvature, longest) if curvature > 0 else min(4.0 * stride, longest)
        idle = idle + 1 if new_score - score <= tolerance * max(abs(score), 1e-12) else 0
        axes, score, slope = trial, new_score, new_slope
        if idle == 3:
            break
    return axes, score
