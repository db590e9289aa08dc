"""Electric lead field of a sphere of 1 to 5 concentric isotropic layers, by its Legendre series.

With x = r0/R, c = cos of the angle between electrode and source, a dipole q in the innermost layer gives at
the outer surface (infinity reference, so zero surface mean)

    V = 1/(4 π R²) Σ_{n>=1} f_n x^(n-1) [ n q_r P_n(c) + (q_t · r̂) P_n'(c) ],

f_n = (2n+1)/(n σ) for one layer (Brody, Terry & Ideker 1973, IEEE TBME 20:141). For several layers f_n
follows from the boundary conditions (see `degree_factors`; the layered problem is that of de Munck & Peters
1993, IEEE TBME 40:1166). Their subtraction of an asymptotic closed form is not used: it takes about one power
of n off terms that fall as x^n, and x <= 0.88 for a source in a head with a skull, where 40 to 220 terms
reach 1e-9.
"""

from __future__ import annotations

import numba
import numpy as np

from layout.errors import LayoutError
from layout.units import MM

MAX_LAYERS = 5
MAX_TERMS = 1 << 17
SOURCE_BLOCK = 16  # sources that write next to each other
ELECTRODE_BLOCK = 256  # the recursion's arrays stay in the first-level cache


def electric_lead_field(
    electrodes: np.ndarray,
    sources: np.ndarray,
    radii: np.ndarray,
    conductivities: np.ndarray,
    *,
    moments: np.ndarray | None = None,
    tolerance: float = 1e-9,
) -> np.ndarray:
    """Potential at the electrodes of a unit dipole at each source, zero mean over the outer surface.

    electrodes (n, 3): only their direction counts, they lie on the outer radius; sources (m, 3) [m], inside
    radii[0]; both relative to the centre. radii (L,) [m] increasing, conductivities (L,) [S/m], innermost
    first, L from 1 to 5. Returns (n, m, 3) [V/(A·m)], or (n, m) [V] for the given moments (m, 3) [A·m] (unit
    moments: V/(A·m)).

    tolerance: the neglected tail of each source's series, relative to the largest potential that a radial
    dipole there causes anywhere on the surface. The tail is bounded with |P_n| <= 1 and sin·|P_n'| <= n
    (Bernstein).

    Raises LayoutError for layers that are not nested, a source outside the brain shell, an electrode at the
    centre, or a series that needs more than 131,072 terms.
    """
    radii, conductivities = _checked_layers(radii, conductivities)
    electrodes = np.asarray(electrodes, float).reshape(-1, 3)
    sources = np.ascontiguousarray(sources, float).reshape(-1, 3)
    distance = np.linalg.norm(electrodes, axis=1, keepdims=True)
    if not np.all(distance > 0):
        raise LayoutError("electrode position: must have a direction from the centre of the sphere, got the centre")
    depth_radius = np.linalg.norm(sources, axis=1)
    if not np.all(depth_radius < radii[0]):
        raise LayoutError(
            f"source position: must lie inside the brain shell of {radii[0] / MM:.2f} mm, "
            f"got radius {np.max(depth_radius) / MM:.2f} mm"
        )
    directions = np.ascontiguousarray((electrodes / distance).T)
    fixed = moments is not None
    q = np.ascontiguousarray(moments, float).reshape(-1, 3) if fixed else np.empty((0, 3))
    if fixed and q.shape != sources.shape:
        raise LayoutError(f"moments: must have one row per source ({len(sources)}), got {len(q)}")
    out = np.empty((len(electrodes), len(sources), 1 if fixed else 3))
    if out.size == 0:
        return out[:, :, 0] if fixed else out
    outer = radii[-1]
    factors, tail = _converged_factors(radii, conductivities, np.max(depth_radius) / outer, tolerance)
    _fill(directions, sources, outer, factors, tail, tolerance, q, fixed, out)
    return out[:, :, 0] if fixed else out


