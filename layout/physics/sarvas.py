"""Magnetic field of a dipole in a spherically symmetric conductor (Sarvas 1987, Phys Med Biol 32:11).

    B = µ0/(4 π F²) [ F q × r0 - (q × r0 · r) ∇F ],  a = r - r0,  F = a (r a + r² - r0·r),
    ∇F = (a²/r + a·r/a + 2a + 2r) r - (a + 2r + a·r/a) r0.

Valid outside the conductor, whatever its radial conductivity profile; the radial part of q is silent.
"""

from __future__ import annotations

import numba
import numpy as np

from layout.errors import LayoutError
from layout.units import MM

MU0_OVER_4PI = 1e-7  # [T·m/A]
UNIT_TOLERANCE = 1e-6


def magnetic_lead_field(
    points: np.ndarray,
    axes: np.ndarray,
    sources: np.ndarray,
    *,
    moments: np.ndarray | None = None,
) -> np.ndarray:
    """Field component along each channel's axis of a unit dipole at each source.

    points (n, 3) [m] and unit axes (n, 3) of the channels; sources (m, 3) [m]; all relative to the sphere's
    centre. Returns (n, m, 3) [T/(A·m)]: n·B = q·µ0/(4π) [(r0 × n)/F - (r0 × r)(∇F·n)/F²]; or (n, m) [T] for
    the given moments (m, 3) [A·m] (unit moments: T/(A·m)).

    Raises LayoutError if a channel is not farther from the centre than every source, or an axis is not a unit
    vector.
    """
    points = np.ascontiguousarray(points, float).reshape(-1, 3)
    axes = np.ascontiguousarray(axes, float).reshape(-1, 3)
    sources = np.ascontiguousarray(sources, float).reshape(-1, 3)
    if axes.shape != points.shape:
        raise LayoutError(f"axes: must have one row per channel ({len(points)}), got {len(axes)}")
    fixed = moments is not None
    q = np.ascontiguousarray(moments, float).reshape(-1, 3) if fixed else np.empty((0, 3))
    if fixed and q.shape != sources.shape:
        raise LayoutError(f"moments: must have one row per source ({len(sources)}), got {len(q)}")
    out = np.empty((len(points), len(sources), 1 if fixed else 3))
    if out.size:
        lengths = np.linalg.norm(axes, axis=1)
        if not np.all(np.abs(lengths - 1) <= UNIT_TOLERANCE):
            worst = lengths[np.argmax(np.abs(lengths - 1))]
            raise LayoutError(f"axis: must be a unit vector, got length {worst:.6g}")
        nearest, farthest = np.linalg.norm(points, axis=1).min(), np.linalg.norm(sources, axis=1).max()
        if not nearest > farthest:
            raise LayoutError(
                f"magnetometer position: must be farther from the sphere's centre than every source "
                f"({farthest / MM:.2f} mm), got {nearest / MM:.2f} mm"
            )
        _fill(points, axes, sources, q, fixed, out)
    return out[:, :, 0] if fixed else out


@numba.njit(parallel=True, cache=True)
def _fill(points, axes, sources, moments, fixed, out):
    for i in numba.prange(points.shape[0]):
        rx, ry, rz = points[i, 0], points[i, 1], points[i, 2]
        nx, ny, nz = axes[i, 0], axes[i, 1], axes[i, 2]
        r = np.sqrt(rx * rx + ry * ry + rz * rz)
        r_n = rx * nx + ry * ny + rz * nz
        for s in range(sources.shape[0]):
            x, y, z = sources[s, 0], sources[s, 1], sources[s, 2]
            ax, ay, az = rx - x, ry - y, rz - z
            a = np.sqrt(ax * ax + ay * ay + az * az)
            a_r = (ax * rx + ay * ry + az * rz) / a
            f = a * (r * a + r * r - (x * rx + y * ry + z * rz))
            grad_n = (a * a / r + a_r + 2.0 * a + 2.0 * r) * r_n
            grad_n -= (a + 2.0 * r + a_r) * (x * nx + y * ny + z * nz)
            near = MU0_OVER_4PI / f
            # r0 × n and r0 × r share r0: one cross product with v = n/F - r (∇F·n)/F²
            far = near * grad_n / f
            vx, vy, vz = near * nx - far * rx, near * ny - far * ry, near * nz - far * rz
            lx, ly, lz = y * vz - z * vy, z * vx - x * vz, x * vy - y * vx
            if fixed:
                out[i, s, 0] = moments[s, 0] * lx + moments[s, 1] * ly + moments[s, 2] * lz
            else:
                out[i, s, 0], out[i, s, 1], out[i, s, 2] = lx, ly, lz
