"""What a finished design is: the one object that every table, picture and page is made from, in SI units."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from layout.anatomy.head import Head, Region
from layout.brief.objects import Brief
from layout.noise.calibration import Figure
from layout.outputs.evidence_result import Evidence
from layout.sensing.candidates import Candidates

SCHEMA = 1  # of ranking.json


@dataclass(frozen=True)
class SensorRow:
    """One chosen sensor.

    number: placing number from 1, also on the pictures. candidate: index into the candidates, -1 for the ground. kind:
    name in the stock; kind_number: its place there, -1 for the ground. normal (3,): of the scalp. position (3,) [m]:
    sensitive centre (the scalp point for electrodes); scalp_position (3,) [m]. axes (n_channels, 3): unit sensitive
    axes, zeros for electrodes. nearest_offset [m]: straight distance to the nearest standard position.
    landmark_distance (4,) [m]: along the scalp to NAS, LPA, RPA, inion. arc_fractions (2,): along the sagittal and the
    coronal arc. worth: what the layout loses without this sensor, in
    the result's unit.
    """

    number: int
    candidate: int
    name: str
    kind: str
    kind_number: int
    kind_type: Literal["electrode", "magnetometer", "gradiometer"]
    site: str
    position: np.ndarray
    scalp_position: np.ndarray
    normal: np.ndarray
    axis_name: str
    axes: np.ndarray
    nearest_name: str
    nearest_offset: float
    landmark_distance: np.ndarray
    arc_fractions: np.ndarray
    worth: float
    role: Literal["reference", "ground", ""] = ""


@dataclass(frozen=True)
class RegionFigure:
    """What a layout tells about one region alone: bits, and its linearised error [m] (rms and worst over the region),
    None where no errors were asked for.
    """

    bits: float
    error_rms: float | None = None
    error_worst: float | None = None


@dataclass(frozen=True)
class RankedLayout:
    """One layout of the ranked list.

    value and bound in the result's unit; the bound covers every allowed layout that differs from all earlier
    ranks. moved: sensors by which it differs from the nearest earlier rank, None for rank 1. per_region: region
    name -> what the layout tells about it alone. equals_even_spread_of: the smallest even spread
    that reaches this value, None when an even spread of `even_spread_limit` sensors (the largest tried) is
    still below. cost: sum of the prices. housings_meet: pairs of chosen magnetometers whose housings would share
    space, None without magnetometers.
    """

    rank: int
    value: float
    bound: float
    gap_percent: float
    proven: bool
    cost: float
    sensors: tuple[SensorRow, ...]
    moved: int | None
    chosen: tuple[int, ...]
    per_region: dict[str, RegionFigure]
    equals_even_spread_of: int | None
    even_spread_limit: int
    housings_meet: int | None = None


@dataclass(frozen=True)
class Baseline:
    """What choosing without a search gives at the same count. chosen: candidate indices where there is one
    layout."""

    name: str
    value: float
    percent_of_best: float
    note: str = ""
    chosen: tuple[int, ...] | None = None


@dataclass(frozen=True)
class PolishedSensor:
    """One sensor after sliding. name: of its candidate on the grid; position (3,) [m]: sensitive centre; scalp_position
    (3,) [m]; axes (n_channels, 3): unit, zeros for electrodes; slid [m]: straight distance from the grid's site.
    """

    name: str
    position: np.ndarray
    scalp_position: np.ndarray
    axes: np.ndarray
    slid: float


@dataclass(frozen=True)
class Polished:
    """Layout 1 with its sensors slid off the grid: value in the result's unit, gain over the grid [per cent].

    No bound covers it: the ranking's holds for the candidates of the grid.
    """

    value: float
    gain_percent: float
    sensors: tuple[PolishedSensor, ...]


@dataclass(frozen=True)
class Reach:
    """The fewest sensors that reach a target, in the result's unit.

    found: the fewest with which a layout that reaches it was met, None where even the most allowed do not. too_few: the
    largest count certified not to reach it. values and bounds: sensors -> best value met, certified limit.
    """

    target: float
    found: int | None
    too_few: int
    values: dict[int, float]
    bounds: dict[int, float]


@dataclass(frozen=True)
class DesignResult:
    """A finished design.

    bound: of rank 1, as printed; root_bound: of the relaxation at `weights` (n_candidates,). proven_within:
    the gap [per cent] up to which a layout counts as proven. bound_from: what gave the first layout's bound,
    in words. figures_of_noise: label -> figure beside its band. search_effort: label -> count, nothing that
    depends on the clock. notes: heading -> assumptions and weaknesses, one sentence each. audit: arrays of
    audit.npz by name. reach: what was found where the fewest sensors were asked for.
    polished: layout 1 slid off the grid, where that was asked for. evidence: None where it was not asked for.
    """

    brief: Brief
    version: str
    goal: str
    unit: str
    layouts: tuple[RankedLayout, ...]
    baselines: tuple[Baseline, ...]
    bound: float
    root_bound: float
    weights: np.ndarray
    candidates: Candidates
    head: Head
    regions: tuple[Region, ...]
    bound_from: str = ""
    notes: dict[str, tuple[str, ...]] = field(default_factory=dict)
    figures_of_noise: dict[str, Figure] = field(default_factory=dict)
    stopped_by_clock: bool = False
    search_effort: dict[str, int | float | str] = field(default_factory=dict)
    audit: dict[str, np.ndarray] = field(default_factory=dict)
    proven_within: float = 0.1
    reach: Reach | None = None
    polished: Polished | None = None
    evidence: Evidence | None = None
