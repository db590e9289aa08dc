"""What a finished design is: the one object that every table, picture and page is made from, in SI units."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from layout.anatomy.head import Head, Region
from layout.brief.objects import Brief
from layout.noise.calibration import Figure
from layout.sensing.candidates import Candidates

SCHEMA = 1  # of ranking.json


@dataclass(frozen=True)
class SensorRow:
    """One chosen sensor.

    number: placing number from 1, also on the pictures. candidate: index into the candidates. kind: name in
    the stock. position (3,) [m]: sensitive centre (the scalp point for electrodes); scalp_position (3,) [m].
    axes (n_channels, 3): unit sensitive axes, zeros for electrodes. nearest_offset [m]: straight distance to
    the nearest standard position. landmark_distance (4,) [m]: along the scalp to NAS, LPA, RPA, inion.
    arc_fractions (2,): along the sagittal and the coronal arc. marginal_bits: what the layout loses without
    this sensor.
    """

    number: int
    candidate: int
    name: str
    kind: str
    kind_type: Literal["electrode", "magnetometer"]
    site: str
    position: np.ndarray
    scalp_position: np.ndarray
    axis_name: str
    axes: np.ndarray
    nearest_name: str
    nearest_offset: float
    landmark_distance: np.ndarray
    arc_fractions: np.ndarray
    marginal_bits: float
    role: Literal["reference", ""] = ""


@dataclass(frozen=True)
class RankedLayout:
    """One layout of the ranked list.

    value and bound in the result's unit; the bound covers every allowed layout that differs from all earlier
    ranks. moved: sensors by which it differs from the nearest earlier rank, None for rank 1. per_region_bits:
    region name to the information about that region alone. equals_even_spread_of: the smallest even spread
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
    per_region_bits: dict[str, float]
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
class DesignResult:
    """A finished design.

    bound: of rank 1, as printed; root_bound: of the relaxation at `weights` (n_candidates,). proven_within:
    the gap [per cent] up to which a layout counts as proven. bound_from: what gave the first layout's bound,
    in words. figures_of_noise: label -> figure beside its band. search_effort: label -> count, nothing that
    depends on the clock. notes: heading -> assumptions and weaknesses, one sentence each. audit: arrays of
    audit.npz by name.
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
