"""Heads that take seconds to build, kept in the user's cache folder as plain arrays."""

from __future__ import annotations

import contextlib
import hashlib
import os
import tempfile
from collections.abc import Callable
from pathlib import Path

import numpy as np
import platformdirs

from layout.anatomy.head import CortexVertices, Head, Landmarks, Sources, Surface

FOLDER_VARIABLE = "SCALPSITE_CACHE"
FORMAT = 2  # of the file; part of its digest
SURFACES = ("scalp", "outer_skull", "inner_skull")
TRANSFORMS = ("mni_to_head", "files_to_head")


class DamagedFileError(Exception):
    """A cached file that does not hold what was written into it."""


def cache_folder() -> Path:
    """The folder named by the environment variable SCALPSITE_CACHE, or this user's cache folder."""
    return Path(os.environ.get(FOLDER_VARIABLE) or platformdirs.user_cache_dir("scalpsite"))


def load_or_build(key: str, build: Callable[[], Head]) -> Head:
    """The head stored under `key`, or build() and store it.

    The key becomes a file's name and names everything the head depends on.

    A damaged file is built anew and replaced. A folder that cannot be written is no error: the head is then
    built each time.
    """
    path = cache_folder() / f"{key}.npz"
    with contextlib.suppress(Exception):  # a damaged file can fail in any way; building anew mends them all
        return _read(path)
    head = build()
    with contextlib.suppress(OSError):
        _write(path, _to_arrays(head))
    return head


def _to_arrays(head: Head) -> dict[str, np.ndarray]:
    arrays = {
        "name": np.array(head.name),
        "notes": np.array(head.notes, dtype=np.str_),
        "normal_orientation": np.array(head.normal_orientation),
        "eyes": head.eyes,
    }
    for name in SURFACES:
        surface = getattr(head, name)
        arrays |= {f"{name}_vertices": surface.vertices, f"{name}_faces": surface.faces}
    arrays |= {f"landmarks_{name}": point for name, point in vars(head.landmarks).items()}
    arrays |= {f"cortex_{name}": array for name, array in vars(head.cortex).items()}
    arrays |= {name: getattr(head, name) for name in TRANSFORMS if getattr(head, name) is not None}
    if head.cortex_surface is not None:
        surface = head.cortex_surface
        arrays |= {"mesh_vertices": surface.vertices, "mesh_faces": surface.faces}
    if head.cortex_vertices is not None:
        arrays |= {f"given_{name}": np.asarray(array) for name, array in vars(head.cortex_vertices).items()}
    if head.sphere is not None:
        arrays["sphere_centre"], arrays["sphere_radii"] = head.sphere
    return arrays


def _from_arrays(arrays: dict[str, np.ndarray]) -> Head:
    def group(prefix: str) -> dict[str, np.ndarray]:
        return {name.removeprefix(prefix): array for name, array in arrays.items() if name.startswith(prefix)}

    sphere = (arrays["sphere_centre"], arrays["sphere_radii"]) if "sphere_radii" in arrays else None
    given = group("given_")
    if given:
        given["one_file"] = bool(given["one_file"])
    return Head(
        name=str(arrays["name"]),
        **{name: Surface(**group(f"{name}_")) for name in SURFACES},
        landmarks=Landmarks(**group("landmarks_")),
        cortex=Sources(**group("cortex_")),
        eyes=arrays["eyes"],
        **{name: arrays.get(name) for name in TRANSFORMS},
        cortex_surface=Surface(**mesh) if (mesh := group("mesh_")) else None,
        cortex_vertices=CortexVertices(**given) if given else None,
        sphere=sphere,
        normal_orientation=bool(arrays["normal_orientation"]),
        notes=tuple(str(note) for note in arrays["notes"]),
    )


def _digest(arrays: dict[str, np.ndarray]) -> str:
    digest = hashlib.sha256(f"format {FORMAT}".encode())
    for name in sorted(arrays):
        array = np.ascontiguousarray(arrays[name])
        digest.update(f"{name} {array.dtype.str} {array.shape}".encode())
        digest.update(array.tobytes())
    return digest.hexdigest()


def _read(path: Path) -> Head:
    with np.load(path, allow_pickle=False) as file:
        arrays = {name: file[name] for name in file.files}
    if str(arrays.pop("digest")) != _digest(arrays):
        raise DamagedFileError(path)
    return _from_arrays(arrays)


def _write(path: Path, arrays: dict[str, np.ndarray]) -> None:
    """The whole file or none: written beside its place under another name, then renamed."""
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, unfinished = tempfile.mkstemp(dir=path.parent, suffix=".unfinished")
    try:
        with os.fdopen(handle, "wb") as file:
            np.savez(file, **arrays, digest=np.array(_digest(arrays)))
        os.replace(unfinished, path)
    except BaseException:
        os.unlink(unfinished)
        raise
