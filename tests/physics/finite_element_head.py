"""Lead fields of a layered head by finite elements with the library scikit-fem: nothing shared with boundary elements.

The surfaces must have one set of faces (as those read along rays have): prisms between corresponding faces, each split
into three tetrahedra, fill the layers, so the finite elements solve the very same polyhedral head. Quadratic elements.
EEG by reciprocity: the lead field of an electrode is the gradient of the potential of a unit current sent in there and
taken out evenly over the scalp. MEG by Biot and Savart's law over the currents in the volume, the dipole's term and
σ∇V in every tetrahedron, where the boundary elements integrate over surfaces.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyamg
from scipy.sparse import csr_array
from scipy.sparse.linalg import cg
from skfem import Basis, BilinearForm, ElementTetP0, ElementTetP2, FacetBasis, LinearForm, MeshTet, asm
from skfem.helpers import dot, grad

INSIDE = (0.15, 0.3, 0.45, 0.58, 0.68, 0.76, 0.83, 0.89, 0.93, 0.965)  # shells within the brain, shares of the way out
BETWEEN = (1 / 3, 2 / 3)  # shells within skull and skin
MU0_OVER_4PI = 1e-7


@dataclass(frozen=True)
class FiniteElementHead:
    """surfaces: vertices (n, 3) of each, innermost first, over common faces; conductivities [S/m] inside each."""

    vertices: tuple
    faces: np.ndarray
    conductivities: tuple

    @cached_property
    def mesh(self):
        """The tetrahedra and the conductivity of each."""
        inner = self.vertices[0]
        n, centre = len(inner), inner.mean(axis=0)
        shells = [centre + share * (inner - centre) for share in INSIDE] + [inner]
        layers = [self.conductivities[0]] * (len(shells) - 1)
        for below, above, sigma in zip(self.vertices, self.vertices[1:], self.conductivities[1:], strict=False):
            shells += [below + share * (above - below) for share in (*BETWEEN, 1.0)]
            layers += [sigma] * (len(BETWEEN) + 1)
        a, b, c = np.sort(self.faces, axis=1).T  # one order of the columns cuts every prism's side the same way
        tets = [np.stack([np.zeros_like(a), 1 + a, 1 + b, 1 + c])]
        sigma = [np.full(len(a), self.conductivities[0])]
        for layer, value in enumerate(layers):
            low, high = 1 + layer * n, 1 + (layer + 1) * n
            tets += [
                np.stack([low + a, low + b, low + c, high + c]),
                np.stack([low + a, low + b, high + b, high + c]),
                np.stack([low + a, high + a, high + b, high + c]),
            ]
            sigma += [np.full(len(a), value)] * 3
        points = np.vstack([centre, *shells])
        return MeshTet(np.ascontiguousarray(points.T), np.concatenate(tets, axis=1)), np.concatenate(sigma)

    @cached_property
    def basis(self):
        return Basis(self.mesh[0], ElementTetP2())

    @cached_property
    def solver(self):
        """(stiffness, its preconditioner, how the mean over the scalp weighs the unknowns)."""
        mesh, sigma = self.mesh
        conductivity = self.basis.with_element(ElementTetP0()).interpolate(sigma)

        @BilinearForm
        def stiffness(u, v, w):
            return w.sigma * dot(grad(u), grad(v))

        @LinearForm
        def ones(v, w):
            return v

        matrix = asm(stiffness, self.basis, sigma=conductivity).tocsr()
        # Grounded at one unknown: the equations fix a potential up to a constant, and rounding made the iteration
        # stall. The loads sum to zero, so no current flows there.
        ground = csr_array(([matrix.diagonal().mean()], ([0], [0])), shape=matrix.shape)
        matrix = (matrix + ground).tocsr()
        mean = asm(ones, FacetBasis(mesh, ElementTetP2()))
        return matrix, pyamg.smoothed_aggregation_solver(matrix).aspreconditioner(), mean / mean.sum()

    def solve(self, load):
        """Potential of a load, with zero mean over the scalp."""
        matrix, preconditioner, mean = self.solver
        load = load - load.sum() * mean
        potential, failed = cg(matrix, load, rtol=1e-9, maxiter=2000, M=preconditioner)
        assert not failed
        return potential - mean @ potential

    def scalp_unknowns(self, numbers):
        """The unknowns at the numbered scalp nodes."""
        n = len(self.vertices[0])
        return self.basis.nodal_dofs[0, self.mesh[0].p.shape[1] - n + np.asarray(numbers)]

    def middles(self, elements):
        """A basis with one point in the middle of each of the elements, and those points (m, 3)."""
        middle = Basis(self.mesh[0], ElementTetP2(), elements=elements, quadrature=(np.full((3, 1), 0.25), np.ones(1)))
        return middle, np.asarray(middle.global_coordinates())[:, :, 0].T

    def electric(self, numbers, elements):
        """Lead field (n, m, 3) [V/(A·m)] of the numbered scalp nodes at the middles of the elements."""
        middle, _ = self.middles(elements)
        out = np.empty((len(numbers), len(elements), 3))
        for row, unknown in enumerate(self.scalp_unknowns(numbers)):
            load = np.zeros(self.basis.N)
            load[unknown] = 1.0
            out[row] = middle.interpolate(self.solve(load)).grad[:, :, 0].T
        return out

    def magnetic(self, points, axes, elements, moments):
        """Field (n, m) [T/(A·m)] along axes of dipoles in the middles of the elements."""
        _, places = self.middles(elements)
        mesh, sigma = self.mesh
        basis = Basis(mesh, ElementTetP2(), intorder=2)
        where = np.asarray(basis.global_coordinates()).reshape(3, -1).T
        out = np.empty((len(points), len(elements)))
        for column, (element, place, q) in enumerate(zip(elements, places, moments, strict=True)):
            middle, _ = self.middles(np.array([element]))
            load = np.zeros(self.basis.N)
            # weak form of a point dipole: q·∇ψ at its place
            for local in range(middle.Nbfun):
                unknown = self.basis.element_dofs[local, element]
                load[unknown] += q @ middle.basis[local][0].grad[:, 0, 0]
            current = -sigma[:, None] * basis.interpolate(self.solve(load)).grad * basis.dx
            out[:, column] = _biot_savart(points, axes, where, current.reshape(3, -1).T)
            out[:, column] += _biot_savart(points, axes, place[None], q[None])
        return out


def _biot_savart(points, axes, where, currents):
    """µ0/4π Σ j × (r - r')/|r - r'|³ along each axis (n,)."""
    out = np.empty(len(points))
    for row, (point, axis) in enumerate(zip(points, axes, strict=True)):
        apart = point - where
        weight = 1 / np.linalg.norm(apart, axis=1) ** 3
        out[row] = MU0_OVER_4PI * (axis @ (np.cross(currents, apart) * weight[:, None]).sum(axis=0))
    return out
