"""An even, mirror-symmetric grid of sites over a scalp at a given pitch."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.head import Surface
from layout.anatomy.scalp_points import SurfaceCloud, dense_cloud, project
from layout.errors import BriefError

NEAREST_SHARE = 0.9  # no two sites nearer than this share of the pitch
# What pushing apart works towards, so that the final projection cannot undercut NEAREST_SHARE.
_AIM_SHARE = 0.98
_EDGES_PER_PITCH = 4
_MAX_EDGE = 4e-3  # [m] dense enough for a wide pitch
_MIRROR = np.array([-1.0, 1.0, 1.0])
_LLOYD_ROUNDS, _PUSH_ROUNDS = 30, 150
_WIDENING = (1.07, 1.1, 1.14, 1.18, 1.22)  # site spacing over pitch, tried in turn


def even_grid(scalp: Surface, pitch: float, bottom: float = -np.inf) -> np.ndarray:
    """Sites (n, 3) [m] on the scalp above z = `bottom` [m], front to back and left to right, the same at
    every call.

    A centroidal Voronoi arrangement (Lloyd's iteration from farthest-point seeds: Du, Faber, Gunzburger
    1999, SIAM Rev 41:637), then near neighbours are pushed apart; kept symmetric by working on mirrored
    pairs and midline sites. No two sites are nearer than 0.9 pitch (straight line); away from the bottom
    edge no scalp point is farther than a pitch from a site. Left and right mirror each other exactly on a
    symmetric scalp, else up to the projection onto it. Raises BriefError where the pitch is too wide for the
    scalp.
    """
    cloud = dense_cloud(scalp, min(pitch / _EDGES_PER_PITCH, _MAX_EDGE))
    inside = (cloud.positions[:, 2] > bottom) & (cloud.positions[:, 0] >= -1e-9)
    half = SurfaceCloud(cloud.positions[inside], cloud.normals[inside], cloud.areas[inside])
    area = 2 * half.areas.sum()
    if area < 8 * pitch**2:
        raise BriefError(f"grid_pitch_mm: must leave room for several sites on the scalp, got {pitch * 1e3:g}")
    sites = np.empty((0, 3))
    for widening in _WIDENING:
        wanted = area / (np.sqrt(3) / 2 * (widening * pitch) ** 2)
        right = _push_apart(_lloyd(_seeds(half.positions, wanted, pitch), half), half, _AIM_SHARE * pitch)
        sites = project(scalp, _both_sides(right)).positions
        if cKDTree(sites).query(sites, k=2)[0][:, 1].min() >= NEAREST_SHARE * pitch:
            break
    else:
        sites = _thin(sites, NEAREST_SHARE * pitch)
    return _front_to_back(sites, pitch)


def _both_sides(right: np.ndarray) -> np.ndarray:
    """Sites with x >= 0 and, for those off the midline, their mirror images after them in the same order."""
    return np.vstack([right, right[right[:, 0] != 0] * _MIRROR])


def _seeds(half: np.ndarray, wanted: float, pitch: float) -> np.ndarray:
    """Farthest-point seeds with x >= 0 (0 on the midline) that make `wanted` sites on both sides together."""
    midline = half[:, 0] < pitch / 4
    here = int(np.argmax(np.where(midline, half[:, 2], -np.inf)))
    chosen: list[np.ndarray] = []
    distance = np.full(len(half), np.inf)
    count = 0
    while count < wanted:
        chosen.append(half[here] * ([0.0, 1.0, 1.0] if midline[here] else [1.0, 1.0, 1.0]))
        count += 1 if midline[here] else 2
        distance = np.minimum(distance, np.linalg.norm(half - chosen[-1], axis=1))
        # Off the midline a sample also competes with its own mirror image.
        here = int(np.argmax(np.where(midline, distance, np.minimum(distance, 2 * half[:, 0]))))
    return np.array(chosen)


def _lloyd(right: np.ndarray, half: SurfaceCloud) -> np.ndarray:
    """Each site moved to the centroid of the scalp nearest to it, repeatedly."""
    off_midline = right[:, 0] != 0
    for _ in range(_LLOYD_ROUNDS):
        owner = cKDTree(_both_sides(right)).query(half.positions)[1]
        mine = owner < len(right)
        owner, weight, samples = owner[mine], half.areas[mine], half.positions[mine]
        total = np.bincount(owner, weight, minlength=len(right))
        moved = np.stack([np.bincount(owner, weight * x, minlength=len(right)) for x in samples.T], axis=1)
        right = np.where(total[:, None] > 0, moved / np.where(total > 0, total, 1)[:, None], right)
        right[:, 0] *= off_midline
    return right


def _push_apart(right: np.ndarray, half: SurfaceCloud, nearest: float) -> np.ndarray:
    """Sites moved along the scalp until, if possible, no two (mirror images included) are nearer than
    `nearest` [m].
    """
    off_midline = right[:, 0] != 0
    tree = cKDTree(half.positions)
    for _ in range(_PUSH_ROUNDS):
        _, sample = tree.query(right)
        height = np.einsum("nd,nd->n", right - half.positions[sample], half.normals[sample])
        right = right - height[:, None] * half.normals[sample]
        right[:, 0] *= off_midline
        sites = _both_sides(right)
        pairs = cKDTree(sites).query_pairs(nearest, output_type="ndarray")
        if len(pairs) == 0:
            break
        apart = sites[pairs[:, 0]] - sites[pairs[:, 1]]
        length = np.linalg.norm(apart, axis=1, keepdims=True)
        push = apart / length * (nearest * 1.005 - length) / 2
        step = np.zeros_like(sites)
        np.add.at(step, pairs[:, 0], push)
        np.add.at(step, pairs[:, 1], -push)
        right = right + step[: len(right)]
        right[:, 0] = np.where(off_midline, np.maximum(right[:, 0], nearest / 4), 0.0)
    return right


def _thin(sites: np.ndarray, nearest: float) -> np.ndarray:
    """Sites left after dropping, pair by mirrored pair, those too near to an earlier one."""
    kept: list[np.ndarray] = []
    for site in sites[np.lexsort((sites[:, 0], -sites[:, 1].round(5), np.abs(sites[:, 0]).round(5)))]:
        if all(np.linalg.norm(site - other) >= nearest for other in kept):
            kept.append(site)
    return np.array(kept)


def _front_to_back(sites: np.ndarray, pitch: float) -> np.ndarray:
    """The same sites in bands of one pitch from front to back, each band from left to right."""
    band = np.floor(-sites[:, 1].round(5) / pitch)
    return sites[np.lexsort((sites[:, 2].round(5), sites[:, 0].round(5), band))]
