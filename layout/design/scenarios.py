"""The scenarios that a brief's layouts are judged under: other conductivities, noise levels and sensor poses."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from layout.anatomy.build import build_head
from layout.anatomy.positions import standard_positions
from layout.anatomy.regions import select_region
from layout.anatomy.scalp_points import normals_at, project
from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects import HeadBrief, ScenariosBrief
from layout.brief.objects_head import HeadSizeBrief
from layout.design.study import Study, cortex_model
from layout.physics.channels import Channels, CortexModel, candidate_channels
from layout.physics.given_lead_field import given_channels
from layout.physics.lead_field_files import read_lead_field
from layout.sensing.other_head import on_other_head

POSE_DRAWS = 7  # keeps the draws of poses apart from those of the search at the same seed


@dataclass(frozen=True)
class Scenario:
    """name; study: the head with its regions and candidates there; the channels as they sit; the cortex in its model;
    factors on noise amplitudes: all, sensors', brain.
    """

    name: str
    study: Study
    channels: Channels
    cortex: CortexModel
    noise_factor: float = 1.0
    sensor_factor: float = 1.0
    background_factor: float = 1.0


def own_scenario(study: Study) -> Scenario:
    """The head, noise and poses that the brief itself states."""
    path = study.brief.head.lead_field_file
    if path is None:
        channels = candidate_channels(study.candidates)
    else:
        channels = given_channels(study.candidates, study.cortex, read_lead_field(path), path)
    return Scenario("as stated", study, channels, study.cortex)


def scenarios(study: Study) -> tuple[Scenario, ...]:
    """The brief's own scenario and one for every other that it names, each differing from the first in one thing."""
    asked: ScenariosBrief = study.brief.scenarios
    own = own_scenario(study)
    found = [own]
    for conductivities in asked.conductivities:
        text = ", ".join(f"{value:g}" for value in conductivities)
        cortex = study.cortex.with_conductivities(np.array(conductivities))
        found.append(replace(own, name=f"conductivities {text} S/m", cortex=cortex))
    found += [_on_head(study, name) for name in asked.heads]
    found += [replace(own, name=f"all noise x {factor:g}", noise_factor=factor) for factor in asked.noise_factors]
    found += [
        replace(own, name=f"sensor noise x {factor:g}", sensor_factor=factor) for factor in asked.sensor_noise_factors
    ]
    found += [
        replace(own, name=f"background x {factor:g}", background_factor=factor) for factor in asked.background_factors
    ]
    rng = np.random.default_rng([study.brief.search.seed, POSE_DRAWS])
    for draw in range(asked.poses):
        channels = misplaced(study, own.channels, asked.pose_error, asked.pose_tilt, rng)
        found.append(replace(own, name=f"poses drawn, {draw + 1}", channels=channels))
    return tuple(found)


def _on_head(study: Study, name: str) -> Scenario:
    """The template scaled to a size of the survey, with the same candidates on it."""
    length, breadth = NAMED_SIZES[name]
    brief = replace(study.brief.head, size=HeadSizeBrief(length=length, breadth=breadth, name=name))
    return on_head(study, brief, f"head of the {name}")


def on_head(study: Study, brief: HeadBrief, name: str) -> Scenario:
    """Another head with the same candidates on it."""
    head = build_head(brief)
    standard = standard_positions(head.scalp, head.landmarks)
    there = replace(
        study,
        brief=replace(study.brief, head=brief),
        head=head,
        standard=standard,
        candidates=on_other_head(study.head, study.candidates, head, study.brief, standard),
        regions=tuple(select_region(head, region) for region in study.brief.regions),
        cortex=cortex_model(brief, head),
    )
    return Scenario(name, there, candidate_channels(there.candidates), there.cortex)


def misplaced(study: Study, channels: Channels, shift: float, tilt: float, rng: np.random.Generator) -> Channels:
    """The channels with every site's pose in error: `shift` [m] rms along each tangent of the scalp, `tilt` [rad] rms
    about each of them.

    Drawn independently for every site; all that sits there moves together. Electrodes stay on the scalp.
    """
    sites, scalp = study.candidates.sites, study.head.scalp
    at = study.candidates.site_of_channel
    origin = np.arange(len(sites)) if study.site_origin is None else study.site_origin
    draws = rng.normal(size=(2, origin.max() + 1, 2))[:, origin]
    along, turn = (
        size * np.einsum("sk,skd->sd", draw, sites.tangents)[at]
        for size, draw in zip((shift, tilt), draws, strict=True)
    )
    positions, normals = channels.positions + along, channels.normals
    electrodes = channels.is_electrode
    if electrodes.any():
        where = project(scalp, positions[electrodes])
        positions[electrodes] = where.positions
        normals = normals.copy()
        normals[electrodes] = normals_at(scalp, where)
    return channels.moved(positions, turn, normals)
