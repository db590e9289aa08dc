"""The housed sensors of a layout as a helmet builder needs them: pose of the housing, what it measures and where."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.outputs.bids.channels import housed_of
from layout.outputs.result import DesignResult, RankedLayout, SensorRow


@dataclass(frozen=True)
class HousedSensor:
    """One sensor in a rigid housing, SI units.

    Housing frame: origin in the middle of the face that is turned to the scalp, z along the housing's length away from
    the head, x along the face's width (towards the right of the head), y along its depth (towards the front).
    row: number, names and places; size (3,) [m]: extent along x, y, z, the box lying from z = 0 to its length. pose
    (4, 4): housing frame to head frame, translation in m. centre (3,) [m] and axes (n_channels, 3): sensitive centre
    and unit sensitive axes in the housing frame. baselines (n_channels, 3) [m]: of gradiometers, from the coil that
    counts negative to the one that counts positive, in the housing frame; zeros elsewhere. lift [m]: from the place on
    the scalp to the face along z. hair [m]: the brief's allowance, a part of the lift. slot_gap [m]: the part of the
    lift that is there because the helmet's slot does not let the housing in any farther.
    """

    row: SensorRow
    size: np.ndarray
    pose: np.ndarray
    centre: np.ndarray
    axes: np.ndarray
    baselines: np.ndarray
    lift: float
    hair: float
    slot_gap: float


def housed_sensors(result: DesignResult, layout: RankedLayout) -> tuple[HousedSensor, ...]:
    """The housed sensors of a layout with the poses that the physics used; none where all are electrodes."""
    candidates = result.candidates
    sensors = []
    for row in housed_of(layout):
        entry = result.brief.stock[row.kind_number]
        pose = candidates.housing_pose[row.candidate]
        turn, face = pose[:3, :3], pose[:3, 3]
        baselines = np.zeros_like(row.axes)
        if entry.kind == "gradiometer":
            baselines = candidates.baselines[candidates.candidate_of_channel == row.candidate]
        sensors.append(
            HousedSensor(
                row=row,
                size=np.array(entry.housing, dtype=float),
                pose=pose,
                centre=turn.T @ (row.position - face),
                axes=row.axes @ turn,
                baselines=baselines @ turn,
                lift=float((face - row.scalp_position) @ turn[:, 2]),
                hair=entry.hair,
                slot_gap=float(candidates.sites.travel_gap[candidates.site[row.candidate]]),
            )
        )
    return tuple(sensors)


def stacked(sensors: tuple[HousedSensor, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Poses (n, 4, 4) and sizes (n, 3) [m] of the sensors."""
    return np.array([one.pose for one in sensors]), np.array([one.size for one in sensors])
