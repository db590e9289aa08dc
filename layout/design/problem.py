"""Lead fields and noise of a study under one scenario, as rows for the engine."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from layout.anatomy.build import build_head
from layout.anatomy.head import Region
from layout.anatomy.patches import cortex_patches, patches_of
from layout.anatomy.positions import family_names
from layout.anatomy.regions import region_strengths
from layout.anatomy.scalp_points import normals_at, project
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
from layout.design.hypotheses import localisation_model
from layout.design.scenarios import Scenario, own_scenario, scenarios
from layout.design.study import Progress, Study, silent
from layout.engine.localisation import LocalisationModel
from layout.engine.model import LinearModel
from layout.noise.assemble import assemble_noise
from layout.noise.calibration import Calibration, calibrate
from layout.noise.gain_and_crosstalk import with_gain_and_crosstalk
from layout.noise.model import NoiseModel
from layout.noise.recording import as_recorded, with_recording
from layout.noise.sensor import sensor_noise
from layout.physics.sphere_model import Displacements


@dataclass(frozen=True)
class Problem:
    """The study under one scenario as the engine's linear model, and what was assumed on the way.

    target_columns: region name -> its columns of model.target; nuisance_columns: what it is -> its columns of
    model.nuisance. localisation: the rows of the linearised errors, None where the brief does not ask for them.
    sensor_sd (n_channels,) [V or T]: what the rows were divided by.
    """

    scenario: Scenario
    model: LinearModel
    target_columns: dict[str, slice]
    nuisance_columns: dict[str, slice]
    localisation: LocalisationModel | None
    sensor_sd: np.ndarray
    calibration: Calibration
    displacements: Displacements

    def with_known_reference(self) -> Problem:
        """The same as if the potential of the reference were known."""
        known = np.zeros_like(self.model.offset)
        errors = self.localisation and replace(self.localisation, offset=known)
        return replace(self, model=replace(self.model, offset=known), localisation=errors)

    def one_region(self, name: str) -> LinearModel:
        """The model in which one region is wanted and the others are nuisance."""
        columns = self.target_columns[name]
        others = np.delete(self.model.target, np.arange(columns.start, columns.stop), axis=1)
        return LinearModel(
            self.model.target[:, columns],
            np.hstack([self.model.nuisance, others]),
            self.model.offset,
            self.model.candidate_of_channel,
        )


def build_problem(
    study: Study,
    progress: Progress = silent,
    scenario: Scenario | None = None,
    calibration: Calibration | None = None,
) -> Problem:
    """Lead fields and noise of a study under a scenario (default: the brief's own).

    calibration: strengths fixed before, which hold in every scenario (default: fixed now).
    """
    scenario = scenario or own_scenario(study)
    here, brief = scenario.study, study.brief
    progress("lead fields of the regions")
    targets, columns, start = [], {}, 0
    for region in here.regions:
        field = scenario.channels.lead_field(scenario.cortex, region.members, free=region.free_orientation)
        targets.append(region_columns(region, field.gain, region.areas))
        columns[region.name] = slice(start, start + targets[-1].shape[1])
        start += targets[-1].shape[1]
    progress("background activity")
    labels = patches(here)
    calibration = calibration or calibrated(here, labels)
    brief = as_recorded(brief, calibration)
    background = here.head.cortex.areas.copy()
    if not brief.noise.regions_in_background:
        for region in here.regions:
            background[region.members] -= region.areas
        background = np.maximum(background, 0.0)
    noise = assemble_noise(
        scenario.channels,
        scenario.cortex,
        brief.noise,
        calibration,
        labels,
        background,
        sensor_noise(here.head, brief, here.candidates, here.standard),
    )
    wanted = np.hstack(targets)
    noise = with_gain_and_crosstalk(_scaled(noise, scenario), wanted, here.candidates, brief.stock)
    target, nuisance, offset = noise.rows(wanted)
    model = LinearModel(target, nuisance, offset, here.candidates.candidate_of_channel)
    errors = None
    if brief.goal.kind == "localisation" or brief.goal.error_limits:
        progress("lead fields beside the regions' sources")
        errors = localisation_model(here.regions, brief.goal, scenario, model, noise.sensor_sd)
    return Problem(
        scenario,
        model,
        columns,
        noise.parts,
        errors,
        noise.sensor_sd,
        calibration,
        scenario.channels.displacements(scenario.cortex),
    )


def build_problems(study: Study, progress: Progress) -> tuple[Problem, ...]:
    """The rows of every scenario, the brief's own first; strengths are fixed there and hold in all."""
    own, *others = scenarios(study)
    first = build_problem(study, progress, own)
    problems = [first]
    for number, scenario in enumerate(others, 2):
        problems.append(
            build_problem(
                study,
                lambda doing, number=number: progress(f"scenario {number} of {len(others) + 1}: {doing}"),
                scenario,
                first.calibration,
            )
        )
    return tuple(problems)


def _scaled(noise: NoiseModel, scenario: Scenario) -> NoiseModel:
    """The noise with the scenario's factors on its amplitudes."""
    nuisance = scenario.noise_factor * noise.nuisance
    if "background" in noise.parts:
        nuisance[:, noise.parts["background"]] *= scenario.background_factor
    return replace(noise, sensor_sd=scenario.noise_factor * scenario.sensor_factor * noise.sensor_sd, nuisance=nuisance)


def region_columns(region: Region, gain: np.ndarray, areas: np.ndarray) -> np.ndarray:
    """Response of the channels to each independent source of a region at its expected strength [V or T]."""
    if region.coherent:
        weight = region.moment * areas / areas.sum()
        if gain.ndim == 2:
            return (gain @ weight)[:, None]
        return np.einsum("nmk,m->nk", gain, weight) / np.sqrt(3.0)
    strength = region_strengths(areas, region.moment)
    if gain.ndim == 2:
        return gain * strength
    return (gain * strength[:, None]).reshape(len(gain), -1) / np.sqrt(3.0)


def patches(study: Study) -> np.ndarray:
    """Background patches, the same pieces of cortex whatever the density of the sources."""
    head, area = study.head, study.brief.noise.patch_area
    if study.brief.head.source_mesh == "standard":
        return cortex_patches(head.cortex, area)
    standard = build_head(replace(study.brief.head, source_mesh="standard")).cortex
    return patches_of(head.cortex, standard, cortex_patches(standard, area))


def calibrated(study: Study, labels: np.ndarray) -> Calibration:
    """Strengths of background and eyes, fixed with the nominal conductivities at the 10-20 sites."""
    head = study.head
    sites = {name: study.standard[name] for name in family_names("10-20") if name in study.standard}
    normals = normals_at(head.scalp, project(head.scalp, np.array(list(sites.values()))))
    nominal = np.array(DEFAULT_CONDUCTIVITIES[len(study.cortex.conductivities)])
    assumed = calibrate(study.cortex, nominal, study.brief.noise, labels, sites, normals)
    return with_recording(assumed, study.brief, head, study.cortex, labels, study.standard)
