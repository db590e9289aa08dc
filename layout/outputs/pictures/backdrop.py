"""The shaded head behind the sensors: cortex with its regions, seen through a thin scalp."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.anatomy.head import Head, Region
from layout.outputs.pictures.depth_image import seen_faces
from layout.outputs.pictures.views import View

PIXELS_PER_METRE = 2500.0
MARGIN = 14e-3  # m around the scalp
LIGHT = np.array([-0.4, 0.5, 0.77])  # across, up, toward
CORTEX_GREY = np.array([0.80, 0.80, 0.81])
SCALP_TINT = np.array([0.42, 0.47, 0.55])
HIDDEN_STRENGTH = 0.30  # of a region that the cortex in front of it hides

# Okabe and Ito's colours that stay apart for colour-blind readers, less the black and blue kept for sensors
REGION_COLOURS = ("#E69F00", "#009E73", "#D55E00", "#CC79A7", "#56B4E9", "#F0E442")


@dataclass(frozen=True)
class Backdrop:
    """image (rows, columns, 3) uint8, row 0 at the bottom; inside (rows, columns): scalp coverage in 0..1;
    extent [m]: left, right, bottom, top in the view's plane; height (rows, columns) [m]: scalp towards the
    viewer."""

    image: np.ndarray
    inside: np.ndarray
    extent: tuple[float, float, float, float]
    height: np.ndarray


def region_colour(index: int) -> str:
    """Colour of the region with this number (they repeat after six)."""
    return REGION_COLOURS[index % len(REGION_COLOURS)]


def window(head: Head, view: View) -> tuple[float, float, float, float]:
    """Left, right, bottom, top [m] around the head: equally wide in every view, so that all share a scale, and
    as high as the view needs."""
    flat = view.project(head.scalp.vertices)
    centre, high = (flat.min(axis=0) + flat.max(axis=0)) / 2, np.ptp(flat[:, 1]) / 2 + MARGIN
    half = np.ptp(head.scalp.vertices, axis=0).max() / 2 + MARGIN
    return centre[0] - half, centre[0] + half, centre[1] - high, centre[1] + high


def paint_backdrop(head: Head, regions: tuple[Region, ...], view: View) -> Backdrop:
    """The head in this view as a picture; regions in full colour, faint where cortex hides them."""
    extent = window(head, view)
    shape = (round((extent[3] - extent[2]) * PIXELS_PER_METRE), round((extent[1] - extent[0]) * PIXELS_PER_METRE))
    frame = (extent, shape)

    face, weights, _ = _see(head.cortex.positions, head.cortex.faces, view, frame)
    normals = vertex_normals(head.cortex.positions, head.cortex.faces)
    normal = blended(view.project(normals), head.cortex.faces, face, weights)
    light = np.clip(normal @ (LIGHT / np.linalg.norm(LIGHT)), 0, 1)
    image = np.ones((*shape, 3))
    image[face >= 0] = (CORTEX_GREY * (0.72 + 0.28 * light[..., None]))[face >= 0]

    members = np.zeros((len(head.cortex), len(regions)))
    for index, region in enumerate(regions):
        members[region.members, index] = 1.0
    for index in range(len(regions)):
        colour, member = np.array(rgb(region_colour(index))), members[:, index]
        near = np.any(member[head.cortex.faces] > 0, axis=1)
        behind, behind_weights, _ = _see(head.cortex.positions, head.cortex.faces[near], view, frame)
        hidden = blended(member[:, None], head.cortex.faces[near], behind, behind_weights)[..., 0] > 0.5
        image[hidden] += HIDDEN_STRENGTH * (colour - image[hidden])
    seen = blended(members, head.cortex.faces, face, weights) > 0.5
    for index in range(len(regions)):  # after all hidden ones, which would tint what lies in front of them
        here = seen[..., index]
        image[here] = (np.array(rgb(region_colour(index))) * (0.80 + 0.20 * light[..., None]))[here]

    face, weights, height = _see(head.scalp.vertices, head.scalp.faces, view, frame)
    normals = vertex_normals(head.scalp.vertices, head.scalp.faces)
    normal = blended(view.project(normals), head.scalp.faces, face, weights)
    inside = (face >= 0).astype(float)
    slant = 1 - np.clip(normal[..., 2], 0, 1)
    veil = (0.07 + 0.38 * slant**2.5) * inside  # a thin shell is denser where looked at along its surface
    image += veil[..., None] * (SCALP_TINT - image)
    return Backdrop(np.round(255 * np.clip(image, 0, 1)).astype(np.uint8), inside, extent, height)


def _see(vertices, faces, view, frame):
    (left, right, bottom, top), shape = frame
    flat = view.project(vertices)
    columns = (flat[:, 0] - left) / (right - left) * shape[1] - 0.5
    rows = (flat[:, 1] - bottom) / (top - bottom) * shape[0] - 0.5
    return seen_faces(np.stack([columns, rows, flat[:, 2]], axis=1), faces, shape)


def blended(values: np.ndarray, faces: np.ndarray, face: np.ndarray, weights: np.ndarray) -> np.ndarray:
    """Vertex values (n_vertices, m) at every pixel (rows, columns, m), 0 where nothing is seen."""
    at_pixels = np.zeros((*face.shape, values.shape[1]))
    hit = face >= 0
    at_pixels[hit] = np.einsum("pk,pkm->pm", weights[hit], values[faces[face[hit]]])
    return at_pixels


def vertex_normals(vertices: np.ndarray, faces: np.ndarray) -> np.ndarray:
    """Unit normals (n_vertices, 3), zero for vertices that no triangle uses (thinned source meshes have
    them)."""
    corners = vertices[faces]
    of_faces = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normals = np.zeros_like(vertices)
    for corner in range(3):
        np.add.at(normals, faces[:, corner], of_faces)
    length = np.linalg.norm(normals, axis=1, keepdims=True)
    return np.divide(normals, length, out=np.zeros_like(normals), where=length > 0)


def rgb(colour: str) -> tuple[float, ...]:
    """Red, green and blue in 0..1 of "#RRGGBB"."""
    return tuple(int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5))
