"""The brief as frozen objects in SI units; nothing behind this package sees the file's keys."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

SourceMesh = Literal["coarse", "standard", "fine"]
Frame = Literal["mni152", "head"]
Side = Literal["left", "right", "both"]
Orientation = Literal["normal", "free"]
Family = Literal["10-20", "10-10", "10-5"]
Axes = Literal["normal", "tangents", "any_of_three", "two_axis", "three_axis"]


# Parts of the scalp every head knows without being told; a brief may add its own under other names.
BUILT_IN_ZONES = ("eyes", "ears", "neck", "face", "forehead")


@dataclass(frozen=True)
class HeadBrief:
    """What head to build. Conductivities [S/m] and radii [m] run from the brain outwards (3 or 4 layers)."""

    kind: Literal["template", "sphere"]
    conductivities: tuple[float, ...]
    source_mesh: SourceMesh = "standard"
    radii: tuple[float, ...] | None = None  # sphere only
    cortex_depth: float | None = None  # sphere only: depth of the source shell under the innermost radius [m]


@dataclass(frozen=True)
class RegionBrief:
    """A ball of cortex of interest: centre [m] in `frame`, radius [m], net moment [A·m] rms."""

    name: str
    centre: tuple[float, float, float]
    frame: Frame
    radius: float
    side: Side
    moment: float
    coherent: bool = False
    orientation: Orientation = "normal"


@dataclass(frozen=True)
class SitesBrief:
    """Where sensors of a kind may sit; exactly one source of sites is set. Paths are absolute."""

    family: Family | None = None
    grid_pitch: float | None = None  # [m]
    electrodes_tsv: Path | None = None
    slots_csv: Path | None = None


@dataclass(frozen=True)
class ZoneBrief:
    """A named part of the scalp: all places within `radius` [m] (straight line) of any of the positions."""

    name: str
    around: tuple[str, ...]
    radius: float


@dataclass(frozen=True)
class ElectrodeBrief:
    """Electrodes of one kind. `count` includes the reference contact. Noise [V rms] in the brief's band."""

    name: str
    count: int
    sites: SitesBrief
    contact_noise: float
    contact_noise_in: dict[str, float] = field(default_factory=dict)  # zone name -> V rms
    reference: str = "any"  # "any" or the name of a site that must be in the layout and carries the reference
    spacing: float = 0.0
    price: float = 1.0
    keep_out: tuple[str, ...] = ("eyes", "ears", "neck")
    only_in: tuple[str, ...] = ()
    kind: Literal["electrode"] = "electrode"


@dataclass(frozen=True)
class MagnetometerBrief:
    """Magnetometers of one kind. `noise_density` [T/sqrt(Hz)], lengths [m].

    axes: "normal" (axis along the scalp normal), "tangents" (one of the two tangents is chosen),
    "any_of_three" (normal or one tangent is chosen), "two_axis" (normal and one tangent, two channels),
    "three_axis" (three channels). standoff: scalp to sensitive centre when the housing touches the scalp.
    housing: face width, face depth, length. hair: extra gap between scalp and housing.
    """

    name: str
    count: int
    sites: SitesBrief
    noise_density: float
    axes: Axes = "normal"
    standoff: float = 6.5e-3
    hair: float = 0.0
    housing: tuple[float, float, float] = (12.4e-3, 16.6e-3, 24.4e-3)
    spacing: float = 0.0
    price: float = 1.0
    keep_out: tuple[str, ...] = ("eyes", "ears", "neck")
    only_in: tuple[str, ...] = ()
    kind: Literal["magnetometer"] = "magnetometer"


@dataclass(frozen=True)
class PlacesBrief:
    """Zones, kept and forbidden sites (by site name), and the sizes [m] of the built-in keep-out zones."""

    zones: tuple[ZoneBrief, ...] = ()
    keep: tuple[str, ...] = ()
    forbid: tuple[str, ...] = ()
    eye_radius: float = 25e-3
    ear_radius: float = 25e-3


@dataclass(frozen=True)
class NoiseBrief:
    """One band for everything. eeg_rms [V] is the background's rms over the calibration sites.

    patch_area [m²]. eyes_rms [V] is the eyes' rms at Fp1/Fp2 (0 switches them off). field_rms [T] and
    gradient_rms [T/m] are the surroundings as magnetometers meet them.
    """

    band: tuple[float, float]  # [Hz]
    averages: int = 1
    eeg_rms: float = 8e-6
    patch_area: float = 20e-4
    regions_in_background: bool = False
    eyes_rms: float = 20e-6
    field_rms: float = 0.0
    gradient_rms: float = 0.0

    @property
    def bandwidth(self) -> float:
        """Width of the band [Hz]."""
        return self.band[1] - self.band[0]


@dataclass(frozen=True)
class SearchBrief:
    """Effort: seeded starts and number of ranked layouts.

    differ_by: sensors by which the ranks differ at least (0: chosen from the count). proof_parts: parts of the tree
    that branch and bound may examine to narrow the first layout's gap.
    """

    seed: int = 1
    starts: int = 20
    ranked: int = 3
    differ_by: int = 0
    proof_parts: int = 100
    time_allowance: float | None = None  # [s]; None: no clock


@dataclass(frozen=True)
class Brief:
    """Everything the pipeline needs to know about what is wanted."""

    title: str
    head: HeadBrief
    regions: tuple[RegionBrief, ...]
    stock: tuple[ElectrodeBrief | MagnetometerBrief, ...]
    places: PlacesBrief
    noise: NoiseBrief
    goal: Literal["information"]
    search: SearchBrief
    sha256: str  # of the brief file's bytes
    folder: Path  # where the brief lies, absolute; paths in its text are relative to it
