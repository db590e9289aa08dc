"""The dipoles whose localisation is judged: one at each source of the regions, with its priors."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Region
from layout.brief.objects import GoalBrief
from layout.design.scenarios import Scenario
from layout.engine.localisation import LocalisationModel
from layout.engine.model import LinearModel
from layout.physics.derivatives import lead_field_derivatives


def localisation_model(
    regions: tuple[Region, ...], goal: GoalBrief, scenario: Scenario, model: LinearModel, sensor_sd: np.ndarray
) -> LocalisationModel:
    """One hypothesis for each source of the regions, three where its moment is free.

    model: the information's rows, whose nuisance and offset are shared; sensor_sd (n_channels,) [V or T].
    """
    parts = [_of_region(region, goal, scenario) for region in regions]
    derivatives = np.concatenate([rows for rows, _ in parts], axis=1) / sensor_sd[:, None, None]
    share = np.concatenate([share for _, share in parts])
    return LocalisationModel(
        derivatives=derivatives,
        nuisance=model.nuisance,
        offset=model.offset,
        candidate_of_channel=model.candidate_of_channel,
        spread=np.full((derivatives.shape[1], 3), goal.position_prior),
        share=share / share.sum(),
        region=np.repeat(np.arange(len(regions)), [len(share) for _, share in parts]),
    )


def _of_region(region: Region, goal: GoalBrief, scenario: Scenario) -> tuple[np.ndarray, np.ndarray]:
    """Derivatives of the channels (n_channels, m, 6) per prior standard deviation of place and moment; share (m,)."""
    members, areas = region.members, region.areas
    if region.free_orientation:
        directions = np.tile(np.eye(3), (len(members), 1))
        members, areas = np.repeat(members, 3), np.repeat(areas, 3)
    else:
        directions = scenario.cortex.head.cortex.normals[members]
    at = lead_field_derivatives(scenario.channels, scenario.cortex, members, region.moment * directions)
    by_moment = goal.moment_spread * region.moment * at.gain
    rows = np.concatenate([goal.position_prior * at.slopes, by_moment], axis=2)
    if goal.region_weights:
        return rows, areas / areas.sum() * goal.region_weights.get(region.name, 0.0)
    return rows, areas
