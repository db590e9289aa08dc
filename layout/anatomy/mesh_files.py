"""Triangle surfaces from files: GIFTI, PLY, STL, OFF, OBJ. Headers are compared with the file's size before reading."""

from __future__ import annotations

import io
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.anatomy.gifti_files import read_gifti_surface
from layout.anatomy.untrusted import LARGEST_TEXT, one_sentence, read_bytes
from layout.errors import FileError

MOST_VERTICES = 1_000_000
MOST_FACES = 2_000_000
FORMATS = (".gii", ".ply", ".stl", ".off", ".obj")
_HEADER = 65_536  # bytes in which a header must end


@dataclass(frozen=True)
class RawMesh:
    """A surface as its file has it: vertices (n, 3) in the file's unit, faces (m, 3), notes on the reading."""

    vertices: np.ndarray
    faces: np.ndarray
    notes: tuple[str, ...] = ()


def read_mesh(path: Path) -> RawMesh:
    """The surface in a file, its vertices in the file's order (an STL file repeats each once a face).

    Nothing the file names besides itself is opened. Raises FileError for an unknown ending, a missing, damaged or
    lying file, numbers that are not finite, faces of vertices that are not there, or a surface too large to take
    (MOST_VERTICES, MOST_FACES; STL: as many vertices as its faces have corners).
    """
    name = path.name.lower()
    kind = Path(name.removesuffix(".gz")).suffix
    if kind not in FORMATS:
        raise FileError(f"{path}: a surface must be a file ending in {', '.join(FORMATS)} (or .gz after it).")
    notes: tuple[str, ...] = ()
    if kind == ".gii":
        vertices, faces, moved = read_gifti_surface(path)
        if moved:
            notes = (f"{path.name} states a transform to another space; its coordinates were taken as they are.",)
    else:
        content = read_bytes(path)
        if not _CHECKS[kind](path, content) and len(content) > LARGEST_TEXT:
            raise FileError(
                f"{path}: a surface written as text must be at most {LARGEST_TEXT / 1e6:g} MB, but it has "
                f"{len(content) / 1e6:.0f} MB."
            )
        with one_sentence(path, "the surface"):
            vertices, faces = _by_library(content, kind[1:])
    return RawMesh(*_checked(path, vertices, faces, kind), notes)


def _by_library(content: bytes, kind: str) -> tuple[np.ndarray, np.ndarray]:
    import trimesh

    options = {"maintain_order": True, "skip_materials": True} if kind == "obj" else {}
    # From bytes, so that the reader has no folder in which to look for materials and textures.
    mesh = trimesh.load(io.BytesIO(content), file_type=kind, force="mesh", process=False, **options)
    return np.asarray(mesh.vertices, float), np.asarray(mesh.faces)


def _checked(path: Path, vertices: np.ndarray, faces: np.ndarray, kind: str) -> tuple[np.ndarray, np.ndarray]:
    for what, array in (("vertices", vertices), ("faces", faces)):
        if array.ndim != 2 or array.shape[1] != 3 or len(array) < 4:
            raise FileError(f"{path}: must hold at least 4 triangle {what}, but it holds an array of {array.shape}.")
    largest = 3 * MOST_FACES if kind == ".stl" else MOST_VERTICES
    if len(vertices) > largest or len(faces) > MOST_FACES:
        raise FileError(_too_many(path, len(vertices), len(faces)))
    if not np.isfinite(vertices).all() or np.abs(vertices).max() > 1e9:
        raise FileError(f"{path}: coordinates must be finite numbers of ordinary size, but some are not.")
    if faces.dtype.kind not in "iu" or faces.min() < 0 or faces.max() >= len(vertices):
        raise FileError(f"{path}: faces must name the {len(vertices)} vertices by number, but some name others.")
    return vertices, faces.astype(np.int64)


def _too_many(path: Path, n_vertices: int, n_faces: int) -> str:
    return (
        f"{path}: a surface must have at most {MOST_VERTICES:,} vertices and {MOST_FACES:,} faces, but it has "
        f"{n_vertices:,} and {n_faces:,}."
    )


def _check_stl(path: Path, content: bytes) -> bool:
    """Whether it is binary; its number of triangles is then that of its bytes."""
    said = int.from_bytes(content[80:84], "little")
    if len(content) == 84 + 50 * said and said > 0:
        if said > MOST_FACES:
            raise FileError(_too_many(path, 3 * said, said))
        return True
    if content[:5].lower() == b"solid" and b"facet" in content[:_HEADER].lower():
        return False
    raise FileError(
        f"{path}: an STL file must have 50 bytes for each of the {said:,} triangles its header states, but it has "
        f"{max(0, len(content) - 84):,} bytes after the header."
    )


def _check_ply(path: Path, content: bytes) -> bool:
    head = re.match(rb"ply\s.*?end_header\r?\n", content[:_HEADER], re.DOTALL)
    if head is None:
        raise FileError(f'{path}: a PLY file must begin with "ply" and have a header that ends, but it does not.')
    counts = {name: int(n) for name, n in re.findall(rb"element\s+(\w+)\s+(\d{1,18})\s", head[0])}
    n_vertices, n_faces = counts.get(b"vertex", 0), counts.get(b"face", 0)
    if n_vertices > MOST_VERTICES or n_faces > MOST_FACES:
        raise FileError(_too_many(path, n_vertices, n_faces))
    _check_room(path, sum(counts.values()), len(content) - len(head[0]))
    return b"ascii" not in head[0]


def _check_off(path: Path, content: bytes) -> bool:
    words = re.sub(rb"#[^\n]*", b"", content[:_HEADER]).split()
    numbers = words[1:3] if words and words[0].upper().endswith(b"OFF") else []
    if len(numbers) != 2 or not all(word.isdigit() and len(word) < 19 for word in numbers):
        raise FileError(f'{path}: an OFF file must begin with "OFF" and its numbers of vertices and faces.')
    n_vertices, n_faces = int(numbers[0]), int(numbers[1])
    if n_vertices > MOST_VERTICES or n_faces > MOST_FACES:
        raise FileError(_too_many(path, n_vertices, n_faces))
    _check_room(path, n_vertices + n_faces, len(content))
    return False


def _check_obj(path: Path, content: bytes) -> bool:
    n_vertices, n_faces = (
        len(re.findall(rb"^\s*" + letter + rb"\s", content, re.MULTILINE)) for letter in (b"v", b"f")
    )
    if n_vertices > MOST_VERTICES or n_faces > MOST_FACES:
        raise FileError(_too_many(path, n_vertices, n_faces))
    longest = max((abs(int(n)) for n in re.findall(rb"^\s*f\s+.*?(-?\d{8,18})", content, re.MULTILINE)), default=0)
    if longest > n_vertices:
        raise FileError(f"{path}: faces must name the {n_vertices} vertices by number, but some name others.")
    return False


def _check_room(path: Path, entries: int, n_bytes: int) -> None:
    if entries * 6 > n_bytes:  # three numbers and what parts them take six bytes at least
        raise FileError(
            f"{path}: its header states {entries:,} vertices and faces, too many for its {n_bytes:,} bytes."
        )


_CHECKS = {".stl": _check_stl, ".ply": _check_ply, ".off": _check_off, ".obj": _check_obj}
