"""In which unit surface files are: asked for, and compared with the size of a head; never guessed."""

from __future__ import annotations

import numpy as np

from layout.anatomy.landmark_files import GivenLandmarks
from layout.anatomy.mesh_files import RawMesh
from layout.brief.objects import SurfacesBrief
from layout.errors import BriefError, FileError
from layout.units import MM

_UNITS = {"mm": MM, "m": 1.0}
# [m] longest side of the box round a surface: wide enough for children and for scalps with a neck and shoulders.
SCALP_EXTENT = (0.14, 0.60)
SKULL_EXTENT = (0.11, 0.35)
CORTEX_EXTENT = (0.10, 0.25)
EAR_TO_EAR = (0.09, 0.20)
NASION_FORWARD = (0.05, 0.16)  # from the middle between the ears


def unit_of(brief: SurfacesBrief, raw: dict[str, RawMesh], cortex: dict[str, RawMesh]) -> float:
    """The stated unit [m]. Raises BriefError where the brief states none, with the unit the size speaks for."""
    if brief.unit is not None:
        return brief.unit
    where, extent, limits = _extents(raw, cortex)[0]
    likely = _likely(extent, limits)
    hint = f"they seem to be in {likely}" if likely else "they are of no head in either"
    raise BriefError(
        f'head.units must be "mm" or "m" (the {where} files measure {extent:.4g} across: {hint}), but it is missing.'
    )


def check_size(
    brief: SurfacesBrief, raw: dict[str, RawMesh], cortex: dict[str, RawMesh], unit: float, points: GivenLandmarks
) -> None:
    """Raises BriefError or FileError where the stated unit makes a surface or the landmarks of no head's size."""
    said = next(name for name, size in _UNITS.items() if size == unit)
    for where, extent, limits in _extents(raw, cortex):
        if not limits[0] <= extent * unit <= limits[1]:
            likely = _likely(extent, limits)
            hint = f"; the files seem to be in {likely}" if likely else ""
            raise BriefError(
                f'head.units "{said}" makes the {where} {_length(extent * unit)} long, which must be '
                f"{limits[0] / MM:g} to {limits[1] / MM:g} mm{hint}."
            )
    across = float(np.linalg.norm(points.rpa - points.lpa))
    forward = float(np.linalg.norm(points.nas - (points.lpa + points.rpa) / 2))
    for what, length, limits in (("LPA to RPA", across, EAR_TO_EAR), ("ears to NAS", forward, NASION_FORWARD)):
        if not limits[0] <= length <= limits[1]:
            raise FileError(
                f"{brief.landmarks}: {what} must measure {limits[0] / MM:g} to {limits[1] / MM:g} mm, but it measures "
                f"{_length(length)}."
            )


def _extents(raw: dict[str, RawMesh], cortex: dict[str, RawMesh]) -> list[tuple[str, float, tuple[float, float]]]:
    """Longest side of the box of each surface, in the files' unit, with its limits [m]."""
    found = []
    for name, mesh in raw.items():
        limits = SCALP_EXTENT if name == "scalp" else SKULL_EXTENT
        found.append((name.replace("_", " "), float(np.ptp(mesh.vertices, axis=0).max()), limits))
    both = np.vstack([mesh.vertices for mesh in cortex.values()])
    found.append(("cortex", float(np.ptp(both, axis=0).max()), CORTEX_EXTENT))
    return found


def _likely(extent: float, limits: tuple[float, float]) -> str | None:
    return next((name for name, size in _UNITS.items() if limits[0] <= extent * size <= limits[1]), None)


def _length(metres: float) -> str:
    return f"{metres / MM:.3g} mm" if metres < 1 else f"{metres:.3g} m"
