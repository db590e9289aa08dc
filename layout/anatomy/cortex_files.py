"""The open average cortex: where its files are and how they are read, in the files' own millimetres."""

from __future__ import annotations

from dataclasses import dataclass
from importlib.util import find_spec
from pathlib import Path

import numpy as np

from layout.errors import FileError

HEMISPHERES = {"left": -1, "right": 1}


@dataclass(frozen=True)
class Hemisphere:
    """One side. outer, inner (10242, 3) [mm, MNI305], faces (20480, 3), thickness (10242,) [mm]."""

    side: int  # -1 left, +1 right
    outer: np.ndarray
    inner: np.ndarray
    faces: np.ndarray
    thickness: np.ndarray


def cortex_folder() -> Path:
    """Folder of the cortex files inside the installed package nilearn (not imported: that takes seconds).

    Raises FileError where the package or its folder is missing.
    """
    spec = find_spec("nilearn")
    if spec is None or spec.origin is None:
        raise FileError("The template head needs the files of the package nilearn, which is not installed.")
    folder = Path(spec.origin).parent / "datasets" / "data" / "fsaverage5"
    if not folder.is_dir():
        raise FileError(f"The template head needs the cortex files in {folder}, which does not exist.")
    return folder


def read_cortex(folder: Path) -> tuple[Hemisphere, ...]:
    """Both sides, left first. Raises FileError naming what is missing, unreadable or of the wrong size."""
    sides = []
    for name, side in HEMISPHERES.items():
        outer, faces = _arrays(folder / f"pial_{name}.gii.gz", 2)
        inner, _ = _arrays(folder / f"white_{name}.gii.gz", 2)
        (thickness,) = _arrays(folder / f"thick_{name}.gii.gz", 1)
        if not outer.shape == inner.shape == (len(thickness), 3):
            raise FileError(f"The {name} cortex files in {folder} must all have one vertex count.")
        sides.append(
            Hemisphere(
                side,
                outer.astype(float),
                inner.astype(float),
                faces.astype(np.int64),
                thickness.astype(float),
            )
        )
    return tuple(sides)


def _arrays(path: Path, count: int) -> list[np.ndarray]:
    import nibabel

    try:
        arrays = [array.data for array in nibabel.load(path).darrays]
    except Exception as error:  # nibabel raises many kinds for a damaged file
        raise FileError(f"The cortex file {path} cannot be read: {error}.") from error
    if len(arrays) != count:
        raise FileError(f"The cortex file {path} must hold {count} array(s), not {len(arrays)}.")
    return arrays