def degree_factors(radii: np.ndarray, conductivities: np.ndarray, n_terms: int) -> np.ndarray:
    """Factors f_n [m/S], n = 1..n_terms, of the layered sphere's series (see the module).

    With γ = -σ r V'/V (0 at the outer surface, continuous at interfaces), one goes inward through layer j,
    whose inner and outer radii have the ratio t, with T = t^(2n+1):
        α = ((n+1) - γ/σ_j)/(2n+1),  h = 1 - α (1-T),  γ <- (γ + n σ_j α (1-T))/h,
    where h t^-(n+1) is the potential's growth across the layer. In the innermost layer the r^-(n+1) part is
    the dipole's own, hence f_n = (2n+1)/((n σ_1 + γ) Π h). Only ratios of radii occur and T <= 1: nothing
    overflows at any degree.
    """
    radii = np.asarray(radii, float)
    conductivities = np.asarray(conductivities, float)
    n = np.arange(1.0, n_terms + 1.0)
    gamma = np.zeros(n_terms)
    growth = np.ones(n_terms)
    for j in range(len(radii) - 1, 0, -1):
        one_minus_t = -np.expm1((2 * n + 1) * np.log(radii[j - 1] / radii[j]))
        alpha = ((n + 1) - gamma / conductivities[j]) / (2 * n + 1)
        h = 1 - alpha * one_minus_t
        gamma = (gamma + n * conductivities[j] * alpha * one_minus_t) / h
        growth *= h
    return (2 * n + 1) / ((n * conductivities[0] + gamma) * growth)


