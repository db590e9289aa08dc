"""The brief as frozen objects in SI units; nothing behind this package sees the file's keys."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

from layout.brief.objects_goal import BudgetBrief, GoalBrief, ScenariosBrief, SearchBrief
from layout.brief.objects_head import HeadSizeBrief, SurfacesBrief
from layout.brief.objects_places import BUILT_IN_ZONES, ExistingBrief, PlacesBrief, ZoneBrief
from layout.brief.objects_recording import RecordingBrief
from layout.brief.objects_stock import (
    Axes,
    ElectrodeBrief,
    Family,
    FootprintBrief,
    GradiometerBrief,
    MagnetometerBrief,
    SitesBrief,
    StockBrief,
)

__all__ = [
    "BUILT_IN_ZONES",
    "Axes",
    "Brief",
    "BudgetBrief",
    "ElectrodeBrief",
    "ExistingBrief",
    "Family",
    "FootprintBrief",
    "Frame",
    "GoalBrief",
    "GradiometerBrief",
    "HeadBrief",
    "HeadSizeBrief",
    "MagnetometerBrief",
    "Model",
    "NoiseBrief",
    "Orientation",
    "PlacesBrief",
    "RecordingBrief",
    "RegionBrief",
    "ScenariosBrief",
    "SearchBrief",
    "Side",
    "SitesBrief",
    "SourceMesh",
    "StockBrief",
    "SurfacesBrief",
    "ZoneBrief",
]

SourceMesh = Literal["coarse", "standard", "fine"]
Frame = Literal["mni152", "head", "files"]  # files: the frame of the head's own surface files
Model = Literal["boundary_elements", "spheres"]
Side = Literal["left", "right", "both"]
Orientation = Literal["normal", "free"]


@dataclass(frozen=True)
class HeadBrief:
    """What head to build. Conductivities [S/m] and radii [m] run from the brain outwards (3 or 4 layers).

    model: what computes lead fields; boundary elements have three layers, a sphere head is its own model. nodes: of
    each surface of the boundary elements, roughly.
    """

    kind: Literal["template", "sphere", "surfaces"]
    conductivities: tuple[float, ...]
    source_mesh: SourceMesh = "standard"
    radii: tuple[float, ...] | None = None  # sphere only
    cortex_depth: float | None = None  # sphere only: depth of the source shell under the innermost radius [m]
    surfaces: SurfacesBrief | None = None  # surfaces only
    size: HeadSizeBrief | None = None  # template only: None leaves it as it is
    model: Model = "spheres"
    nodes: int = 1000
    lead_field_file: Path | None = None  # absolute; instead of computing the candidates' lead field


@dataclass(frozen=True)
class RegionBrief:
    """A piece of cortex of interest, and its net moment [A·m] rms.

    Where it lies is said in one way: a ball (centre [m] in `frame`, radius [m], through the air or along the cortex),
    a label of a label file (name or number), a mask (voxels that are not zero, or that equal `label`) in `frame`,
    vertex numbers of the cortex's file, in the brief or in a file, or a parcel by its name. Paths are absolute.
    `frame` means something only for balls and masks.
    """

    name: str
    centre: tuple[float, float, float] | None
    frame: Frame
    radius: float | None
    side: Side
    moment: float
    coherent: bool = False
    orientation: Orientation = "normal"
    along_cortex: bool = False
    label_file: Path | None = None
    label: str | int | None = None
    mask_nifti: Path | None = None
    vertices_file: Path | None = None
    vertices: tuple[int, ...] | None = None
    parcel: str | None = None


@dataclass(frozen=True)
class NoiseBrief:
    """One band for everything. eeg_rms [V] is the background's rms over the calibration sites.

    patch_area [m²]. eyes_rms [V] is the eyes' rms at Fp1/Fp2 (0 switches them off). field_rms [T] and
    gradient_rms [T/m] are the surroundings as magnetometers meet them. recording: what the
    strengths are fitted to; what it does not tell stays as stated here.
    """

    band: tuple[float, float]  # [Hz]
    averages: int = 1
    eeg_rms: float = 7.5e-6
    patch_area: float = 20e-4
    regions_in_background: bool = False
    eyes_rms: float = 20e-6
    field_rms: float = 0.0
    gradient_rms: float = 0.0
    recording: RecordingBrief | None = None

    @property
    def bandwidth(self) -> float:
        """Width of the band [Hz]."""
        return self.band[1] - self.band[0]


@dataclass(frozen=True)
class Brief:
    """Everything the pipeline needs to know about what is wanted."""

    title: str
    head: HeadBrief
    regions: tuple[RegionBrief, ...]
    stock: tuple[StockBrief, ...]
    places: PlacesBrief
    noise: NoiseBrief
    goal: GoalBrief
    search: SearchBrief
    sha256: str  # of the brief file's bytes
    folder: Path  # where the brief lies, absolute; paths in its text are relative to it
    scenarios: ScenariosBrief = field(default_factory=ScenariosBrief)
    budget: BudgetBrief | None = None
    existing: ExistingBrief | None = None

    @property
    def least(self) -> tuple[int, ...]:
        """The least number of sensors of each stock entry; `count` is the most.

        Where the file says nothing: the count itself, none under a budget, and as few as carry anything where the
        smallest count that reaches a target is wanted (1, or 2 electrodes: a contact and the reference).
        """
        return tuple(
            least_count(entry.kind, entry.count, entry.count_at_least, self.budget is not None, self.goal.has_target)
            for entry in self.stock
        )


def least_count(kind: str, most: int, at_least: int | None, has_budget: bool, has_target: bool) -> int:
    """The least number of sensors of a stock entry, `at_least` where it is given: see `Brief.least`."""
    if at_least is not None:
        return at_least
    if has_budget:
        return 0
    return min(most, 2 if kind == "electrode" else 1) if has_target else most
