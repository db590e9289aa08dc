"""Closed integrals over flat triangles with a linear function on them, the bricks of the boundary elements.

For a triangle with unit normal n and area A seen from a point, y_i its corners relative to the point, R_i their
distances; edge k runs from corner k to k+1, of length L_k, direction t_k and outward normal m_k = t_k × n in the plane;
d = y·n is the height of the plane, h_k = y_k·m_k the distance of the point's foot from edge k. Then

    γ_k = ∫ dl/R over edge k     = ln[(R_k + R_k+1 + L_k)/(R_k + R_k+1 - L_k)]
    Ω   = ∫ y·n/R³ dS            = 2 atan2(2 A d, R1R2R3 + (y1·y2)R3 + (y1·y3)R2 + (y2·y3)R1)
    I   = ∫ dS/R                 = Σ h_k γ_k - d Ω
    W_j = ∫ ψ_j y·n/R³ dS        = [ h_j+1 L_j+1 Ω + d L_j+1 m_j+1·Σ_k m_k γ_k ]/(2A)
    S_j = ∫ ψ_j y/R³ dS          = n W_j - Σ_k m_k ∫ ψ_j dl/R - I m_j+1 L_j+1/(2A)

(Ω: van Oosterom & Strackee 1983, IEEE TBME 30:125; W: de Munck 1992, IEEE TBME 39:986, from memory, derived here by
Gauss's theorem in the plane, as are I and S.)
"""

from __future__ import annotations

from typing import NamedTuple

import numba
import numpy as np
from scipy.sparse import coo_array, csr_array

from layout.anatomy.head import Surface
from layout.anatomy.mesh_graph import face_vectors

OVER_4PI = 1 / (4 * np.pi)
TRIANGLES_AT_ONCE = 256

# Quadrature on a triangle, barycentric coordinates and weights (sum 1): degree 2 with 3 points for triangles apart,
# degree 6 with 12 points for close ones (Dunavant 1985, Int J Numer Meth Eng 21:1129; from memory, tested for degree).
APART = np.array([[2 / 3, 1 / 6, 1 / 6], [1 / 6, 2 / 3, 1 / 6], [1 / 6, 1 / 6, 2 / 3]])
APART_WEIGHTS = np.full(3, 1 / 3)
CLOSE_RATIO = 2.0  # distance of the centres over the sum of the triangles' radii, up to which they are close


def _orbit(*parts: float) -> list[tuple[float, float, float]]:
    a, b, c = parts
    return sorted({(a, b, c), (b, c, a), (c, a, b), (a, c, b), (c, b, a), (b, a, c)})


_A, _B = 0.063089014491502, 0.249286745170910
_C, _D = 0.053145049844817, 0.310352451033784
CLOSE = np.array(_orbit(_A, _A, 1 - 2 * _A) + _orbit(_B, _B, 1 - 2 * _B) + _orbit(_C, _D, 1 - _C - _D))
CLOSE_WEIGHTS = np.repeat([0.050844906370207, 0.116786275726379, 0.082851075618374], [3, 3, 6])


class Elements(NamedTuple):
    """A surface as the kernels want it: vertices (n, 3) [m], faces (f, 3), their normals (f, 3), areas (f,) [m²],
    lengths (f, 3) [m] and outward normals (f, 3, 3) of their edges; ends (e, 2) of each edge and edges (f, 3) of
    each face.
    """

    vertices: np.ndarray
    faces: np.ndarray
    normals: np.ndarray
    areas: np.ndarray
    lengths: np.ndarray
    outward: np.ndarray
    ends: np.ndarray
    edges: np.ndarray


def elements_of(surface: Surface) -> Elements:
    """The surface with what the kernels need of each face and edge."""
    vertices = np.ascontiguousarray(surface.vertices, float)
    faces = np.ascontiguousarray(surface.faces, np.int64)
    normals, areas = face_vectors(Surface(vertices, faces))
    along = vertices[np.roll(faces, -1, axis=1)] - vertices[faces]
    lengths = np.linalg.norm(along, axis=2)
    outward = np.cross(along / lengths[:, :, None], normals[:, None])
    pairs = np.sort(np.stack([faces, np.roll(faces, -1, axis=1)], axis=2), axis=2).reshape(-1, 2)
    ends, number = np.unique(pairs, axis=0, return_inverse=True)
    return Elements(vertices, faces, normals, areas, lengths, outward, ends, number.reshape(-1, 3))


