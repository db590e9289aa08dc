"""Channels that read a little more or less than they should, and a little of their neighbours.

Gain error. A channel reads (1 + ε) x for the signal x it should read, ε of rms g, unknown, independent between channels
and of the signal. Then E[(1 + ε_i) x_i (1 + ε_j) x_j] = C_ij + δ_ij g_i² C_ii, C the covariance of what the channels
should read: each channel gets independent noise of g² times its own power, target and background together. The second
moments are exact. That a gain keeps its error for a whole recording, so that this noise follows the signal and is not
Gaussian, is left out; averaging epochs does not remove it from the target, so powers are those after averaging. The
potential of the reference, of unlimited power, is left out: what gain errors make of it is common-mode rejection, a
matter of the amplifier.

Crosstalk. A channel reads x_i + Σ_j κ_ij x_j, the κ_ij unknown, of mean 0 and independent, Σ_j E[κ_ij²] = c². The
independent noise that this adds, Σ_j E[κ_ij²] C_jj over the sensors around, depends on which are chosen. It is never
more than c² times the largest C_jj of those that could be chosen within reach, and that is what is charged. So it is an
upper estimate for every layout, which a layout without near neighbours pays too; and the noise does not depend on the
choice, so goals stay concave and their bounds valid.

Derived here. Agreement that calibrations of magnetometer arrays reach: 2.0 mm, 1.2°, 1.3 % (Imaging Neurosci 2025,
imag_a_00535), a plausible gain error; no measured figure for crosstalk between sensors was found.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.spatial import cKDTree

from layout.brief.objects_stock import StockBrief
from layout.noise.model import NoiseModel
from layout.sensing.candidates import Candidates
from layout.units import MM

REACH = 50 * MM  # crosstalk from farther away is neglected: a small coil's field falls with the cube of the distance
SAME_PLACE = 1 * MM  # other candidates nearer than this cannot be chosen together with one


def with_gain_and_crosstalk(
    noise: NoiseModel, target: np.ndarray, candidates: Candidates, stock: tuple[StockBrief, ...]
) -> NoiseModel:
    """The noise with the gain errors and the crosstalk of the stock added to what is independent between channels.

    target (n_channels, n_target) [V or T]: responses to what is wanted, at the expected strengths, after averaging as
    the noise is. Without such errors the same model comes back.
    """
    kind = candidates.kind[candidates.candidate_of_channel]
    gain_error = np.array([entry.gain_error for entry in stock])[kind]
    crosstalk = np.array([entry.crosstalk for entry in stock])[kind]
    if not (gain_error.any() or crosstalk.any()):
        return noise
    power = (target**2).sum(axis=1) + (noise.nuisance**2).sum(axis=1)
    added = gain_error**2 * power
    if crosstalk.any():
        for mine in (candidates.is_electrode, ~candidates.is_electrode):
            rows = np.flatnonzero(mine)
            near = largest_near(power[rows], candidates.positions[rows], candidates.candidate_of_channel[rows])
            added[rows] += crosstalk[rows] ** 2 * near
    return replace(noise, sensor_sd=np.sqrt(noise.sensor_sd**2 + added))


def largest_near(power: np.ndarray, positions: np.ndarray, candidate: np.ndarray) -> np.ndarray:
    """The largest power (n,) among the channels that could be chosen within reach of each, 0 where there are none.

    power (n,); positions (n, 3) [m]; candidate (n,): of each channel. Other channels of the same candidate are within
    reach; other candidates at the same place are not, as they exclude each other.
    """
    largest = np.zeros(len(power))
    if len(power) == 0:
        return largest
    pairs = cKDTree(positions).query_pairs(REACH, output_type="ndarray")
    apart = np.linalg.norm(positions[pairs[:, 0]] - positions[pairs[:, 1]], axis=1)
    pairs = pairs[(candidate[pairs[:, 0]] == candidate[pairs[:, 1]]) | (apart >= SAME_PLACE)]
    for one, other in (pairs.T, pairs.T[::-1]):
        np.maximum.at(largest, one, power[other])
    return largest
