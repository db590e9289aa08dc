"""How the lead field changes as a source moves: what a localisation error is made of.

For the quick sphere model the derivative is taken with respect to the source's place in the head, through the map onto
the spheres, in closed form; in boundary elements by differences of the dipole terms.
"""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head, Surface
from layout.anatomy.mesh_graph import face_vectors
from layout.physics.boundary_cortex import BoundaryCortex
from layout.physics.channels import Channels, CortexModel
from layout.physics.differences import LeadFieldDerivatives
from layout.physics.nearest_point import NearestPoints, nearest_on_surface
from layout.physics.sphere_derivatives import electric_derivatives, magnetic_derivatives
from layout.physics.sphere_model import SphereModel

LEAST_FOCUS = 0.25  # 1 - depth x curvature is held here: a source at a centre of curvature has no one nearest point


def lead_field_derivatives(
    channels: Channels, cortex: CortexModel, members: np.ndarray, moments: np.ndarray
) -> LeadFieldDerivatives:
    """Lead field and its derivative at the numbered sources (m,) of the cortex, moments (m, 3) [A·m].

    With x(r) the source's place on the spheres and R(r) its rotation, L q = L_sphere(x) R q, so that
    d(L q)/dr = [d(L_sphere q')/dx]_{q' = R q} dx/dr + L_sphere d(R q)/dr. The inner skull's curvature, which turns
    R, is that of the mesh's vertex normals: the derivative of the smooth surface that the mesh stands for, without the
    small jumps of the nearest point from facet to facet.
    """
    moments = np.asarray(moments, float).reshape(-1, 3)
    if isinstance(cortex, BoundaryCortex):
        points = channels.points
        found = cortex.derivatives(points.positions, points.axes, points.is_electrode, members, moments)
        return LeadFieldDerivatives(channels.combine(found.gain), channels.combine(found.slopes))
    sphere, head = cortex.sphere, cortex.head
    sources = cortex.sources.some(members, free=True)
    gain = channels.lead_field(cortex, members, free=True).gain
    turned = np.einsum("mij,mj->mi", sources.rotations, moments)
    points = channels.on_spheres(sphere, head)
    electrodes, coils = points.electrodes - sphere.centre, points.coils - sphere.centre
    centred = sources.positions - sphere.centre
    slopes = np.empty((len(points.is_electrode), len(moments), 3))
    slopes[points.is_electrode] = electric_derivatives(electrodes, centred, sphere.radii, sphere.conductivities, turned)
    slopes[~points.is_electrode] = magnetic_derivatives(coils, points.axes, centred, turned)
    slopes = channels.combine(slopes)
    if head.sphere is None:
        placed, turning = _map_derivatives(sphere, head, sources.given, sources.held, moments)
        # the gain is for head moments: L_sphere = gain R^T
        turning = np.einsum("mji,mjk->mik", sources.rotations, turning)
        slopes = np.einsum("nmj,mjk->nmk", slopes, placed) + np.einsum("nmj,mjk->nmk", gain, turning)
    return LeadFieldDerivatives(gain, slopes)


def _map_derivatives(
    sphere: SphereModel, head: Head, given: np.ndarray, held: np.ndarray, moments: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """dx/dr and d(R q)/dr, each (m, 3, 3), of `sphere_model.map_sources` at the given head positions (m, 3) [m].

    x = c + ρ u with u = (r - c)/|r - c| and ρ = inner skull radius - depth, whose gradient is the skull's normal n
    (nothing where the source is held under the brain's radius). R is the smallest rotation from n to u:
    R q = q + w × q + w × (w × q)/(1 + n·u), w = n × u (Rodrigues).
    """
    identity = np.eye(3)
    near = nearest_on_surface(head.inner_skull, given)
    n = near.normals
    away = given - sphere.centre
    distance = np.linalg.norm(away, axis=1)[:, None, None]
    u = away / distance[:, :, 0]
    du = (identity - u[:, :, None] * u[:, None, :]) / distance
    radius = sphere.inner_skull_radius - near.inside_depth
    radius[held] = sphere.brain_radius
    outward = np.where(held[:, None], 0.0, n)
    placed = u[:, :, None] * outward[:, None, :] + radius[:, None, None] * du
    dn = _normal_derivatives(head.inner_skull, near)
    # the derivative along each of the three directions, on the last axis
    w = np.cross(n, u)[:, :, None]
    q = moments[:, :, None]
    k = 1 / (1 + np.einsum("mi,mi->m", n, u))[:, None, None]
    dw = _cross(dn, u[:, :, None]) + _cross(n[:, :, None], du)
    dk = -(k**2) * (np.einsum("mij,mi->mj", dn, u) + np.einsum("mij,mi->mj", du, n))[:, None, :]
    once, again = _cross(w, q), _cross(dw, q)
    turning = again + dk * _cross(w, once) + k * (_cross(dw, once) + _cross(w, again))
    return placed, turning


def _cross(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.cross(a, b, axis=1)


def _normal_derivatives(surface: Surface, near: NearestPoints) -> np.ndarray:
    """dn/dr (m, 3, 3): how the normal at the nearest surface point turns as points inside move.

    The point at depth d moves its nearest point by 1/(1 - d κ) along each principal direction of curvature κ
    (d under 0 outside), and the normal turns by κ per length there.
    """
    corners = surface.vertices[surface.faces]
    normals, areas = face_vectors(surface)
    opposite = np.roll(corners, -2, axis=1) - np.roll(corners, -1, axis=1)
    gradients = np.cross(normals[:, None], opposite) / (2 * areas[:, None, None])  # of the linear shape functions
    on_faces = np.einsum("fai,faj->fij", surface.normals[surface.faces], gradients)
    at_vertices = np.zeros((len(surface.vertices), 3, 3))
    share = np.zeros(len(surface.vertices))
    for corner in range(3):
        np.add.at(at_vertices, surface.faces[:, corner], areas[:, None, None] * on_faces)
        np.add.at(share, surface.faces[:, corner], areas)
    at_vertices /= share[:, None, None]
    shape = np.einsum("mc,mcij->mij", near.shares, at_vertices[surface.faces[near.faces]])
    across = np.eye(3) - near.normals[:, :, None] * near.normals[:, None, :]
    shape = across @ (shape + np.swapaxes(shape, 1, 2)) @ across / 2
    curvature, directions = np.linalg.eigh(shape)
    turn = curvature / np.maximum(1 - near.inside_depth[:, None] * curvature, LEAST_FOCUS)
    return np.einsum("mik,mk,mjk->mij", directions, turn, directions)