def mass_matrix(elements: Elements) -> csr_array:
    """∫ ψ_i ψ_j dS (n, n) [m²], per face A/6 on the diagonal and A/12 off it."""
    values = elements.areas[:, None, None] * (np.ones((3, 3)) + np.eye(3)) / 12
    rows, columns = np.repeat(elements.faces, 3, axis=1), np.tile(elements.faces, (1, 3))
    n = len(elements.vertices)
    return coo_array((values.ravel(), (rows.ravel(), columns.ravel())), shape=(n, n)).tocsr()


def area_shares(elements: Elements) -> np.ndarray:
    """Each node's share (n,) of the surface's area; they sum to 1."""
    shares = np.bincount(elements.faces.ravel(), np.repeat(elements.areas, 3), len(elements.vertices))
    return shares / shares.sum()


def double_layer(tested: Elements, elements: Elements) -> np.ndarray:
    """D (n tested, n) [m²]: 1/(4π) ∫ ψ_i(r) ∫ ψ_j(r') dΩ_r(r') dS(r), by inner closed integrals and outer quadrature.

    Outer points: 3 per triangle, 12 for close triangles. A triangle does not see itself.
    """
    same = tested is elements
    out = np.zeros((len(tested.vertices), len(elements.vertices)))
    radii, centres = _circles(tested)
    other_radii, other_centres = _circles(elements)
    for first in range(0, len(tested.faces), TRIANGLES_AT_ONCE):
        faces = tested.faces[first : first + TRIANGLES_AT_ONCE]
        rows = np.zeros((len(faces), 3, len(elements.vertices)))
        block = slice(first, first + len(faces))
        corners = tested.vertices[faces]
        _double_layer_rows(
            corners, tested.areas[block], centres[block], radii[block], first if same else -len(elements.faces),
            *elements, other_centres, other_radii, rows,
        )  # fmt: skip
        _add_rows(rows, faces, out)
    return out


def single_layer(points: np.ndarray, elements: Elements) -> np.ndarray:
    """∫ dS/|r - r'| (n_points, n_faces) [m] over each face from each of the points (n, 3) [m]."""
    points = np.ascontiguousarray(points, float).reshape(-1, 3)
    out = np.empty((len(points), len(elements.faces)))
    _single_layer(points, *elements, out)
    return out


def dipole_terms(sources: np.ndarray, elements: Elements) -> np.ndarray:
    """b (m, n_vertices, 3): 1/(4π) ∫ ψ_i (r - r0)/|r - r0|³ dS for each source r0 (m, 3) [m], exact at any distance.

    Times the moment, this is what a dipole's infinite-medium potential (times the conductivity) gives each shape
    function.
    """
    sources = np.ascontiguousarray(sources, float).reshape(-1, 3)
    out = np.zeros((len(sources), len(elements.vertices), 3))
    _dipole_terms(sources, *elements, out)
    return out


def solid_angles(points: np.ndarray, elements: Elements) -> np.ndarray:
    """Solid angle (n_points,) of the whole surface: 4π inside a closed one, 0 outside."""
    points = np.ascontiguousarray(points, float).reshape(-1, 3)
    out = np.empty(len(points))
    _solid_angles(points, *elements, out)
    return out


def _circles(elements: Elements) -> tuple[np.ndarray, np.ndarray]:
    corners = elements.vertices[elements.faces]
    centres = corners.mean(axis=1)
    return np.linalg.norm(corners - centres[:, None], axis=2).max(axis=1), centres


@numba.njit(cache=True)
def _distances(point, vertices, ends, lengths_of_edges, away, far, gamma):
    """Corner vectors, their lengths and γ of every edge, shared by the faces around them."""
    for v in range(vertices.shape[0]):
        x, y, z = vertices[v, 0] - point[0], vertices[v, 1] - point[1], vertices[v, 2] - point[2]
        away[v, 0], away[v, 1], away[v, 2] = x, y, z
        far[v] = np.sqrt(x * x + y * y + z * z)
    for e in range(ends.shape[0]):
        both = far[ends[e, 0]] + far[ends[e, 1]]
        length = lengths_of_edges[e]
        # a point on the edge itself: its γ is multiplied by a distance of zero
        gamma[e] = np.log((both + length) / max(both - length, 1e-16 * length))


