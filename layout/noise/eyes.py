"""Eye activity as nuisance: a free dipole at each eyeball, scaled to what frontal electrodes see of it."""

from __future__ import annotations

import numpy as np


def eye_moment(calibration_gain: np.ndarray, frontal: np.ndarray, rms: float) -> float:
    """Moment [A·m] rms of each component of each eye's dipole for which the frontal electrodes see `rms` [V].

    calibration_gain (n_sites, 2, 3) [V/(A·m)] at the calibration electrodes; frontal (n,): the rows of Fp1 and Fp2;
    their potential is taken against the mean of all calibration electrodes.
    """
    columns = calibration_gain.reshape(len(calibration_gain), -1)
    seen = (columns - columns.mean(axis=0))[frontal]
    return rms / float(np.sqrt((seen**2).sum(axis=1).mean()))


def eye_columns(gain: np.ndarray, moment: float) -> np.ndarray:
    """Responses (n_channels, 6) to the two eyes' independent moment components; gain (n_channels, 2, 3)."""
    return moment * gain.reshape(len(gain), -1)
