"""The linear systems of the boundary elements: assembled, split at the skull, solved.

With σ⁻ inside and σ⁺ outside of surface l, V0 the dipole's infinite-medium potential times the conductivity around it
and D the double layer (boundary_integrals.py), the potential on surface k obeys (Geselowitz 1967, Biophys J 7:1;
Barnard et al. 1967, Biophys J 7:443; citations from memory, equation derived from Green's identity)

    ½(σ_k⁻ + σ_k⁺) V = V0 + Σ_l (σ_l⁻ - σ_l⁺) D_kl V,

tested and expanded with the meshes' linear shape functions (Galerkin). The skull blocks most of the current, so the
potential is split (isolated-problem approach: Hämäläinen & Sarvas 1989, IEEE TBME 36:165; Meijs et al. 1989, IEEE TBME
36:1038; Galerkin form as in Stenroos & Sarvas 2012, Phys Med Biol 57:3517; from memory, derived here): w, the brain
alone, solves σ_1(½ - D_11) w = V0, and the rest v, driven by

    -σ_2 (½ + D_11) w on the inner skull, -σ_2 D_k1 w on the others,

is of the size of what passes the skull, so its relative error stays small. Only the dipole terms on the inner skull are
needed. Both systems leave a constant free: a rank-one term makes the area-weighted mean zero.
"""

from __future__ import annotations

import itertools
from typing import NamedTuple

import numpy as np
from scipy.linalg import lu_factor, lu_solve
from scipy.sparse import csr_array

from layout.physics.boundary_integrals import Elements, area_shares, double_layer, mass_matrix

VERSION = 1  # of the arrays below; part of the cache's key


class SolvedSystem(NamedTuple):
    """potentials (n_nodes, n_inner): V on all surfaces' nodes from the dipole terms on the innermost surface's nodes.

    factors (n_nodes, n_nodes) and pivots (n_nodes,): the LU factors of the unsplit system, for sources elsewhere.
    """

    potentials: np.ndarray
    factors: np.ndarray
    pivots: np.ndarray


def solve_system(elements: tuple[Elements, ...], conductivities: np.ndarray) -> SolvedSystem:
    """Assembles and solves both systems for nested surfaces, innermost first, with conductivities [S/m] inside each.

    Time: (nodes)² with a large factor (integrals of every pair of triangles), then (nodes)³ with a small one.
    """
    sigma = np.asarray(conductivities, float)
    beyond = np.append(sigma[1:], 0.0)
    starts = node_starts(elements)
    parts = [slice(*pair) for pair in itertools.pairwise(starts)]
    inner = parts[0]
    masses = [mass_matrix(part) for part in elements]
    system, coupling = np.zeros((starts[-1],) * 2), np.zeros((starts[-1], starts[1]))
    for k, tested in enumerate(elements):
        system[parts[k], parts[k]] += 0.5 * (sigma[k] + beyond[k]) * masses[k].toarray()
        for j, source in enumerate(elements):
            seen = 0.5 if j == k else float(j > k)  # of the full solid angle 4π
            layer = _with_row_sums(double_layer(tested, source), seen * _sums(masses[k]), source)
            system[parts[k], parts[j]] -= (sigma[j] - beyond[j]) * layer
            if j == 0:
                coupling[parts[k]] = -beyond[0] * layer
                if k == 0:
                    isolated = sigma[0] * (0.5 * masses[0].toarray() - layer)
    coupling[inner] -= 0.5 * beyond[0] * masses[0].toarray()
    isolated += sigma[0] * _sums(masses[0])[:, None] * area_shares(elements[0])
    isolated = np.linalg.inv(isolated)
    system[:, parts[-1]] += (sigma.max() * np.concatenate([_sums(mass) for mass in masses]))[:, None] * area_shares(
        elements[-1]
    )
    factors, pivots = lu_factor(system, overwrite_a=True, check_finite=False)
    if len(elements) == 1:  # the brain alone is all there is
        return SolvedSystem(isolated, factors, pivots)
    potentials = lu_solve((factors, pivots), coupling @ isolated, overwrite_b=True, check_finite=False)
    potentials[inner] += isolated
    return SolvedSystem(potentials, factors, pivots)


def node_starts(elements: tuple[Elements, ...]) -> np.ndarray:
    """Where each surface's nodes begin in the vector of all nodes; the last entry is their number."""
    return np.cumsum([0, *(len(part.vertices) for part in elements)])


def _sums(mass: csr_array) -> np.ndarray:
    return mass @ np.ones(mass.shape[1])


def _with_row_sums(layer: np.ndarray, sums: np.ndarray, source: Elements) -> np.ndarray:
    """Gives back to each row the exact solid angle of a closed surface, which quadrature misses by some 1e-5 of it.

    A constant potential then stays an exact null vector of the system.
    """
    layer += (sums - layer.sum(axis=1))[:, None] * area_shares(source)
    return layer
