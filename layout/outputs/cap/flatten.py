"""Laying a piece of scalp flat with the least strain, and measuring the strain that is left."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array, csc_array, eye_array, hstack, vstack
from scipy.sparse.linalg import splu

_ROUNDS = 15
_SETTLED = 1e-4  # relative change of the energy


@dataclass(frozen=True)
class Flat:
    """A piece of surface laid flat.

    points (n_vertices, 2) [m]; stretch (n_faces, 2): smallest and largest length on paper over length on the surface
    inside each face (the principal stretches); areas (n_faces,) [m²]: of the faces on the surface.
    """

    points: np.ndarray
    stretch: np.ndarray
    areas: np.ndarray

    @property
    def rms(self) -> float:
        """Root of the area-weighted mean square of the principal strains (stretch - 1)."""
        return float(np.sqrt(np.average(((self.stretch - 1) ** 2).mean(axis=1), weights=self.areas)))


def flatten(
    vertices: np.ndarray,
    faces: np.ndarray,
    held: np.ndarray,
    band: float,
    lengths: np.ndarray | None = None,
    start: np.ndarray | None = None,
) -> Flat:
    """Lay a piece of surface flat, vertices (n, 3) [m] and faces (m, 3), seen from outside.

    Minimises the area integral of the squared Green strain, the membrane energy of an isotropic sheet without lateral
    contraction, over all plane positions of the vertices. held (k, 2): edges that keep the given lengths (k,) [m], by
    default their own, as a band of the same sheet `band` [m] wide would hold them. Begins at `start` (n, 2) [m] or at
    the least-squares conformal map (Lévy, Petitjean, Ray, Maillot 2002, ACM Trans Graph 21:362; from memory) and goes
    on by damped Gauss-Newton steps. The piece must be a disc: one border, no handles.
    """
    gradients, areas = _gradients(vertices, faces)
    points = _conformal(vertices, faces, gradients, areas) if start is None else start
    if lengths is None:
        lengths = np.linalg.norm(vertices[held[:, 0]] - vertices[held[:, 1]], axis=1)
    weights = np.sqrt(band * lengths)
    damping = 1e-6
    residual = _residual(points, faces, gradients, areas, held, lengths, weights)
    energy = residual @ residual
    for _ in range(_ROUNDS):
        slope = _slope(points, faces, gradients, areas, held, lengths, weights)
        normal = (slope.T @ slope).tocsc()
        scale = normal.diagonal().mean()
        while True:
            step = _solve(normal + damping * scale * eye_array(normal.shape[0], format="csc"), -(slope.T @ residual))
            tried = points + step.reshape(-1, 2)
            residual_tried = _residual(tried, faces, gradients, areas, held, lengths, weights)
            if residual_tried @ residual_tried <= energy or damping > 1e3:
                break
            damping *= 10
        points, residual = tried, residual_tried
        before, energy = energy, residual @ residual
        damping = max(damping / 10, 1e-10)
        if before - energy <= _SETTLED * before + 1e-30:
            break
    return Flat(points, stretches(points, faces, gradients), areas)


def _solve(matrix: csc_array, right: np.ndarray) -> np.ndarray:
    """Solution of a symmetric positive definite system."""
    return splu(matrix, permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True}).solve(right)


def stretches(points: np.ndarray, faces: np.ndarray, gradients: np.ndarray) -> np.ndarray:
    """Principal stretches (n_faces, 2), smaller first, of the linear map of each face; see `_gradients`."""
    return np.linalg.svd(_maps(points, faces, gradients), compute_uv=False)[:, ::-1]


def _maps(points: np.ndarray, faces: np.ndarray, gradients: np.ndarray) -> np.ndarray:
    """Linear maps (n_faces, 2, 2) from each face's own plane to the paper."""
    return np.einsum("fvi,fvk->fik", points[faces], gradients)


