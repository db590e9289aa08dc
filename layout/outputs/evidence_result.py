"""The evidence that a design hands over beside its layouts: placement, channel curve, sensitivity, noise; SI units."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.outputs.curve_tables import Curve
from layout.outputs.placement_tables import Placement


@dataclass(frozen=True)
class ChannelNoise:
    """Noise of the channels of one layout, averaged as the brief says.

    names (n,): of the channels; sensor (n,): number of the sensor that each belongs to; units (n,): "V" or "T".
    parts: what makes it -> standard deviation (n,) [V or T], independent of one another: "sensor" the channel's own,
    then "background", "eyes", "surroundings" and others as the brief has them. correlation (n, n): of the whole noise.
    Potentials are against a point at infinity: any reference common to all electrodes comes on top.
    """

    names: tuple[str, ...]
    sensor: np.ndarray
    units: tuple[str, ...]
    parts: dict[str, np.ndarray]
    correlation: np.ndarray


@dataclass(frozen=True)
class Evidence:
    """Evidence on every ranked layout, in the order of the ranks.

    placements: room, substitutes and expected losses; empty where sensors cannot be moved because the lead field is
    given by a file. curve: value and bound against the number of sensors or the budget. sensitivity: per layout
    (n_sources,), the signal-to-noise ratio of a dipole of `probe_moment` [A·m] along the normal of every source of the
    cortex, q sqrt(l^T N^-1 l) with a flat reference offset (the amplitude ratio of the best linear detector, Kay 1998,
    Fundamentals of statistical signal processing II, sec. 4.4; from memory). noise: of each layout's channels.
    """

    placements: tuple[Placement, ...]
    curve: Curve | None
    sensitivity: tuple[np.ndarray, ...]
    probe_moment: float
    noise: tuple[ChannelNoise, ...]