@numba.njit(cache=True)
def _height(away, normals, i, f):
    return away[i, 0] * normals[f, 0] + away[i, 1] * normals[f, 1] + away[i, 2] * normals[f, 2]


@numba.njit(cache=True)
def _solid_angle(away, far, i, j, k, twice_area_height):
    ab = away[i, 0] * away[j, 0] + away[i, 1] * away[j, 1] + away[i, 2] * away[j, 2]
    bc = away[j, 0] * away[k, 0] + away[j, 1] * away[k, 1] + away[j, 2] * away[k, 2]
    ca = away[k, 0] * away[i, 0] + away[k, 1] * away[i, 1] + away[k, 2] * away[i, 2]
    return 2.0 * np.arctan2(twice_area_height, far[i] * far[j] * far[k] + ab * far[k] + bc * far[i] + ca * far[j])


@numba.njit(cache=True)
def _linear_angles(f, i, j, k, away, far, gamma, normals, areas, lengths, outward, edges):
    """W_j of the three corners i, j, k of face f. Whole arrays and numbers: slices would be counted references."""
    d = _height(away, normals, i, f)
    omega = _solid_angle(away, far, i, j, k, 2.0 * areas[f] * d)
    g0, g1, g2 = gamma[edges[f, 0]], gamma[edges[f, 1]], gamma[edges[f, 2]]
    ax, ay, az = outward[f, 0, 0], outward[f, 0, 1], outward[f, 0, 2]
    bx, by, bz = outward[f, 1, 0], outward[f, 1, 1], outward[f, 1, 2]
    cx, cy, cz = outward[f, 2, 0], outward[f, 2, 1], outward[f, 2, 2]
    h0 = away[i, 0] * ax + away[i, 1] * ay + away[i, 2] * az
    h1 = away[j, 0] * bx + away[j, 1] * by + away[j, 2] * bz
    h2 = away[k, 0] * cx + away[k, 1] * cy + away[k, 2] * cz
    sx, sy, sz = g0 * ax + g1 * bx + g2 * cx, g0 * ay + g1 * by + g2 * cy, g0 * az + g1 * bz + g2 * cz
    over = 0.5 / areas[f]
    return (
        over * lengths[f, 1] * (h1 * omega + d * (bx * sx + by * sy + bz * sz)),
        over * lengths[f, 2] * (h2 * omega + d * (cx * sx + cy * sy + cz * sz)),
        over * lengths[f, 0] * (h0 * omega + d * (ax * sx + ay * sy + az * sz)),
    )


@numba.njit(cache=True)
def _edge_lengths(vertices, ends):
    out = np.empty(ends.shape[0])
    for e in range(ends.shape[0]):
        square = 0.0
        for axis in range(3):
            square += (vertices[ends[e, 0], axis] - vertices[ends[e, 1], axis]) ** 2
        out[e] = np.sqrt(square)
    return out


@numba.njit(cache=True)
def _is_close(centre, radius, other, other_radius):
    square = (centre[0] - other[0]) ** 2 + (centre[1] - other[1]) ** 2 + (centre[2] - other[2]) ** 2
    return square < (CLOSE_RATIO * (radius + other_radius)) ** 2


