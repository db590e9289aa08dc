"""All the noise of a brief's candidates in one model."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.brief.objects import NoiseBrief
from layout.noise.background import background_columns
from layout.noise.calibration import Calibration
from layout.noise.eyes import eye_columns
from layout.noise.model import NoiseModel, noise_model
from layout.noise.surroundings import surroundings_columns
from layout.physics.channels import Channels
from layout.physics.sphere_model import SphereModel


def assemble_noise(
    channels: Channels,
    sphere: SphereModel,
    head: Head,
    noise: NoiseBrief,
    calibration: Calibration,
    labels: np.ndarray,
    left_out: np.ndarray,
    sensor_sd: np.ndarray,
) -> NoiseModel:
    """Sensor noise, background brain, eyes and surroundings of the channels, averages taken into account.

    labels (n_sources,): patches; left_out (n_sources,) bool: sources of the regions, unless they count as background;
    sensor_sd (n_channels,) [V or T] of a single epoch.
    """
    parts = {
        "background": calibration.density * background_columns(channels, sphere, head, labels, left_out),
        "surroundings": surroundings_columns(channels.positions, channels.axes, noise.field_rms, noise.gradient_rms),
    }
    if calibration.eye:
        parts["eyes"] = eye_columns(channels.eye_gain(sphere, head), calibration.eye)
    return noise_model(sensor_sd, parts, channels.is_electrode, noise.averages)
