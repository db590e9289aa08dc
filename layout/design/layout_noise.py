"""What a layout sees of the whole cortex, and what the noise of its channels is made of."""

from __future__ import annotations

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from layout.design.objective import Objective
from layout.design.scenarios import Scenario, own_scenario
from layout.design.study import Study
from layout.evidence.simulation_forward import some_channels
from layout.outputs.evidence_result import ChannelNoise
from layout.physics.given_lead_field import GivenChannels, channel_names

OWN_NOISE = "sensor"


def channel_noise(study: Study, objective: Objective, chosen: np.ndarray, numbers: np.ndarray) -> ChannelNoise:
    """The noise of the channels of the chosen candidates (k,), whose sensors have the `numbers` (k,)."""
    rows, problem = _rows(study, chosen), objective.problems[0]
    sd = problem.sensor_sd[rows]
    nuisance = problem.model.nuisance[rows] * sd[:, None]
    parts = {OWN_NOISE: sd}
    for name, columns in problem.nuisance_columns.items():
        part = np.linalg.norm(nuisance[:, columns], axis=1)
        if part.any():
            parts[name] = part
    covariance = nuisance @ nuisance.T + np.diag(sd**2)
    whole = np.sqrt(np.diag(covariance))
    names, owner = channel_names(study.candidates), study.candidates.candidate_of_channel[rows]
    number_of = dict(zip(chosen.tolist(), numbers.tolist(), strict=True))
    return ChannelNoise(
        names=tuple(names[row] for row in rows),
        sensor=np.array([number_of[one] for one in owner.tolist()]),
        units=tuple("V" if study.candidates.is_electrode[row] else "T" for row in rows),
        parts=parts,
        correlation=covariance / np.outer(whole, whole),
    )


def sensitivity(study: Study, objective: Objective, chosen: np.ndarray, moment: float) -> np.ndarray:
    """Signal-to-noise ratio (n_sources,) of a dipole of `moment` [A·m] at each source of the cortex, along its normal,
    or the rms over directions where the head has no normals.

    q sqrt(l^T N^-1 l), with N the noise of the chosen (k,) and the unknown potential of the reference projected out.
    """
    rows, problem = _rows(study, chosen), objective.problems[0]
    scale = problem.sensor_sd[rows]
    gain = _whole_cortex(own_scenario(study), rows)
    signal = moment * gain.reshape(len(rows), -1) / scale[:, None]
    nuisance, offset = problem.model.nuisance[rows], problem.model.offset[rows]
    factor = cho_factor(np.eye(len(rows)) + nuisance @ nuisance.T, lower=True)
    power = np.einsum("nm,nm->m", signal, cho_solve(factor, signal))
    if offset.any():
        weighed = cho_solve(factor, offset)
        power -= (weighed @ signal) ** 2 / (weighed @ offset)
    return np.sqrt(np.maximum(power, 0.0).reshape(gain.shape[1:]).reshape(gain.shape[1], -1).mean(axis=1))


def _whole_cortex(scenario: Scenario, rows: np.ndarray) -> np.ndarray:
    """Gain (n_rows, n_sources) of some channels to the whole cortex, (n_rows, n_sources, 3) without normals."""
    sources, free = np.arange(len(scenario.study.head.cortex)), not scenario.study.head.normal_orientation
    if isinstance(scenario.channels, GivenChannels):
        return scenario.channels.lead_field(scenario.cortex, sources, free).gain[rows]
    return some_channels(scenario.channels, rows).lead_field(scenario.cortex, sources, free).gain


def _rows(study: Study, chosen: np.ndarray) -> np.ndarray:
    """The channels of the chosen candidates, in their order."""
    owner = study.candidates.candidate_of_channel
    return np.concatenate([np.flatnonzero(owner == one) for one in chosen])