def _gradients(vertices: np.ndarray, faces: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Gradients (n_faces, 3 corners, 2) [1/m] of the corners' hat functions in each face's own plane, areas [m²]."""
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    first = b - a
    length = np.linalg.norm(first, axis=1)
    x = first / length[:, None]
    along = np.einsum("nd,nd->n", c - a, x)
    high = np.linalg.norm(c - a - along[:, None] * x, axis=1)
    second = np.stack([-1 / length, (along / length - 1) / high], axis=1)
    third = np.stack([1 / length, -along / (length * high)], axis=1)
    top = np.stack([np.zeros_like(high), 1 / high], axis=1)
    return np.stack([second, third, top], axis=1), length * high / 2


def _conformal(vertices: np.ndarray, faces: np.ndarray, gradients: np.ndarray, areas: np.ndarray) -> np.ndarray:
    """Plane positions (n, 2) [m] that keep angles as well as they can, at the true length of the longest way across."""
    n, rows = len(vertices), np.arange(len(faces))
    root = np.sqrt(areas)[:, None]
    row = np.repeat(rows, 3)
    gx, gy = (
        csc_array(coo_array(((root * gradients[:, :, k]).ravel(), (row, faces.ravel())), shape=(len(faces), n)))
        for k in range(2)
    )
    # Cauchy-Riemann: u_x = v_y, u_y = -v_x in each face.
    system = vstack([hstack([gx, -gy]), hstack([gy, gx])]).tocsc()
    centre = vertices.mean(axis=0)
    one = int(np.argmax(np.linalg.norm(vertices - centre, axis=1)))
    two = int(np.argmax(np.linalg.norm(vertices - vertices[one], axis=1)))
    pinned = np.array([one, two, n + one, n + two])
    values = np.array([0.0, np.linalg.norm(vertices[two] - vertices[one]), 0.0, 0.0])
    free = np.setdiff1d(np.arange(2 * n), pinned)
    part = system[:, free]
    found = np.empty(2 * n)
    found[pinned] = values
    found[free] = _solve((part.T @ part).tocsc(), -(part.T @ (system[:, pinned] @ values)))
    points = found.reshape(2, n).T
    flat_area = np.abs(np.linalg.det(_maps(points, faces, gradients))) @ areas
    return points * np.sqrt(areas.sum() / flat_area)


def _residual(points, faces, gradients, areas, held, lengths, weights) -> np.ndarray:
    """Strains of faces and held edges, weighted so that their sum of squares is the energy [m²]."""
    first, second = np.moveaxis(_maps(points, faces, gradients), 2, 0)
    strain = np.concatenate(
        [
            ((first**2).sum(axis=1) - 1) / 2,
            ((second**2).sum(axis=1) - 1) / 2,
            (first * second).sum(axis=1) / np.sqrt(2),
        ]
    )
    edge = points[held[:, 1]] - points[held[:, 0]]
    too_long = ((edge**2).sum(axis=1) / lengths**2 - 1) / 2
    return np.concatenate([np.tile(np.sqrt(areas), 3) * strain, weights * too_long])


def _slope(points, faces, gradients, areas, held, lengths, weights) -> csc_array:
    """Derivative of `_residual` by the coordinates, (n_residuals, 2 n_vertices)."""
    n_faces = len(faces)
    first, second = np.moveaxis(_maps(points, faces, gradients), 2, 0)
    root = np.sqrt(areas)[:, None, None]
    gx, gy = gradients[:, :, 0, None], gradients[:, :, 1, None]
    blocks = [
        root * gx * first[:, None],
        root * gy * second[:, None],
        root * (gx * second[:, None] + gy * first[:, None]) / np.sqrt(2),
    ]
    columns = 2 * faces[:, :, None] + np.arange(2)
    row = np.broadcast_to(np.arange(n_faces)[:, None, None], columns.shape)
    edge = points[held[:, 1]] - points[held[:, 0]]
    pull = (weights / lengths**2)[:, None] * edge
    rows = [k * n_faces + row.ravel() for k in range(3)]
    below = 3 * n_faces + np.repeat(np.arange(len(held)), 2)
    rows += [below, below]
    all_columns = [columns.ravel()] * 3 + [(2 * held[:, k, None] + np.arange(2)).ravel() for k in (1, 0)]
    values = [block.ravel() for block in blocks] + [pull.ravel(), -pull.ravel()]
    shape = (3 * n_faces + len(held), 2 * len(points))
    return csc_array(coo_array((np.concatenate(values), (np.concatenate(rows), np.concatenate(all_columns))), shape))
