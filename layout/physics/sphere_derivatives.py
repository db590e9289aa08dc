"""How the sphere's lead fields change with the source position: closed forms for Sarvas and the layered series.

Both give d(L(r0) q)/dr0 with the moment q held fixed. Derived from the formulas in sarvas.py and layered_sphere.py.
"""

from __future__ import annotations

import numba
import numpy as np

from layout.errors import LayoutError
from layout.physics.layered_sphere import MAX_TERMS, degree_factors
from layout.physics.sarvas import MU0_OVER_4PI

TAIL = 1e-11  # of the series' largest possible value, left out


def magnetic_derivatives(points: np.ndarray, axes: np.ndarray, sources: np.ndarray, moments: np.ndarray) -> np.ndarray:
    """d(L q)/dr0 (n, m, 3) of the spherical magnetic lead field [T/m for moments in A·m].

    points (n, 3) [m], axes (n, 3) unit, sources (m, 3) [m], moments (m, 3) [A·m], all about the sphere's centre. With
    u = n × q, w = r × q and S = ∇F·n, L q = µ0/(4π) [r0·u/F - r0·w S/F²], whose gradient is taken term by term.
    """
    arrays = [np.ascontiguousarray(part, float).reshape(-1, 3) for part in (points, axes, sources, moments)]
    out = np.empty((len(arrays[0]), len(arrays[2]), 3))
    _fill_magnetic(*arrays, out)
    return out


def electric_derivatives(
    electrodes: np.ndarray, sources: np.ndarray, radii: np.ndarray, conductivities: np.ndarray, moments: np.ndarray
) -> np.ndarray:
    """d(V q)/dr0 (n, m, 3) of the layered sphere's potential [V/m for moments in A·m].

    electrodes (n, 3): only their direction ê counts; sources (m, 3) [m] inside radii[0]; moments (m, 3) [A·m]; all
    about the centre. The potential is q·∇G with G = 1/(4πR) Σ f_n (r0/R)^n P_n(c), so this is the Hessian of G times q.
    With P'_n - c P'_{n-1} = n P_{n-1} and its like, the Hessian of r0^n P_n(c) is, at the centre too,

        r0^(n-2) { P''_n ê ê^T - P''_{n-1} (ê r̂0^T + r̂0 ê^T) + P''_{n-2} r̂0 r̂0^T - P'_{n-1} I }.

    Raises LayoutError for a series that needs more than 131,072 terms.
    """
    electrodes = np.asarray(electrodes, float).reshape(-1, 3)
    sources, moments = (np.ascontiguousarray(part, float).reshape(-1, 3) for part in (sources, moments))
    units = np.ascontiguousarray(electrodes / np.linalg.norm(electrodes, axis=1, keepdims=True))
    out = np.empty((len(units), len(sources), 3))
    if out.size:
        outer = float(radii[-1])
        factors = _enough_factors(radii, conductivities, np.linalg.norm(sources, axis=1).max() / outer)
        _fill_electric(units, sources, outer, factors, moments, out)
    return out


def _enough_factors(radii: np.ndarray, conductivities: np.ndarray, x: float) -> np.ndarray:
    """Factors f_n until the tail of Σ n^4 f_n x^(n-2), which bounds the Hessian's series, is negligible."""
    n_terms = 64
    while n_terms <= MAX_TERMS:
        factors = degree_factors(radii, conductivities, n_terms)
        n = np.arange(1, n_terms + 1)
        terms = n**4 * factors * x ** np.maximum(n - 2.0, 0.0)
        ratio = terms[-1] / terms[-2] if terms[-2] > 0 else 0.0
        if ratio < 1 and terms[-1] / (1 - ratio) <= TAIL * terms.sum():
            return factors
        n_terms *= 2
    raise LayoutError(
        f"source position: too close to the outer surface for the series, radius {x:.6f} of the outer radius"
        f" needs more than {MAX_TERMS} terms"
    )