def _checked_layers(radii: np.ndarray, conductivities: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    radii, conductivities = np.asarray(radii, float).ravel(), np.asarray(conductivities, float).ravel()
    if not 1 <= len(radii) <= MAX_LAYERS or len(radii) != len(conductivities):
        raise LayoutError(
            f"layers: need 1 to {MAX_LAYERS} radii and as many conductivities, "
            f"got {len(radii)} and {len(conductivities)}"
        )
    if not (radii[0] > 0 and np.all(np.diff(radii) > 0)):
        raise LayoutError(f"radii: must be positive and increase outward, got {(radii / MM).tolist()} mm")
    if not (np.all(conductivities > 0) and np.all(np.isfinite(conductivities))):
        raise LayoutError(f"conductivities: must be positive, got {conductivities.tolist()} S/m")
    return radii, conductivities


def _converged_factors(radii, conductivities, x_max: float, tolerance: float) -> tuple[np.ndarray, float]:
    """Enough factors for the outermost source, and the relative share of its series beyond them."""
    n_terms = 32
    while n_terms <= MAX_TERMS:
        factors = degree_factors(radii, conductivities, n_terms)
        n = np.arange(1, n_terms + 1)
        terms = n * factors * x_max ** (n - 1)
        total = terms.sum()
        ratio = terms[-1] / terms[-2] if terms[-1] > 0 else 0.0
        if ratio < 1 and terms[-1] * ratio / (1 - ratio) <= 0.01 * tolerance * total:
            return factors, terms[-1] * ratio / (1 - ratio) / total
        n_terms *= 2
    raise LayoutError(
        f"source position: too close to the outer surface for the series, "
        f"radius {x_max:.6f} of the outer radius needs more than {MAX_TERMS} terms"
    )


@numba.njit(cache=True)
def _weights_and_count(x, factors, beyond, tolerance, weights):
    """weights[n-1] = f_n x^(n-1); returns how many terms leave a tail under the tolerance."""
    power, total = 1.0, 0.0
    for k in range(len(factors)):
        weights[k] = factors[k] * power
        total += (k + 1) * weights[k]
        power *= x
    allowed = (tolerance - beyond) * total
    tail = 0.0
    count = len(factors)
    while count > 1:
        tail += count * weights[count - 1]
        if tail > allowed:
            break
        count -= 1
    return count


@numba.njit(parallel=True, cache=True)
def _fill(directions, sources, outer, factors, beyond, tolerance, moments, fixed, out):
    """Blocks of sources in parallel; within a block, electrodes run innermost so the recursion vectorises."""
    n_electrodes, n_sources = directions.shape[1], sources.shape[0]
    scale = 1.0 / (4.0 * np.pi * outer * outer)
    n_blocks = (n_sources + SOURCE_BLOCK - 1) // SOURCE_BLOCK
    for block in numba.prange(n_blocks):
        first = block * SOURCE_BLOCK
        size = min(SOURCE_BLOCK, n_sources - first)
        weights = np.empty((SOURCE_BLOCK, len(factors)))
        counts = np.empty(SOURCE_BLOCK, np.int64)
        units = np.empty((SOURCE_BLOCK, 3))
        for s in range(size):
            r0 = sources[first + s]
            radius = np.sqrt(r0[0] ** 2 + r0[1] ** 2 + r0[2] ** 2)
            # at the centre only n = 1 is left and its sum, f_1 r̂, does not depend on the direction taken for
            # r̂0
            if radius > 0.0:
                for axis in range(3):
                    units[s, axis] = r0[axis] / radius
            else:
                units[s, 0], units[s, 1], units[s, 2] = 0.0, 0.0, 1.0
            counts[s] = _weights_and_count(radius / outer, factors, beyond, tolerance, weights[s])
        c = np.empty(ELECTRODE_BLOCK)
        before, now = np.empty(ELECTRODE_BLOCK), np.empty(ELECTRODE_BLOCK)
        slope = np.empty(ELECTRODE_BLOCK)
        radial, tangential = np.empty(ELECTRODE_BLOCK), np.empty(ELECTRODE_BLOCK)
        for start in range(0, n_electrodes, ELECTRODE_BLOCK):
            width = min(ELECTRODE_BLOCK, n_electrodes - start)
            for s in range(size):
                ux, uy, uz = units[s, 0], units[s, 1], units[s, 2]
                w1 = weights[s, 0]
                for i in range(width):
                    e = start + i
                    cosine = directions[0, e] * ux + directions[1, e] * uy + directions[2, e] * uz
                    cosine = min(1.0, max(-1.0, cosine))
                    c[i] = cosine
                    before[i] = 1.0
                    now[i] = cosine
                    slope[i] = 1.0
                    radial[i] = w1 * cosine
                    tangential[i] = w1
                for n in range(2, counts[s] + 1):
                    w = weights[s, n - 1]
                    nw = n * w
                    up = (2.0 * n - 1.0) / n
                    down = (n - 1.0) / n
                    for i in range(width):
                        p = up * c[i] * now[i] - down * before[i]
                        d = c[i] * slope[i] + n * now[i]
                        before[i] = now[i]
                        now[i] = p
                        slope[i] = d
                        radial[i] += nw * p
                        tangential[i] += w * d
                if fixed:
                    qx, qy, qz = moments[first + s, 0], moments[first + s, 1], moments[first + s, 2]
                    q_r = qx * ux + qy * uy + qz * uz
                    # the tangential part first: subtracting c q_r from q·r̂ would lose digits near c = ±1
                    tx, ty, tz = qx - q_r * ux, qy - q_r * uy, qz - q_r * uz
                    for i in range(width):
                        e = start + i
                        q_t = tx * directions[0, e] + ty * directions[1, e] + tz * directions[2, e]
                        out[e, first + s, 0] = scale * (q_r * radial[i] + q_t * tangential[i])
                else:
                    for i in range(width):
                        e = start + i
                        along = radial[i] - c[i] * tangential[i]
                        out[e, first + s, 0] = scale * (along * ux + tangential[i] * directions[0, e])
                        out[e, first + s, 1] = scale * (along * uy + tangential[i] * directions[1, e])
                        out[e, first + s, 2] = scale * (along * uz + tangential[i] * directions[2, e])
