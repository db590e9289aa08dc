"""How a rigid sensor housing rests on the scalp."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree

from layout.anatomy.scalp_points import SurfaceCloud, tangents_at

CLOUD_EDGE = 2e-3  # [m] spacing of the scalp samples under a housing
_STEEPEST = 0.2  # cosine between face axis and scalp normal below which a sample tells nothing about the rim
_REACH = 2.5  # scalp farther than this many face radii from a site is not looked at


@dataclass(frozen=True)
class Rest:
    """Where housings come to rest. axes (n, 3) outward unit; faces (n, 3) [m] centre of the face."""

    axes: np.ndarray
    faces: np.ndarray


class Footprint:
    """The scalp samples under a round face of `radius` [m] that circumscribes the housing's real face."""

    def __init__(self, cloud: SurfaceCloud, radius: float) -> None:
        self._cloud, self.radius = cloud, radius
        self._tree = cKDTree(cloud.positions)

    def normals(self, positions: np.ndarray) -> np.ndarray:
        """Outward normals (n, 3) averaged by area over the scalp within the radius of each site (n, 3)
        [m].
        """
        soft = CLOUD_EDGE / 2
        site, sample = self._near(positions, self.radius + soft)
        # A sample stands for the scalp around it: those on the rim count by the share that is inside.
        away = np.linalg.norm(self._cloud.positions[sample] - positions[site], axis=1)
        share = np.clip((self.radius + soft - away) / CLOUD_EDGE, 0.0, 1.0)
        weighted = self._cloud.normals[sample] * (share * self._cloud.areas[sample])[:, None]
        total = np.stack([np.bincount(site, column, minlength=len(positions)) for column in weighted.T], axis=1)
        return total / np.linalg.norm(total, axis=1, keepdims=True)

    def clearance(self, positions: np.ndarray, axes: np.ndarray) -> np.ndarray:
        """How far (n,) [m] along its axis a face must be from its site so that no scalp under it sticks out
        above it.
        """
        site, sample = self._near(positions, _REACH * self.radius)
        offset = self._cloud.positions[sample] - positions[site]
        height = np.einsum("nd,nd->n", offset, axes[site])
        lateral = offset - height[:, None] * axes[site]
        beside = np.linalg.norm(lateral, axis=1)
        # A sample just outside stands for the rim: its tangent plane is followed inwards to the rim.
        excess = np.maximum(beside - self.radius, 0.0)
        upright = np.einsum("nd,nd->n", self._cloud.normals[sample], axes[site])
        outward = np.einsum("nd,nd->n", self._cloud.normals[sample], lateral) / np.maximum(beside, 1e-12)
        height = height + excess * outward / np.maximum(upright, _STEEPEST)
        counts = (beside <= self.radius) | ((excess <= CLOUD_EDGE) & (upright > _STEEPEST))
        highest = np.zeros(len(positions))  # the site itself lies under the face
        np.maximum.at(highest, site, np.where(counts, height, 0.0))
        return highest

    def _near(self, positions: np.ndarray, radius: float) -> tuple[np.ndarray, np.ndarray]:
        found = self._tree.query_ball_point(positions, radius, return_sorted=True)
        counts = np.array([len(samples) for samples in found])
        return np.repeat(np.arange(len(positions)), counts), np.concatenate(found).astype(int)


def face_radius(housing: tuple[float, float, float]) -> float:
    """Radius [m] of the circle around a housing's face (width, depth, length) [m]."""
    return float(np.hypot(housing[0], housing[1]) / 2)


def rest_on_scalp(footprint: Footprint, positions: np.ndarray, hair: float) -> Rest:
    """Housings pressed on the scalp at sites (n, 3) [m], along the normal averaged over the footprint, over
    hair [m].
    """
    axes = footprint.normals(positions)
    height = footprint.clearance(positions, axes) + hair
    return Rest(axes, positions + height[:, None] * axes)


def rest_in_slots(
    footprint: Footprint, positions: np.ndarray, axes: np.ndarray, travel_gap: np.ndarray, hair: float
) -> Rest:
    """Housings in helmet slots: axis of the slot, `travel_gap` (n,) [m] above where they would touch the
    scalp or hair.
    """
    height = footprint.clearance(positions, axes) + hair + travel_gap
    return Rest(axes, positions + height[:, None] * axes)


def poses(rest: Rest) -> np.ndarray:
    """Housing frame to head frame (n, 4, 4): z outward, y (depth) towards the front, x (width) to the right,
    origin at the face centre.
    """
    forward = tangents_at(rest.axes)[:, 0]
    result = np.tile(np.eye(4), (len(rest.axes), 1, 1))
    result[:, :3, 0] = np.cross(forward, rest.axes)
    result[:, :3, 1] = forward
    result[:, :3, 2] = rest.axes
    result[:, :3, 3] = rest.faces
    return result
