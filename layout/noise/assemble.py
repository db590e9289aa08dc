"""All the noise of a brief's candidates in one model."""

from __future__ import annotations

import numpy as np

from layout.brief.objects import NoiseBrief
from layout.noise.background import background_columns
from layout.noise.calibration import Calibration
from layout.noise.eyes import eye_columns
from layout.noise.model import NoiseModel, noise_model
from layout.noise.surroundings import surroundings_columns
from layout.physics.channels import Channels, CortexModel


def assemble_noise(
    channels: Channels,
    cortex: CortexModel,
    noise: NoiseBrief,
    calibration: Calibration,
    labels: np.ndarray,
    areas: np.ndarray,
    sensor_sd: np.ndarray,
) -> NoiseModel:
    """Sensor noise, background brain, eyes and surroundings of the channels, averages taken into account.

    labels (n_sources,): patches; areas (n_sources,) [m²]: of background at each source;
    sensor_sd (n_channels,) [V or T] of a single epoch.
    """
    points = channels.points
    parts = {
        "background": calibration.density * background_columns(channels, cortex, labels, areas),
        "surroundings": channels.combine(
            surroundings_columns(points.positions, points.axes, noise.field_rms, noise.gradient_rms)
        ),
    }
    if calibration.eye:
        parts["eyes"] = eye_columns(channels.eye_gain(cortex), calibration.eye)
    return noise_model(sensor_sd, parts, channels.is_electrode, noise.averages)