@numba.njit(parallel=True, cache=True)
def _double_layer_rows(
    tested, tested_areas, tested_centres, tested_radii, own,
    vertices, faces, normals, areas, lengths, outward, ends, edges, centres, radii, rows,
):  # fmt: skip
    edge_lengths = _edge_lengths(vertices, ends)
    for t in numba.prange(tested.shape[0]):
        away, far = np.empty((vertices.shape[0], 3)), np.empty(vertices.shape[0])
        gamma = np.empty(ends.shape[0])
        close = np.empty(faces.shape[0], np.bool_)
        for f in range(faces.shape[0]):
            close[f] = _is_close(tested_centres[t], tested_radii[t], centres[f], radii[f])
        point = np.empty(3)
        for rule in range(2):
            shares = APART if rule == 0 else CLOSE
            weights = APART_WEIGHTS if rule == 0 else CLOSE_WEIGHTS
            for g in range(shares.shape[0]):
                for axis in range(3):
                    point[axis] = 0.0
                    for a in range(3):
                        point[axis] += shares[g, a] * tested[t, a, axis]
                if rule == 0:
                    _distances(point, vertices, ends, edge_lengths, away, far, gamma)
                weight = weights[g] * tested_areas[t] * OVER_4PI
                for f in range(faces.shape[0]):
                    if close[f] != (rule == 1) or f == own + t:
                        continue
                    i, j, k = faces[f, 0], faces[f, 1], faces[f, 2]
                    if rule == 1:
                        for corner in range(3):
                            v = faces[f, corner]
                            for axis in range(3):
                                away[v, axis] = vertices[v, axis] - point[axis]
                            far[v] = np.sqrt(away[v, 0] ** 2 + away[v, 1] ** 2 + away[v, 2] ** 2)
                        for side in range(3):
                            e = edges[f, side]
                            both = far[ends[e, 0]] + far[ends[e, 1]]
                            length = edge_lengths[e]
                            gamma[e] = np.log((both + length) / max(both - length, 1e-16 * length))
                    w0, w1, w2 = _linear_angles(f, i, j, k, away, far, gamma, normals, areas, lengths, outward, edges)
                    for a in range(3):
                        share = weight * shares[g, a]
                        rows[t, a, i] += share * w0
                        rows[t, a, j] += share * w1
                        rows[t, a, k] += share * w2


@numba.njit(parallel=True, cache=True)
def _add_rows(rows, faces, out):
    n_parts = 8
    width = (out.shape[1] + n_parts - 1) // n_parts
    for part in numba.prange(n_parts):
        first, last = part * width, min((part + 1) * width, out.shape[1])
        for t in range(rows.shape[0]):
            for a in range(3):
                v = faces[t, a]
                for j in range(first, last):
                    out[v, j] += rows[t, a, j]


@numba.njit(cache=True)
def _single(f, i, j, k, away, far, gamma, normals, areas, outward, edges):
    """I of face f with corners i, j, k."""
    d = _height(away, normals, i, f)
    total = -d * _solid_angle(away, far, i, j, k, 2.0 * areas[f] * d)
    for side in range(3):
        v = i if side == 0 else (j if side == 1 else k)
        h = away[v, 0] * outward[f, side, 0] + away[v, 1] * outward[f, side, 1] + away[v, 2] * outward[f, side, 2]
        total += h * gamma[edges[f, side]]
    return total


@numba.njit(parallel=True, cache=True)
def _single_layer(points, vertices, faces, normals, areas, lengths, outward, ends, edges, out):
    edge_lengths = _edge_lengths(vertices, ends)
    for p in numba.prange(points.shape[0]):
        away, far = np.empty((vertices.shape[0], 3)), np.empty(vertices.shape[0])
        gamma = np.empty(ends.shape[0])
        _distances(points[p], vertices, ends, edge_lengths, away, far, gamma)
        for f in range(faces.shape[0]):
            i, j, k = faces[f, 0], faces[f, 1], faces[f, 2]
            out[p, f] = _single(f, i, j, k, away, far, gamma, normals, areas, outward, edges)


@numba.njit(parallel=True, cache=True)
def _solid_angles(points, vertices, faces, normals, areas, lengths, outward, ends, edges, out):
    for p in numba.prange(points.shape[0]):
        total = 0.0
        away, far = np.empty((3, 3)), np.empty(3)
        for f in range(faces.shape[0]):
            for corner in range(3):
                for axis in range(3):
                    away[corner, axis] = vertices[faces[f, corner], axis] - points[p, axis]
                far[corner] = np.sqrt(away[corner, 0] ** 2 + away[corner, 1] ** 2 + away[corner, 2] ** 2)
            total += _solid_angle(away, far, 0, 1, 2, 2.0 * areas[f] * _height(away, normals, 0, f))
        out[p] = total


