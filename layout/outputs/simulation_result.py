"""What a finished simulation is: the object that its tables are made from, in SI units."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from layout.brief.objects import Brief
from layout.evidence.simulation import Comparison

SCHEMA = 1  # of simulation.json


@dataclass(frozen=True)
class ErrorRow:
    """Fits of one layout at one level of noise: over all plants, those of a region, or those of a band of depth.

    noise_factor: of all noise amplitudes of the brief; snr: rms of the plants' signals per channel, in units of the
    noise there once its correlations are taken out.
    """

    layout: str
    over: Literal["all", "region", "depth"]
    group: str
    noise_factor: float
    snr: float
    figures: Comparison


@dataclass(frozen=True)
class SpreadRow:
    """A noise-normalised minimum-norm map of one region's dipoles: means of peak displacement and spatial dispersion
    [m] without noise, and the median [m] of the displacement with the brief's noise.
    """

    layout: str
    region: str
    displacement: float
    dispersion: float
    noisy_displacement: float


@dataclass(frozen=True)
class TestedLayout:
    """name; sensors: names of the chosen candidates; note: what to know about it; threshold: the largest noise factor
    up to which the errors over all plants follow the bound, None where they do at none.
    """

    name: str
    sensors: tuple[str, ...]
    channels: int
    note: str
    threshold: float | None


@dataclass(frozen=True)
class Simulation:
    """A finished simulation. bound: what the errors are compared with, in words; grid: where the fits start, in words;
    free_map: whether the map's sources are free; notes: assumptions, one sentence each.
    """

    brief: Brief
    version: str
    seed: int
    fits: int
    noise_factors: tuple[float, ...]
    shift: float
    bound: str
    grid: str
    layouts: tuple[TestedLayout, ...]
    errors: tuple[ErrorRow, ...]
    spreads: tuple[SpreadRow, ...]
    notes: tuple[str, ...]
