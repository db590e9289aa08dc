"""The noise of every channel in one object, and the engine's rows made from it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class NoiseModel:
    """Noise of n_channels channels in their own unit (V or T), averages already taken into account.

    sensor_sd (n,): rms of the noise that is independent between channels. nuisance (n, n_nuisance): one column for each
    independent unwanted source of unit variance. parts: name -> slice of the nuisance columns. offset (n,): 1 for
    electrodes, which share the unknown potential of the reference, 0 elsewhere.
    """

    sensor_sd: np.ndarray
    nuisance: np.ndarray
    parts: dict[str, slice]
    offset: np.ndarray

    def rows(self, target: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Target (n, n_target) [V or T], nuisance and offset, each divided by the channel's independent noise."""
        scale = 1.0 / self.sensor_sd
        return target * scale[:, None], self.nuisance * scale[:, None], self.offset * scale


def noise_model(
    sensor_sd: np.ndarray, parts: dict[str, np.ndarray], is_electrode: np.ndarray, averages: int
) -> NoiseModel:
    """Noise model of `averages` averaged epochs: every covariance is divided by their number.

    sensor_sd (n,) and the parts' columns (n, any) are those of a single epoch; is_electrode (n,) bool.
    """
    shrink = 1.0 / np.sqrt(averages)
    widths = np.cumsum([0, *(columns.shape[1] for columns in parts.values())])
    slices = {name: slice(int(a), int(b)) for name, a, b in zip(parts, widths[:-1], widths[1:], strict=True)}
    nuisance = np.hstack([*parts.values(), np.zeros((len(sensor_sd), 0))])
    return NoiseModel(sensor_sd * shrink, nuisance * shrink, slices, is_electrode.astype(float))
