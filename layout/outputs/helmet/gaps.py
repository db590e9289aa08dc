"""How far apart rigid housings are from each other and from the scalp, exactly: boxes and triangles, no samples."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Surface

_PARALLEL = 1e-9  # sine of the angle between two edges below which their cross product is no direction
_DEEPEST = 60e-3  # [m] scalp farther below a face than this is the other side of the head
_SIGNS = np.array([[x, y, z] for x in (-1, 1) for y in (-1, 1) for z in (0, 1)], dtype=float)
_EDGES = np.array([(a, b) for a in range(8) for b in range(a + 1, 8) if (_SIGNS[a] != _SIGNS[b]).sum() == 1])


def box_corners(pose: np.ndarray, size: np.ndarray) -> np.ndarray:
    """Corners (..., 8, 3) of boxes of extents `size` (..., 3) that stand on z = 0 of their pose (..., 4, 4)."""
    half = np.asarray(size, dtype=float) / [2, 2, 1]
    return np.einsum("...dk,...ck->...cd", pose[..., :3, :3], _SIGNS * half[..., None, :]) + pose[..., None, :3, 3]


def box_gaps(poses_a: np.ndarray, sizes_a: np.ndarray, poses_b: np.ndarray, sizes_b: np.ndarray) -> np.ndarray:
    """Signed gap (n,) [m] of n pairs of boxes: their distance, or minus the shortest way that parts them.

    Poses (n, 4, 4) and sizes (n, 3) as in box_corners. Where the boxes share volume, the shortest way out is along a
    face normal or a cross product of two edges (Gottschalk, Lin, Manocha 1996, SIGGRAPH 171: the facets of the
    Minkowski difference); else the distance is found between a corner and a box or between two edges (Ericson 2005,
    Real-time collision detection, 5.1.9; from memory).
    """
    gaps = -_overlap_depths(poses_a, sizes_a, poses_b, sizes_b)
    apart = np.flatnonzero(gaps > 0)
    if len(apart):
        gaps[apart] = _distances(poses_a[apart], sizes_a[apart], poses_b[apart], sizes_b[apart])
    return gaps


def _overlap_depths(poses_a: np.ndarray, sizes_a: np.ndarray, poses_b: np.ndarray, sizes_b: np.ndarray) -> np.ndarray:
    """Least overlap (n,) of the shadows of two boxes on the fifteen separating axes; negative where they are apart."""
    turns_a, turns_b = poses_a[:, :3, :3], poses_b[:, :3, :3]
    crosses = np.cross(turns_a.transpose(0, 2, 1)[:, :, None], turns_b.transpose(0, 2, 1)[:, None]).reshape(-1, 9, 3)
    directions = np.concatenate([turns_a.transpose(0, 2, 1), turns_b.transpose(0, 2, 1), crosses], axis=1)
    length = np.linalg.norm(directions, axis=2)
    directions = directions / np.where(length > _PARALLEL, length, 1.0)[:, :, None]
    shadow_a = np.einsum("nad,ncd->nac", directions, box_corners(poses_a, sizes_a))
    shadow_b = np.einsum("nad,ncd->nac", directions, box_corners(poses_b, sizes_b))
    overlap = np.minimum(shadow_a.max(axis=2) - shadow_b.min(axis=2), shadow_b.max(axis=2) - shadow_a.min(axis=2))
    return np.where(length > _PARALLEL, overlap, np.inf).min(axis=1)


def _distances(poses_a: np.ndarray, sizes_a: np.ndarray, poses_b: np.ndarray, sizes_b: np.ndarray) -> np.ndarray:
    """Distance (n,) of pairs of boxes that share no volume."""
    corners_a, corners_b = box_corners(poses_a, sizes_a), box_corners(poses_b, sizes_b)
    nearest = np.minimum(
        _points_to_box(corners_a, poses_b, sizes_b).min(axis=1),
        _points_to_box(corners_b, poses_a, sizes_a).min(axis=1),
    )
    edges_a, edges_b = corners_a[:, _EDGES], corners_b[:, _EDGES]
    between = _segments(edges_a[:, :, None], edges_b[:, None])
    return np.minimum(nearest, between.min(axis=(1, 2)))


def _points_to_box(points: np.ndarray, pose: np.ndarray, size: np.ndarray) -> np.ndarray:
    """Distances (n, m) of points (n, m, 3) to n boxes."""
    local = np.einsum("ndk,nmd->nmk", pose[:, :3, :3], points - pose[:, None, :3, 3])
    low, high = size * [-0.5, -0.5, 0.0], size * [0.5, 0.5, 1.0]
    return np.linalg.norm(local - np.clip(local, low[:, None], high[:, None]), axis=2)


def _segments(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    """Distances (...) of segments (..., 2, 3)."""
    along_a, along_b = first[..., 1, :] - first[..., 0, :], second[..., 1, :] - second[..., 0, :]
    start = first[..., 0, :] - second[..., 0, :]
    aa, bb, ab = (np.sum(p * q, axis=-1) for p, q in ((along_a, along_a), (along_b, along_b), (along_a, along_b)))
    sa, sb = np.sum(along_a * start, axis=-1), np.sum(along_b * start, axis=-1)
    determinant = aa * bb - ab * ab
    skew = determinant > _PARALLEL**2 * aa * bb
    # parallel edges: any start will do, the two clamps below find the rest
    s = np.clip(np.where(skew, ab * sb - bb * sa, 0.0) / np.where(skew, determinant, 1.0), 0.0, 1.0)
    t = np.clip((ab * s + sb) / bb, 0.0, 1.0)
    s = np.clip((ab * t - sa) / aa, 0.0, 1.0)
    return np.linalg.norm(start + s[..., None] * along_a - t[..., None] * along_b, axis=-1)


def scalp_gaps(scalp: Surface, poses: np.ndarray, sizes: np.ndarray) -> np.ndarray:
    """Least gap (n,) [m] along z between each housing's face and the scalp below it, negative where the scalp
    stands up into the housing; inf where there is no scalp below.

    Exact for the flat faces of the mesh: those below the face are cut along its four sides, and the highest corner of
    what is left counts.
    """
    import trimesh

    gaps = np.full(len(poses), np.inf)
    for number, (pose, size) in enumerate(zip(poses, sizes, strict=True)):
        local = (scalp.vertices - pose[:3, 3]) @ pose[:3, :3]
        half = size[:2] / 2
        corners = local[scalp.faces]
        beside = (corners[:, :, :2].min(axis=1) > half).any(axis=1) | (corners[:, :, :2].max(axis=1) < -half).any(
            axis=1
        )
        faces = scalp.faces[~beside & (corners[:, :, 2].max(axis=1) > -_DEEPEST)]
        vertices = local
        for side in ((1, 0, 0), (-1, 0, 0), (0, 1, 0), (0, -1, 0)):
            if len(faces) == 0:
                break
            normal = np.array(side, dtype=float)
            origin = -normal * np.append(half, 0.0)
            vertices, faces, _ = trimesh.intersections.slice_faces_plane(vertices, faces, normal, origin)
        if len(faces):
            gaps[number] = -vertices[faces.ravel(), 2].max()
    return gaps
