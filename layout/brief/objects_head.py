"""A head's own surfaces and sizes as frozen objects in SI units."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class SurfacesBrief:
    """A person's own surfaces. Paths are absolute; all files share one frame.

    The cortex is one file of both sides or one a side; what else is None is made. masks: of cortex or not, one value a
    vertex, with the same keys as the cortex ("both", or "left" and "right"). unit [m]: of the files' coordinates, None
    where the brief does not say. mni_to_files: rows (3 or 4, 4) from MNI152 millimetres to the files' unit, or a JSON
    file of them. vertices: wanted of each layer; cortex_sources: wanted of the whole cortex. gap [m]: least between
    layers.
    """

    cortex: dict[str, Path]
    landmarks: Path
    scalp: Path | None = None
    outer_skull: Path | None = None
    inner_skull: Path | None = None
    cortex_masks: dict[str, Path] | None = None
    unit: float | None = None
    mni_to_files: tuple[tuple[float, ...], ...] | Path | None = None
    vertices: int = 2562
    cortex_sources: int = 10_000
    gap: float = 2e-3


@dataclass(frozen=True)
class HeadSizeBrief:
    """Outer sizes [m] of a head to which the template is scaled; any of them may be None."""

    length: float | None = None
    breadth: float | None = None
    circumference: float | None = None
    name: str | None = None  # of a size of the survey
