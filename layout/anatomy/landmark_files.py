"""Landmarks of a person's own head: a plain JSON file, or a BIDS coordinate-system file."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from layout.anatomy.untrusted import point_of, read_json
from layout.errors import FileError
from layout.units import MM

_NAMES = {
    "nas": ("nas", "nasion", "nz"),
    "lpa": ("lpa",),
    "rpa": ("rpa",),
    "inion": ("inion", "iz"),
    "left_eye": ("lefteye",),
    "right_eye": ("righteye",),
}
_BIDS = ("AnatomicalLandmarkCoordinates", "FiducialsCoordinates")
_BIDS_UNITS = {"m": 1.0, "cm": 1e-2, "mm": MM}


@dataclass(frozen=True)
class GivenLandmarks:
    """Points (3,) [m] in the frame of the surfaces; inion and eyes None where the file does not give them."""

    nas: np.ndarray
    lpa: np.ndarray
    rpa: np.ndarray
    inion: np.ndarray | None
    left_eye: np.ndarray | None
    right_eye: np.ndarray | None


def read_landmarks(path: Path, unit: float) -> GivenLandmarks:
    """The landmarks in a JSON file: {"NAS": [x, y, z], "LPA": ..., "RPA": ...} and, if known, "inion", "left eye",
    "right eye"; or a BIDS coordsystem file with AnatomicalLandmarkCoordinates (or FiducialsCoordinates).

    unit [m]: of the surfaces, and of a plain file; a BIDS file states its own. Raises FileError naming the landmark
    that is missing or is not three numbers, or a BIDS unit that is none.
    """
    content = read_json(path)
    if not isinstance(content, dict):
        raise FileError(f"{path}: must hold landmarks by name, but it holds none.")
    for key in _BIDS:
        if isinstance(content.get(key), dict):
            # AnatomicalLandmarkCoordinates -> AnatomicalLandmarkCoordinateUnits, FiducialsCoordinates likewise.
            units_key = key.removesuffix("s") + "Units"
            said = content.get(units_key)
            if said not in _BIDS_UNITS:
                raise FileError(f'{path}: {units_key} must be "m", "cm" or "mm", but {str(said)[:40]!r} was given.')
            content, unit = content[key], _BIDS_UNITS[said]
            break
    by_name = {"".join(c for c in str(name).lower() if c.isalnum()): (name, value) for name, value in content.items()}
    points = {}
    for field, names in _NAMES.items():
        found = next((by_name[name] for name in names if name in by_name), None)
        points[field] = None if found is None else point_of(path, str(found[0])[:40], found[1]) * unit
    for field in ("nas", "lpa", "rpa"):
        if points[field] is None:
            raise FileError(f"{path}: must give the landmark {field.upper()}, but it does not.")
    return GivenLandmarks(**points)
