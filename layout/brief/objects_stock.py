"""The stock of a brief: what kinds of sensors there are to place, in SI units."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

Family = Literal["10-20", "10-10", "10-5"]
Axes = Literal["normal", "tangents", "any_of_three", "two_axis", "three_axis", "free", "free_two"]

GradiometerShape = Literal["axial", "planar"]
Gradients = Literal["one_tangent", "both_tangents"]


@dataclass(frozen=True)
class SitesBrief:
    """Where sensors of a kind may sit; exactly one source of sites is set. Paths are absolute."""

    family: Family | None = None
    grid_pitch: float | None = None  # [m]
    electrodes_tsv: Path | None = None
    slots_csv: Path | None = None


@dataclass(frozen=True)
class FootprintBrief:
    """The room a sensor takes on the scalp, about its centre.

    A circle of diameter width = depth [m], or a rectangle of width to the sensor's right and depth to its front [m],
    turned by `turn` [rad] about the outward axis, against the clock as seen from outside.
    """

    shape: Literal["circle", "rectangle"]
    width: float
    depth: float
    turn: float = 0.0


@dataclass(frozen=True)
class ElectrodeBrief:
    """Electrodes of one kind. `count` includes the reference contact. Noise [V rms] in the brief's band.

    count is the most, count_at_least the least (None: see `Brief.least`). footprint None: takes no room; clearance [m]:
    least gap between this footprint and any other. price in any currency, per sensor and per channel. disc_diameter
    [m]: the potential is averaged over a disc of the scalp, 0 for a point. gain_error: rms of the channels' relative
    gain errors. crosstalk: root of the summed squares of the fractions of its neighbours' signals in a channel.
    """

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
    count_at_least: int | None = None
    price_per_channel: float = 0.0
    footprint: FootprintBrief | None = None
    clearance: float = 0.0
    disc_diameter: float = 0.0
    gain_error: float = 0.0
    crosstalk: float = 0.0
    kind: Literal["electrode"] = "electrode"


@dataclass(frozen=True)
class MagnetometerBrief:
    """Magnetometers of one kind. `noise_density` [T/sqrt(Hz)], lengths [m].

    axes: "normal" (axis along the scalp normal), "tangents" (one of the two tangents is chosen),
    "any_of_three" (normal or one tangent is chosen), "two_axis" (normal and one tangent, two channels),
    "three_axis" (three channels), "free" (one axis, any direction within tilt_limit [rad] of the normal; None: any at
    all), "free_two" (two axes at right angles, any directions), or a list of unit axes of which one is chosen, each by
    its components along the normal, to the front and to the left.
    standoff: scalp to sensitive centre when the housing touches the scalp.
    housing: face width, face depth, length. hair: extra gap between scalp and housing.
    cell: edges of the volume over which the field is averaged, along the housing's; coil_diameter: of a flat round coil
    across the axis instead; with neither, the sensor is a point.
    Counts, footprint, clearance, prices, gain_error and crosstalk as for electrodes.
    """

    name: str
    count: int
    sites: SitesBrief
    noise_density: float
    axes: Axes | tuple[tuple[float, float, float], ...] = "normal"
    standoff: float = 6.5e-3
    hair: float = 0.0
    housing: tuple[float, float, float] = (12.4e-3, 16.6e-3, 24.4e-3)
    spacing: float = 0.0
    price: float = 1.0
    keep_out: tuple[str, ...] = ("eyes", "ears", "neck")
    only_in: tuple[str, ...] = ()
    tilt_limit: float | None = None
    count_at_least: int | None = None
    price_per_channel: float = 0.0
    footprint: FootprintBrief | None = None
    clearance: float = 0.0
    cell: tuple[float, float, float] | None = None
    coil_diameter: float = 0.0
    gain_error: float = 0.0
    crosstalk: float = 0.0
    kind: Literal["magnetometer"] = "magnetometer"

    @property
    def free_axes(self) -> int:
        """How many axes of each sensor may point anywhere: 0, 1 or 2."""
        return {"free": 1, "free_two": 2}.get(self.axes, 0) if isinstance(self.axes, str) else 0


@dataclass(frozen=True)
class GradiometerBrief:
    """First-order gradiometers of one kind: the difference [T] of the fields along the normal in two equal coils.

    shape: "axial" (the near coil, at the sensitive centre, minus a coil `baseline` [m] farther out) or "planar" (two
    coils half a baseline to both sides of the sensitive centre along a tangent). noise_density [T/sqrt(Hz)]: of the
    difference. gradients, planar only: "one_tangent" (one of the two tangents is chosen) or "both_tangents" (two
    channels). All else as for magnetometers.
    """

    name: str
    count: int
    sites: SitesBrief
    shape: GradiometerShape
    baseline: float
    noise_density: float
    gradients: Gradients = "one_tangent"
    standoff: float = 6.5e-3
    hair: float = 0.0
    housing: tuple[float, float, float] = (12.4e-3, 16.6e-3, 24.4e-3)
    spacing: float = 0.0
    price: float = 1.0
    keep_out: tuple[str, ...] = ("eyes", "ears", "neck")
    only_in: tuple[str, ...] = ()
    count_at_least: int | None = None
    price_per_channel: float = 0.0
    footprint: FootprintBrief | None = None
    clearance: float = 0.0
    cell: tuple[float, float, float] | None = None
    coil_diameter: float = 0.0
    gain_error: float = 0.0
    crosstalk: float = 0.0
    kind: Literal["gradiometer"] = "gradiometer"

    @property
    def free_axes(self) -> int:
        """A gradiometer stands along the normal: none of its axes is free."""
        return 0


HousedBrief = MagnetometerBrief | GradiometerBrief
StockBrief = ElectrodeBrief | HousedBrief
HOUSED = ("magnetometer", "gradiometer")  # kinds that measure a field from inside a rigid housing
