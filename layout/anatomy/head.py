"""What a head is: surfaces, cortex and landmarks in the head frame, SI units.

Head frame: right-anterior-superior, origin midway between LPA and RPA, x towards RPA, z normal to the plane of LPA,
RPA and NAS (upward), y = z × x.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import trimesh


@dataclass(frozen=True)
class Surface:
    """A closed, outward-oriented triangle mesh. vertices (n_vertices, 3) [m], faces (n_faces, 3)."""

    vertices: np.ndarray
    faces: np.ndarray

    @cached_property
    def mesh(self) -> trimesh.Trimesh:
        """The same surface for trimesh (vertices untouched)."""
        return trimesh.Trimesh(self.vertices, self.faces, process=False)

    @cached_property
    def normals(self) -> np.ndarray:
        """Outward unit normals at the vertices (n_vertices, 3), area-weighted over the faces around."""
        tri = self.vertices[self.faces]
        face_normals = np.cross(tri[:, 1] - tri[:, 0], tri[:, 2] - tri[:, 0])
        normals = np.zeros_like(self.vertices)
        for corner in range(3):
            np.add.at(normals, self.faces[:, corner], face_normals)
        return normals / np.linalg.norm(normals, axis=1, keepdims=True)

    def __getstate__(self) -> dict[str, np.ndarray]:
        """Vertices and faces alone: the search tree of the cached mesh does not outlive a process."""
        return {"vertices": self.vertices, "faces": self.faces}


@dataclass(frozen=True)
class Landmarks:
    """Fiducial points (3,) [m]: nasion, left and right preauricular points, inion."""

    nas: np.ndarray
    lpa: np.ndarray
    rpa: np.ndarray
    inion: np.ndarray


@dataclass(frozen=True)
class Sources:
    """Current dipoles on the cortex. All arrays have n_sources rows.

    positions (n, 3) [m]; normals (n, 3) unit, pointing out of the cortex; areas (n,) [m²]; side (n,) int8, -1 left, +1
    right. faces (n_faces, 3): triangles over the sources, for neighbourhoods and pictures.
    """

    positions: np.ndarray
    normals: np.ndarray
    areas: np.ndarray
    side: np.ndarray
    faces: np.ndarray

    def __len__(self) -> int:
        return len(self.areas)


@dataclass(frozen=True)
class CortexVertices:
    """The vertices of the cortex's files, for labels and masks that are given on them. All arrays have n_vertices rows.

    positions (n, 3) [m]; areas (n,) [m²] of the surface around each; side (n,) int8, -1 left, +1 right; number (n,):
    which vertex of its file it is, from 0; source (n,): the source that stands for it, -1 where there is no cortex.
    one_file: numbers run through both sides; else each side has its own.
    """

    positions: np.ndarray
    areas: np.ndarray
    side: np.ndarray
    number: np.ndarray
    source: np.ndarray
    one_file: bool


@dataclass(frozen=True)
class Head:
    """A head ready for lead fields.

    mni_to_head (4, 4): metres in MNI152 to metres in the head frame, None where the head has no such frame.
    eyes (2, 3) [m]: centres of the left and right eyeball. sphere: (centre (3,), radii (n_layers,)) for a head that IS
    a layered sphere, None for an anatomical head. normal_orientation is False where cortical normals mean nothing.
    notes: sentences about what this head cannot represent, printed beside results.
    cortex_surface: the mesh the sources lie on, both sides, for ways along the cortex (not always closed);
    cortex_vertices: the vertices of the cortex's files; both None for a sphere. files_to_head (4, 4): metres in the
    frame of the head's own files to metres in the head frame, None for a head without own files.
    """

    name: str
    scalp: Surface
    outer_skull: Surface
    inner_skull: Surface
    landmarks: Landmarks
    cortex: Sources
    eyes: np.ndarray
    mni_to_head: np.ndarray | None = None
    sphere: tuple[np.ndarray, np.ndarray] | None = None
    normal_orientation: bool = True
    notes: tuple[str, ...] = ()
    cortex_surface: Surface | None = None
    cortex_vertices: CortexVertices | None = None
    files_to_head: np.ndarray | None = None


@dataclass(frozen=True)
class Region:
    """Sources of interest. members (n,): indices into the cortex; areas (n,) [m²]: the part of each that is inside;
    moment [A·m]: rms of the region's net moment."""

    name: str
    members: np.ndarray
    areas: np.ndarray
    moment: float
    coherent: bool
    free_orientation: bool
    centre: np.ndarray  # (3,) [m] in the head frame