@numba.njit(parallel=True, cache=True)
def _dipole_terms(sources, vertices, faces, normals, areas, lengths, outward, ends, edges, out):
    edge_lengths = _edge_lengths(vertices, ends)
    for s in numba.prange(sources.shape[0]):
        away, far = np.empty((vertices.shape[0], 3)), np.empty(vertices.shape[0])
        gamma, toward = np.empty(ends.shape[0]), np.empty(ends.shape[0])
        _distances(sources[s], vertices, ends, edge_lengths, away, far, gamma)
        for e in range(ends.shape[0]):  # with t running from 0 to 1 along the edge: ∫ t dl/R
            p, q, length = ends[e, 0], ends[e, 1], edge_lengths[e]
            start = 0.0
            for axis in range(3):
                start += away[p, axis] * (away[q, axis] - away[p, axis])
            toward[e] = (far[q] - far[p] - start / length * gamma[e]) / length
        for f in range(faces.shape[0]):
            # All of a face in one place and in numbers: its solid angle and its edges are wanted twice, and this loop
            # is most of the time of every lead field.
            i, j, k = faces[f, 0], faces[f, 1], faces[f, 2]
            d = _height(away, normals, i, f)
            omega = _solid_angle(away, far, i, j, k, 2.0 * areas[f] * d)
            g0, g1, g2 = gamma[edges[f, 0]], gamma[edges[f, 1]], gamma[edges[f, 2]]
            ax, ay, az = outward[f, 0, 0], outward[f, 0, 1], outward[f, 0, 2]
            bx, by, bz = outward[f, 1, 0], outward[f, 1, 1], outward[f, 1, 2]
            cx, cy, cz = outward[f, 2, 0], outward[f, 2, 1], outward[f, 2, 2]
            h0 = away[i, 0] * ax + away[i, 1] * ay + away[i, 2] * az
            h1 = away[j, 0] * bx + away[j, 1] * by + away[j, 2] * bz
            h2 = away[k, 0] * cx + away[k, 1] * cy + away[k, 2] * cz
            single = h0 * g0 + h1 * g1 + h2 * g2 - d * omega
            sx, sy, sz = g0 * ax + g1 * bx + g2 * cx, g0 * ay + g1 * by + g2 * cy, g0 * az + g1 * bz + g2 * cz
            over = 0.5 / areas[f]
            m0, m1, m2 = over * lengths[f, 0], over * lengths[f, 1], over * lengths[f, 2]
            w0 = m1 * (h1 * omega + d * (bx * sx + by * sy + bz * sz))
            w1 = m2 * (h2 * omega + d * (cx * sx + cy * sy + cz * sz))
            w2 = m0 * (h0 * omega + d * (ax * sx + ay * sy + az * sz))
            t0, t1, t2 = toward[edges[f, 0]], toward[edges[f, 1]], toward[edges[f, 2]]
            if ends[edges[f, 0], 0] != i:
                t0 = g0 - t0
            if ends[edges[f, 1], 0] != j:
                t1 = g1 - t1
            if ends[edges[f, 2], 0] != k:
                t2 = g2 - t2
            nx, ny, nz = normals[f, 0], normals[f, 1], normals[f, 2]
            out[s, i, 0] += OVER_4PI * (nx * w0 - ax * (g0 - t0) - cx * t2 - bx * single * m1)
            out[s, i, 1] += OVER_4PI * (ny * w0 - ay * (g0 - t0) - cy * t2 - by * single * m1)
            out[s, i, 2] += OVER_4PI * (nz * w0 - az * (g0 - t0) - cz * t2 - bz * single * m1)
            out[s, j, 0] += OVER_4PI * (nx * w1 - bx * (g1 - t1) - ax * t0 - cx * single * m2)
            out[s, j, 1] += OVER_4PI * (ny * w1 - by * (g1 - t1) - ay * t0 - cy * single * m2)
            out[s, j, 2] += OVER_4PI * (nz * w1 - bz * (g1 - t1) - az * t0 - cz * single * m2)
            out[s, k, 0] += OVER_4PI * (nx * w2 - cx * (g2 - t2) - bx * t1 - ax * single * m0)
            out[s, k, 1] += OVER_4PI * (ny * w2 - cy * (g2 - t2) - by * t1 - ay * single * m0)
            out[s, k, 2] += OVER_4PI * (nz * w2 - cz * (g2 - t2) - bz * t1 - az * single * m0)