@numba.njit(parallel=True, cache=True)
def _fill_electric(units, sources, outer, factors, moments, out):
    for s in numba.prange(sources.shape[0]):
        r0, q = sources[s], moments[s]
        radius = np.sqrt(r0[0] ** 2 + r0[1] ** 2 + r0[2] ** 2)
        x = radius / outer
        ux, uy, uz = 0.0, 0.0, 1.0  # at the centre only n = 2 is left, which has no r̂0
        if radius > 0.0:
            ux, uy, uz = r0[0] / radius, r0[1] / radius, r0[2] / radius
        q_u = q[0] * ux + q[1] * uy + q[2] * uz
        scale = 1.0 / (4.0 * np.pi * outer**3)
        # the same for every electrode: how many terms count
        count, size, total = len(factors), 0.0, 0.0
        power = 1.0
        for n in range(2, len(factors) + 1):
            size = factors[n - 1] * power * float(n) ** 4
            total += size
            power *= x
            if n > 16 and size < 1e-14 * total:
                count = n
                break
        for e in range(units.shape[0]):
            ex, ey, ez = units[e, 0], units[e, 1], units[e, 2]
            c = min(1.0, max(-1.0, ex * ux + ey * uy + ez * uz))
            p_old, p = 1.0, c  # P_{n-2}, P_{n-1}
            slope = 1.0  # P'_{n-1}
            bend_old, bend = 0.0, 0.0  # P''_{n-2}, P''_{n-1}
            electrode, mixed, source, same = 0.0, 0.0, 0.0, 0.0
            power = 1.0
            for n in range(2, count + 1):
                weight = factors[n - 1] * power
                bend_new = c * bend + (n + 1) * slope
                electrode += weight * bend_new
                mixed += weight * bend
                source += weight * bend_old
                same += weight * slope
                p_new = ((2 * n - 1) * c * p - (n - 1) * p_old) / n
                slope = c * slope + n * p
                p_old, p = p, p_new
                bend_old, bend = bend, bend_new
                power *= x
            q_e = q[0] * ex + q[1] * ey + q[2] * ez
            along_e = scale * (electrode * q_e - mixed * q_u)
            along_u = scale * (source * q_u - mixed * q_e)
            along_q = -scale * same
            out[e, s, 0] = along_e * ex + along_u * ux + along_q * q[0]
            out[e, s, 1] = along_e * ey + along_u * uy + along_q * q[1]
            out[e, s, 2] = along_e * ez + along_u * uz + along_q * q[2]


@numba.njit(cache=True)
def _dot(a, b):
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


@numba.njit(cache=True)
def _cross(a, b):
    return a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]


@numba.njit(parallel=True, cache=True)
def _fill_magnetic(points, axes, sources, moments, out):
    for i in numba.prange(points.shape[0]):
        r_vec, n_vec = points[i], axes[i]
        r = np.sqrt(_dot(r_vec, r_vec))
        r_n = _dot(r_vec, n_vec)
        for s in range(sources.shape[0]):
            r0, q = sources[s], moments[s]
            u, w = _cross(n_vec, q), _cross(r_vec, q)
            a_vec = (r_vec[0] - r0[0], r_vec[1] - r0[1], r_vec[2] - r0[2])
            a = np.sqrt(_dot(a_vec, a_vec))
            a_r = _dot(a_vec, r_vec) / a
            r0_n, r0_u, r0_w = _dot(r0, n_vec), _dot(r0, u), _dot(r0, w)
            inner = r * a + r * r - _dot(r0, r_vec)
            f = a * inner
            slope = (a * a / r + a_r + 2 * a + 2 * r) * r_n - (a + 2 * r + a_r) * r0_n
            for k in range(3):
                da = -a_vec[k] / a
                df = da * inner + a * (r * da - r_vec[k])
                da_r = (-r_vec[k] - a_r * da) / a
                d_slope = (2 * a * da / r + da_r + 2 * da) * r_n - (da + da_r) * r0_n - (a + 2 * r + a_r) * n_vec[k]
                near = u[k] / f - r0_u * df / f**2
                far = w[k] * slope / f**2 + r0_w * (d_slope / f**2 - 2 * slope * df / f**3)
                out[i, s, k] = MU0_OVER_4PI * (near - far)
